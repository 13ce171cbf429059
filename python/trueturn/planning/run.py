"""Carries a plan out: every way searched for its least step count, then ranked by cost."""

from __future__ import annotations

import math
import time as clock
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import fields
from numbers import Real
from typing import Any

from trueturn.accuracy.proven_steps import allowed_distance
from trueturn.audit.result import Audit
from trueturn.audit.run import prepare
from trueturn.audit.runs import Runs, error_per_distance
from trueturn.audit.truth import Progress
from trueturn.device.counting import options_of
from trueturn.errors import ArgumentError, ToleranceError
from trueturn.export.hardware import Hardware
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.planning import words
from trueturn.planning.costs import OwnCost, Prices, chosen_costs
from trueturn.planning.noise import Noise
from trueturn.planning.ranking import front, marked, ranked
from trueturn.planning.result import Plan
from trueturn.planning.sought import Sought
from trueturn.planning.ways import AnyFormula, ways
from trueturn.state import State

__all__ = ["plan"]

SYNTHESIS_SHARE = 0.1
"""Share of the tolerance set aside for synthesis where T gates are asked for and the user names no share.

More of it makes each rotation cheaper by a logarithm and the circuit longer by (1 - share)^(-1/order). The product is least at
p / (p + ln(R / (share ε))): 0.05, 0.1, 0.18 for orders p = 1, 2, 4 with R = 10^4 rotations and ε = 10^-3; it is flat there.
"""


