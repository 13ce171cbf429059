"""What a randomised formula is: a rule that gives circuit number 0, 1, 2, … from one seed."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping
from concurrent.futures import Executor
from typing import TYPE_CHECKING

import numpy as np

from trueturn.operator import Operator
from trueturn.randomised.checks import whole
from trueturn.reference import Reference
from trueturn.rotations import Rotations
from trueturn.state import State

if TYPE_CHECKING:
    from trueturn.randomised.averages import Average, Progress
    from trueturn.randomised.channel import ChannelBound

__all__ = ["Ensemble"]


class Ensemble(ABC):
    """Circuits drawn at random from a seed; what is promised about them holds for their average.

    Make one with `permuted`, `directed`, `qdrift`, `partly` or `framed`. Immutable, and it travels to other
    processes.

    Attributes
    ----------
    seed : int

    Notes
    -----
    Sample k takes its randomness from child k of the seed, ``SeedSequence(seed).spawn(…)[k]``, through PCG64. It is
    therefore the same whatever samples were drawn before, in whatever order, thread or process.
    """

    seed: int

    @property
    @abstractmethod
    def qubits(self) -> int:
        """Number of qubits."""

    @property
    @abstractmethod
    def operator(self) -> Operator | None:
        """Hamiltonian H of the evolution exp(-iHt) that the average approximates, or None where there is none."""

    @property
    @abstractmethod
    def time(self) -> float | None:
        """Time t of that evolution, or None."""

    @abstractmethod
    def channel_bound(self) -> ChannelBound | None:
        """Return a proven bound on the distance of the averaged channel from exp(-iHt), or None without an H.

        It says nothing about a single sample.
        """

    @abstractmethod
    def _draw(self, generator: np.random.Generator) -> Rotations: ...

    def sample(self, index: int) -> Rotations:
        """Return circuit number `index`.

        Parameters
        ----------
        index : int
            At least 0.

        Returns
        -------
        Rotations

        Raises
        ------
        ArgumentError
            `index` is not a whole number from 0 to 2**53, or the time makes an angle overflow.
        """
        number = whole("index", index, 0, "give the number of a sample")
        child = np.random.SeedSequence(self.seed, spawn_key=(number,))
        return self._draw(np.random.Generator(np.random.PCG64(child)))

    def samples(self, count: int) -> tuple[Rotations, ...]:
        """Return circuits 0 … count - 1; all are held in memory.

        Raises
        ------
        ArgumentError
            `count` is not a whole number from 1.
        """
        return tuple(map(self.sample, range(whole("count", count, 1, "give how many samples to draw"))))

    def average(
        self,
        state: State,
        observables: Mapping[str, Operator],
        count: int,
        *,
        reference: Reference | None = None,
        executor: Executor | None = None,
        progress: Progress | None = None,
        threads: int | None = None,
        done: Average | None = None,
    ) -> Average:
        """Measure the averaged channel on one state with samples 0 … count - 1.

        Parameters
        ----------
        state : State
            Start; not written. Its norm must be 1 within 1e-6 (1e-3 for complex64).
        observables : mapping of str to Operator
            May be empty where a reference is given.
        count : int
            Samples, at least 1; the standard error needs 2.
        reference : Reference, optional
            Evolution of the same start, with a state at the ensemble's time. Observables that it recorded too get
            an error.
        executor : concurrent.futures.Executor, optional
            Threads, processes or anything that offers `submit`. Without one, samples run here one after the other.
        progress : callable, optional
            Called here with (finished samples, `count`); an exception of its own cancels what has not begun and
            passes through.
        threads : int, optional
            Of each sample. Default 1 with an executor, otherwise as for `State.apply`.
        done : Average, optional
            Samples at hand already, such as `EnsembleError.partial`, of the same ensemble, start, observables
            and reference, all of which are compared; only the others run.

        Returns
        -------
        Average
            The same bits for every executor and number of threads.

        Raises
        ------
        ArgumentError
            `count`, `executor`, `done`, the norm of the start, or a reference without the ensemble's time.
        StateShapeError
            Start, observables or reference are on other qubits than the ensemble.
        EnsembleError
            A sample failed or the executor died. `partial` holds the finished samples, `missing` numbers the
            others, and the cause is attached.

        Notes
        -----
        Each worker holds two state vectors, three with a reference.

        Examples
        --------
        >>> import trueturn as tt
        >>> from trueturn import randomised
        >>> spin = tt.Operator("0.6 X_0 + 0.4 Z_0")
        >>> found = randomised.qdrift(spin, 1.0, 50, seed=1).average(tt.State.product("0"), {"z": tt.Operator("Z_0")}, 40)
        >>> found.observables["z"].standard_error < found.observables["z"].spread
        True
        """
        from trueturn.randomised.averages import averaged

        return averaged(self, state, observables, count, reference, executor, progress, threads, done)
