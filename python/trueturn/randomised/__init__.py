"""Randomised product formulas: circuits drawn from a seed, their average, and proven bounds on it.

======================  ==============================================================================================
`permuted`              a random order of the parts in each step
`directed`              each step forward or backward
`qdrift`                rotations drawn one by one, large terms more often
`partly`                large terms by a product formula, the tail drawn
`framed`                one circuit in random Pauli frames, its unitary unchanged
======================  ==============================================================================================

Each gives an `Ensemble`: `Ensemble.sample` makes its circuits, `Ensemble.average` measures what they do on average, and
`Ensemble.channel_bound` says what is proven about that average. A bound on the average is none on a sample.
"""

from __future__ import annotations

from trueturn.randomised.averages import Average
from trueturn.randomised.channel import ChannelBound, least_qdrift_draws, qdrift_bound, random_direction_bound
from trueturn.randomised.drift import Drift, qdrift
from trueturn.randomised.ensemble import Ensemble
from trueturn.randomised.estimates import Estimate
from trueturn.randomised.frames import Framed, framed
from trueturn.randomised.mixed import Partly, divided, partly
from trueturn.randomised.orders import Directed, Permuted, directed, permuted

__all__ = [
    "Average",
    "ChannelBound",
    "Directed",
    "Drift",
    "Ensemble",
    "Estimate",
    "Framed",
    "Partly",
    "Permuted",
    "directed",
    "divided",
    "framed",
    "least_qdrift_draws",
    "partly",
    "permuted",
    "qdrift",
    "qdrift_bound",
    "random_direction_bound",
]
