"""Error science: proven bounds."""

from trueturn.accuracy.bounds import Bound, bound, steps_by_bound

__all__ = ["Bound", "bound", "steps_by_bound"]
