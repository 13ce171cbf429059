"""The part of a reference that an ensemble is compared with."""

from __future__ import annotations

from dataclasses import dataclass

from trueturn.errors import ArgumentError, StateShapeError
from trueturn.randomised.ensemble import Ensemble
from trueturn.reference import Reference
from trueturn.state import State

__all__ = ["Truth", "truth_of"]


@dataclass(frozen=True)
class Truth:
    """Reference state and expectations at one time; nothing where no reference is given."""

    reference: Reference | None
    time: float
    place: int

    @property
    def state(self) -> State | None:
        """The reference state."""
        if self.reference is None:
            return None
        states = self.reference.states
        return states[self.place] if len(states) == len(self.reference.times) else states[-1]

    @property
    def state_bound(self) -> float:
        """How far the reference state may be from the exact one."""
        return 0.0 if self.reference is None else self.reference.certificate.error_bound[self.time]

    def expectation(self, name: str) -> tuple[float | None, float]:
        """Return an expectation and its bound, or (None, 0) where it was not recorded."""
        if self.reference is None or name not in self.reference.expectations:
            return None, 0.0
        return (
            float(self.reference.expectations[name][self.place]),
            float(self.reference.expectation_bounds[name][self.place]),
        )


def truth_of(ensemble: Ensemble, reference: Reference | None) -> Truth:
    """Find the ensemble's time in a reference; an ensemble without a time is compared at the furthest one."""
    if reference is None:
        return Truth(None, 0.0, 0)
    if not isinstance(reference, Reference):
        raise ArgumentError(
            f"reference: is no Reference ({type(reference).__name__}); make one with trueturn.reference",
            argument="reference",
            value=reference,
        )
    furthest = max(reference.times, key=abs)
    time = furthest if ensemble.time is None else ensemble.time
    everywhere = len(reference.states) == len(reference.times)
    if time not in reference.times or (time != furthest and not everywhere):
        raise ArgumentError(
            f"reference: holds no state at the ensemble's time ({time!r}); make it for that time, "
            "or for several with keep='all'",
            argument="reference",
            value=reference.times,
        )
    if reference.states[0].qubits != ensemble.qubits:
        raise StateShapeError(
            f"reference: has {reference.states[0].qubits} qubits, the ensemble {ensemble.qubits}; "
            "make it for the same operator",
            shape=reference.states[0].qubits,
            expected=ensemble.qubits,
        )
    return Truth(reference, time, reference.times.index(time))
