"""Error science: proven bounds."""

from trueturn.accuracy.bounds import Bound, bound

__all__ = ["Bound", "bound"]
