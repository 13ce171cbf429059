"""The error on product states: each of a set, and the worst of it.

The worst of a set says nothing about product states outside it. For an error bound on all states see `operator_error`.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from trueturn import _threads
from trueturn._observables import named_operators
from trueturn.accuracy.difference import Difference, PlannedEvolution, exact_evolution, require_circuit
from trueturn.accuracy.intervals import ErrorInterval, joined
from trueturn.errors import ArgumentError, StateShapeError
from trueturn.operator import Operator
from trueturn.randomised.checks import whole
from trueturn.reference.certificate import expectation_rounding, expectation_shift, norm_bound
from trueturn.rotations import Rotations
from trueturn.state import State, require_same_qubits

__all__ = ["ProductErrors", "ProductRow", "product_errors"]

Start = str | Sequence[object]

_AXES = ("0", "1", "+", "-", "+i", "-i")


@dataclass(frozen=True)
class ProductRow:
    """The errors on one product state: `errors` by name, ``"state"`` first, then the observables."""

    start: Start
    errors: Mapping[str, ErrorInterval]


@dataclass(frozen=True)
class ProductErrors:
    """Errors on a set of product states.

    Attributes
    ----------
    rows : tuple of ProductRow
        In the order of the starts.
    largest : mapping of str to ErrorInterval
        By name, the interval that holds the largest error over the set.
    """

    rows: tuple[ProductRow, ...]
    largest: Mapping[str, ErrorInterval]

    def worst(self, name: str = "state") -> ProductRow:
        """Return the row with the largest measured error of a name (by the middle of its interval).

        Raises
        ------
        ArgumentError
            There is no such name.
        """
        if name not in self.largest:
            raise ArgumentError(
                f"name: unknown ({name!r}); give one of {', '.join(map(repr, self.largest))}",
                argument="name",
                value=name,
            )
        return max(self.rows, key=lambda row: sum(row.errors[name]))


def product_errors(
    rotations: Rotations,
    operator: Operator,
    time: float,
    starts: Iterable[Start] | None = None,
    observables: Mapping[str, Operator] | None = None,
    *,
    draws: int = 16,
    seed: int = 0,
    angle_roundings: int = 0,
    threads: int | None = None,
) -> ProductErrors:
    """Measure the state error and observable errors on a set of product states.

    Parameters
    ----------
    rotations, operator, time, angle_roundings, threads
        As for `operator_error`.
    starts : iterable, optional
        As `State.product` takes them. Default: all qubits alike in each of the six axis states, the two alternating
        states of 0 and 1, and `draws` products of uniformly random Bloch vectors.
    observables : mapping of str to Operator, optional
        None may be named ``"state"``.
    draws, seed : int
        Used where `starts` is None.

    Returns
    -------
    ProductErrors
        Every error an interval: measured ∓ (reference error bound + rounding).

    Raises
    ------
    ArgumentError
        No starts, one on another number of qubits or that is no product state, or a bad number.
    OperatorError, StateShapeError, MemoryRefusedError, ToleranceError
        As for `operator_error`.

    Examples
    --------
    >>> import trueturn as tt
    >>> chain = tt.model.ising(tt.lattice.chain(4), zz=-1.0, x=-0.7)
    >>> circuit = tt.formula("strang").rotations(tt.Partition.of(chain, "commuting"), 1.0, 10)
    >>> found = tt.product_errors(circuit, chain, 1.0, ["0000", "++++", "0101"])
    >>> found.worst().start
    '++++'
    """
    circuit, hamiltonian, span = require_circuit(rotations, operator, time)
    watched = named_operators(observables)
    if "state" in watched:
        raise ArgumentError(
            "observables: one is named 'state', which names the state error; rename it",
            argument="observables",
            value="state",
        )
    count = whole("draws", draws, 0, "give the number of random product states")
    first = whole("seed", seed, 0, "give 0 or more")
    roundings = whole("angle_roundings", angle_roundings, 0, "give 0 for exact angles")
    listed = _default_starts(circuit.qubits, count, first) if starts is None else _listed(starts)
    if not listed:
        raise ArgumentError("starts: empty; give at least one product state", argument="starts", value=starts)
    workers = _threads.resolve(threads)
    exact = exact_evolution(hamiltonian, span, dense=False, threads=workers)
    assert isinstance(exact, PlannedEvolution)
    bench = _Bench(circuit, exact, watched, roundings, workers)
    rows = tuple(ProductRow(start, bench.errors(start)) for start in listed)
    largest = {}
    for name in rows[0].errors:
        low, high = joined([row.errors[name] for row in rows])
        largest[name] = ErrorInterval(low, high, kind="measured", proven=True)
    return ProductErrors(rows, largest)


def _listed(starts: object) -> list[Start]:
    if isinstance(starts, str) or not isinstance(starts, Iterable):
        raise ArgumentError(
            f'starts: is no list of product states ({starts!r}); give one such as ["0000", "++++"]',
            argument="starts",
            value=starts,
        )
    return list(starts)


class _Bench:
    """A circuit, the exact evolution and observables: what each start is measured with."""

    def __init__(
        self,
        circuit: Rotations,
        exact: PlannedEvolution,
        observables: Mapping[str, Operator],
        roundings: int,
        threads: int,
    ) -> None:
        self._circuit, self._exact, self._threads = circuit, exact, threads
        self._slack = Difference(circuit, exact, threads=threads, angle_roundings=roundings).slack
        probe = State.computational(0, circuit.qubits)
        for name, observable in observables.items():
            require_same_qubits(probe, observable, f"observables[{name!r}]")
        self._observables = {
            name: (o.without_identity(), norm_bound(o), expectation_rounding(o, circuit.qubits))
            for name, o in observables.items()
        }

    def errors(self, start: Start) -> dict[str, ErrorInterval]:
        ours = State.product(start)
        if ours.qubits != self._circuit.qubits:
            raise StateShapeError(
                f"starts: {start!r} has {ours.qubits} qubits, the circuit {self._circuit.qubits}; give one site for each",
                shape=ours.qubits,
                expected=self._circuit.qubits,
            )
        exact = State.from_array(self._exact.ahead(ours.amplitudes))
        ours.apply(self._circuit, threads=self._threads)
        found = {"state": _around(ours.distance(exact, threads=self._threads), self._slack)}
        for name, (observable, norm, rounding) in self._observables.items():
            gap = abs(
                ours.expectation(observable, threads=self._threads)
                - exact.expectation(observable, threads=self._threads)
            )
            # The slack is that of both states together: two shifts of parts of it are at most one of the whole.
            found[name] = _around(gap, expectation_shift(norm, self._slack) + 2.0 * rounding)
        return found


def _around(value: float, slack: float) -> ErrorInterval:
    return ErrorInterval(value - slack, value + slack, kind="measured", proven=True)


def _default_starts(qubits: int, draws: int, seed: int) -> list[Start]:
    alternating = [[str((site + shift) % 2) for site in range(qubits)] for shift in (0, 1)]
    uniform = [[axis] * qubits for axis in _AXES]
    generator = np.random.Generator(np.random.PCG64(seed))
    drawn = []
    for _ in range(draws):
        heights, phis = generator.uniform(-1.0, 1.0, qubits), generator.uniform(0.0, 2.0 * np.pi, qubits)
        drawn.append([(float(np.arccos(h)), float(phi)) for h, phi in zip(heights, phis, strict=True)])
    starts: list[Start] = [*uniform, *alternating, *drawn]
    return starts
