"""Errors as intervals that say where their two ends come from."""

from __future__ import annotations

from collections.abc import Sequence

__all__ = ["ErrorInterval", "joined"]


class ErrorInterval(tuple[float, float]):
    """An interval (low, high) that holds an error; unpacks and compares as that pair.

    Attributes
    ----------
    low, high : float
    kind : str
        What the upper end rests on: ``"measured"`` (a computed figure with everything that can be wrong with it added),
        ``"dense"`` (the same from whole matrices, rounding estimated), ``"theorem"`` (an error bound that was handed
        in), ``"trivial"`` (two unitary matrices are at most 2 apart) or ``"confidence"``.
    proven : bool
        Whether both ends are proven; where False, `notes` say what is estimated or holds with what probability.
    confidence : float or None
        For intervals that hold with a probability over random draws: that probability, at least.
    notes : tuple of str
    """

    kind: str
    proven: bool
    confidence: float | None
    notes: tuple[str, ...]

    def __new__(
        cls,
        low: float,
        high: float,
        *,
        kind: str,
        proven: bool,
        confidence: float | None = None,
        notes: tuple[str, ...] = (),
    ) -> ErrorInterval:
        made = super().__new__(cls, (max(0.0, float(low)), float(high)))
        made.kind, made.proven, made.confidence, made.notes = kind, proven, confidence, notes
        return made

    def __getnewargs_ex__(self) -> tuple[tuple[float, float], dict[str, object]]:
        return (self.low, self.high), {
            "kind": self.kind,
            "proven": self.proven,
            "confidence": self.confidence,
            "notes": self.notes,
        }

    @property
    def low(self) -> float:
        """Lower end."""
        return self[0]

    @property
    def high(self) -> float:
        """Upper end."""
        return self[1]

    def __repr__(self) -> str:
        sure = (
            "proven" if self.proven else "not proven" if self.confidence is None else f"{self.confidence:g} confidence"
        )
        return f"ErrorInterval({self.low!r}, {self.high!r}, {self.kind}, {sure})"


def joined(intervals: Sequence[tuple[float, float]]) -> tuple[float, float]:
    """Return the interval that holds the largest of several errors, each in its own interval."""
    return max(low for low, _ in intervals), max(high for _, high in intervals)