def plan(
    operator: Operator,
    state: State | None,
    times: float | Iterable[float],
    formulas: AnyFormula | Iterable[AnyFormula] | None,
    rule: str | Partition | Iterable[str | Partition],
    tolerance: float,
    quantity: str = "observables",
    observables: Mapping[str, Operator] | None = None,
    *,
    orderings: str | Iterable[str] = "given",
    cost: str | OwnCost | Iterable[str | OwnCost] = "two_qubit_gates",
    synthesis_error: float | None = None,
    device: Mapping[str, Any] | Hardware | None = None,
    thorough: bool = True,
    bounds: bool = True,
    readout: str = "along",
    relative_to: str | None = None,
    reference_tolerance: float | None = None,
    reference_method: str = "chebyshev",
    most_steps: int = 1_000_000,
    threads: int | None = None,
    progress: Progress | None = None,
    title: str = "",
    start: str = "",
    energy_unit: str = "",
) -> Plan:
    """Find the least step count of every formula on every partition, and rank them by what they cost.

    Parameters
    ----------
    operator : Operator
        The Hamiltonian; ħ = 1.
    state : State or None
        Start; not written. None will do with ``quantity="operator"``.
    times : float or iterable of float
        Positive, in inverse units of the coefficients.
    formulas : str, Formula or Processed, an iterable of them, or None
        None takes all that are registered and fit the parts.
    rule : str or Partition, or an iterable of them
        How the Hamiltonian is split into parts; see `Partition.of`.
    tolerance : float
        On the largest error over times and observables; absolute.
    quantity : str
        What the error is of, as in `audit`.
    observables : mapping of str to Operator
        Needed for ``quantity="observables"``.
    orderings : str or iterable of str
        Orders of the parts: ``"given"`` by the rule, ``"reversed"``, ``"improved"`` (`Partition.improved`, for Lie and
        Strang), ``"gate-saving"`` (`Partition.gate_saving`), ``"every"`` (all orders of up to 4 parts).
    cost : str or callable, or an iterable of them
        ``"two_qubit_gates"``, ``"depth"``, ``"rotations"``, ``"t_count"``, ``"wall_time"`` (of the simulation of the
        circuit here), or a function of `Rotations`. Rows are ranked by the first, ties by the others; of several, the rows that
        no other beats in all are marked.
    synthesis_error : float, optional
        The part of `tolerance`, in the same unit, that is set aside for the synthesis of rotations from Clifford and
        T gates. Default: none, or a tenth of `tolerance` where ``"t_count"`` is asked for.
    device : mapping or Hardware, optional
        Options of `Rotations.cost`: gates are then counted as the circuit is written for it, with savings and routing, instead
        of 2(w-1) for each rotation. With ``two_qubit_error`` and ``quantity="observables"`` rows say what failing gates may
        add, and a tolerance below that at any step count is refused. Its own `synthesis_error` is not used here.
    thorough : bool
        False gives up a way as soon as it misses the tolerance at a step count that costs more than another way that meets
        it, in every compared cost. Formulas of high order are then searched first. Not by wall time, which is only known
        after a run.
    bounds : bool
        False leaves the proven bounds out. They are computed after all searches; those of high orders on many parts can take
        minutes.
    readout, relative_to, reference_tolerance, reference_method, most_steps, threads, progress, title, start, energy_unit
        As in `audit`.

    Returns
    -------
    Plan

    Raises
    ------
    ArgumentError, AuditError
        Something is out of range; the message says what and what to do.
    FormulaError
        A name is not registered, or a formula that was named cannot be run on any of the partitions.
    PartitionError
        Unknown rule, or own parts that do not sum to the Hamiltonian.
    ToleranceError
        The tolerance is not positive or below what double precision can certify, or synthesis takes all of it.
    MemoryRefusedError
        The vectors needed do not fit.
    KeyboardInterrupt
        Interrupted before anything was measured. Later, an interrupt ends the search, and the plan holds what was found.

    Notes
    -----
    A least step count r meets the tolerance, r - 1 was run and does not, and all that was tested from r to 2r meets it; smaller
    counts that meet it are listed as accidental. Equal parts in equal order are run once, whatever rules made them. A row
    costs about as much as 7 runs of its answer.

    The spectral-norm error that synthesis may have follows from `synthesis_error` as bounds do: the same for a state or an
    operator, divided by twice the largest norm for observables.

    Examples
    --------
    >>> import trueturn as tt
    >>> chain = tt.model.ising(tt.lattice.chain(4), zz=-1.0, x=-0.7)
    >>> found = tt.plan(chain, tt.State.product("0000"), 1.0, ["lie", "strang", "suzuki-4"], "axis", 1e-3, "state")
    >>> [(row.label, row.steps, row.two_qubit_gates) for row in found.rows]
    [('suzuki-4, axis', 3, 90), ('strang, axis', 24, 144), ('lie, axis', 985, 5910)]
    """
    began = clock.perf_counter()
    names, own = chosen_costs(cost)
    hardware = device if device is None or isinstance(device, Hardware) else Hardware.of(options_of(device))
    for_synthesis = _synthesis(synthesis_error, tolerance, names)
    found, left_out = ways(operator, formulas, rule, orderings)
    if not thorough:
        found.sort(key=lambda way: -way.candidate.formula.order)
    setting = prepare(
        operator,
        state,
        times,
        [way.candidate for way in found],
        tolerance - for_synthesis if for_synthesis else tolerance,
        quantity,
        observables,
        readout,
        relative_to=relative_to,
        reference_tolerance=reference_tolerance,
        reference_method=reference_method,
        most_steps=most_steps,
        threads=threads,
        progress=progress,
        partitions=[way.partition for way in found],
    )
    seconds = {"reference": clock.perf_counter() - began}
    distance = allowed_distance(for_synthesis, error_per_distance(setting.bench)) if for_synthesis else None
    prices = Prices(names, own, distance, hardware)
    noise = None
    if hardware is not None and hardware.two_qubit_error and quantity == "observables":
        noise = Noise(setting.bench, hardware)
        noise.require_room(found, setting.bench.tolerance)
    sought = Sought(prices, noise, most_steps, thorough)
    for number, way in enumerate(found):

        def tell(steps: int, label: str = way.label, number: int = number) -> None:
            if progress is not None:
                progress(f"{label}: {steps} steps", number, len(found))

        sought.search(way, Runs(setting.bench, way.candidate, way.partition), tell)
        if sought.interrupted:
            break
    seconds["search"] = clock.perf_counter() - began - seconds["reference"]
    if not sought.found:
        raise KeyboardInterrupt

    def tell_bound(label: str, done: int) -> None:
        if progress is not None:
            progress(f"{label}: proven bound", done, len(sought.found))

    rows = ranked(marked(sought.rows(bounds, tell_bound), prices.compared), names)
    seconds["bounds"] = clock.perf_counter() - began - seconds["reference"] - seconds["search"]
    if progress is not None:
        progress("done", len(found), len(found))
    audited = setting.concluded(rows, seconds, title=title, start=start, energy_unit=energy_unit)
    facts: dict[str, Any] = {entry.name: getattr(audited, entry.name) for entry in fields(Audit)}
    facts |= {
        "tolerance": float(tolerance),
        "recommended": rows[0] if rows[0].room else None,
        "reason": words.reason(rows, names, tolerance),
        "assumptions": (*audited.assumptions, words.budget_words(tolerance, for_synthesis)),
        "cautions": (*words.CAUTIONS, *audited.cautions),
    }
    return Plan(
        **facts,
        synthesis_error=for_synthesis,
        cost=names,
        compared=prices.compared,
        front=front(rows),
        evolutions=sought.evolutions,
        interrupted=sought.interrupted,
        unsearched=tuple(way.label for way in found[len(sought.found) :]),
        left_out=left_out,
    )


def _synthesis(given: float | None, tolerance: float, names: Sequence[str]) -> float | None:
    """Return the part of the tolerance that is set aside for synthesis."""
    if given is None:
        usable = isinstance(tolerance, Real) and not isinstance(tolerance, bool)  # `prepare` refuses anything else
        return SYNTHESIS_SHARE * float(tolerance) if "t_count" in names and usable else None
    if isinstance(given, bool) or not isinstance(given, Real) or not 0.0 < float(given) < math.inf:
        raise ArgumentError(
            f"synthesis_error: not a positive number ({given!r}); give a part of the tolerance, or leave it out",
            argument="synthesis_error",
            value=given,
        )
    if isinstance(tolerance, Real) and float(given) >= float(tolerance):
        raise ToleranceError(
            f"synthesis_error: takes the whole tolerance ({float(given):g} of {float(tolerance):g}); "
            "give a part of it, such as a tenth",
            tolerance=float(tolerance),
            achievable=float(given),
        )
    return float(given)
