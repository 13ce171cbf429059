"""Splitting methods of Blanes and Moan, for two general operators and of Nyström type."""

from __future__ import annotations

from trueturn.formulas.entry import Entry, closed_even, closed_odd
from trueturn.formulas.structure import NYSTROM

__all__ = ["ENTRIES"]

SOURCE = (
    "S. Blanes and P. C. Moan, 'Practical symplectic partitioned Runge-Kutta and Runge-Kutta-Nyström methods', J. "
    "Comput. Appl. Math. 142, 313 (2002), "
)

ENTRIES = (
    Entry(
        name="blanes-moan-4",
        order=4,
        source=SOURCE + "Table 2, S6; from memory",
        a=closed_odd("0.0792036964311957", "0.353172906049774", "-0.0420650803577195"),
        b=closed_even("0.209515106613362", "-0.143851773179818"),
    ),
    Entry(
        name="blanes-moan-6",
        order=6,
        source=SOURCE + "Table 2, S10; from memory",
        a=closed_odd(
            "0.0502627644003922",
            "0.413514300428344",
            "0.0450798897943977",
            "-0.188054853819569",
            "0.541960678450780",
        ),
        b=closed_even("0.148816447901042", "-0.132385865767784", "0.067307604692185", "0.432666402578175"),
    ),
    Entry(
        name="blanes-moan-nystrom-6",
        order=4,
        source=SOURCE + "Table 3, SRKN of 11 stages, potential first; from memory, verified",
        a=closed_even(
            "0.0414649985182624",
            "0.198128671918067",
            "-0.0400061921041533",
            "0.0752539843015807",
            "-0.0115113874206879",
        ),
        b=closed_odd(
            "0.123229775946271",
            "0.290553797799558",
            "-0.127049212625417",
            "-0.246331761062075",
            "0.357208872795928",
        ),
        requires=NYSTROM,
        special_order=6,
    ),
)
