"""The ways to build a circuit: each formula on each partition in each order of its parts."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import permutations

from trueturn.audit.candidate import Candidate
from trueturn.errors import ArgumentError, AuditError, FormulaError, PartitionError
from trueturn.formulas import Formula
from trueturn.formulas import formulas as known_formulas
from trueturn.formulas.processed import Processed
from trueturn.operator import Operator
from trueturn.partition import Partition

__all__ = ["ORDERINGS", "Way", "ways"]

AnyFormula = str | Formula | Processed
ORDERINGS = ("given", "reversed", "improved", "gate-saving", "every")
"""Orders of the parts: as the rule gives them; the last first; with a small leading error (`Partition.improved`, Lie and
Strang); with ladders that cancel (`Partition.gate_saving`); all orders of up to 4 parts."""

MOST_PARTS = 4


@dataclass(frozen=True)
class Way:
    """A formula on a partition, with the names of the rule and the ordering that made it."""

    candidate: Candidate
    partition: Partition
    rule: str
    ordering: str

    @property
    def label(self) -> str:
        """Formula, rule and, where it is not the given one, the order of the parts."""
        rule = self.rule if self.ordering == "given" else f"{self.rule} {self.ordering}"
        return f"{self.candidate.formula.name}, {rule}"


def ways(
    operator: Operator,
    formulas: AnyFormula | Iterable[AnyFormula] | None,
    rules: str | Partition | Iterable[str | Partition],
    orderings: str | Iterable[str],
) -> tuple[list[Way], dict[str, str]]:
    """Return all ways that can be run, formulas outermost, and the reasons of those that cannot by their labels.

    Raises
    ------
    ArgumentError
        An ordering is unknown, or there is none.
    AuditError
        No formulas or no rules; two formulas of one name; nothing that can be run is left.
    FormulaError
        A name is not registered; or a formula that was named cannot be run on any of the partitions.
    PartitionError
        Unknown rule, or own parts that do not sum to the Hamiltonian.
    """
    named = formulas is not None
    chosen = _formulas(known_formulas() if formulas is None else _listed(formulas, (str, Formula, Processed)))
    partitions = _partitions(operator, _listed(rules, (str, Partition)))
    orders = _orderings(_listed(orderings, (str,)))
    found: list[Way] = []
    left_out: dict[str, str] = {}
    for formula in chosen:
        refusals: list[FormulaError | PartitionError | ArgumentError] = []
        before = len(found)
        for rule, (partition, own) in partitions.items():
            for ordering in orders:
                try:
                    for name, arranged in _arranged(partition, ordering, formula):
                        formula.rotations(arranged, 1.0, 1)  # refuses parts that lack what the formula requires
                        source = own if name == "given" else arranged
                        found.append(Way(Candidate(formula, source), arranged, rule, name))
                except (FormulaError, PartitionError, ArgumentError) as refusal:
                    refusals.append(refusal)
                    left_out[f"{formula.name}, {rule} {ordering}".removesuffix(" given")] = str(refusal)
        if named and len(found) == before:
            raise refusals[0]
    if not found:
        raise AuditError(
            "formulas: none can be run on these parts; name a formula that requires nothing",
            reason="no formula fits",
            limit=None,
        )
    return found, left_out


def _listed(given: object, single: tuple[type, ...]) -> list[object]:
    """Return one value or many as a list."""
    if isinstance(given, single) or not isinstance(given, Iterable):
        return [given]
    return list(given)


def _formulas(given: Sequence[object]) -> list[Formula | Processed]:
    found = [Candidate(entry).formula for entry in given]  # type: ignore[arg-type]
    names = [formula.name for formula in found]
    if not names:
        raise AuditError(
            "formulas: empty; name at least one, see trueturn.formulas()", reason="no formulas", limit=None
        )
    twice = next((name for name in names if names.count(name) > 1), None)
    if twice is not None:
        raise AuditError(
            f"formulas: two of one name ({twice!r}); give each its own", reason="two formulas of one name", limit=None
        )
    return found


def _partitions(operator: Operator, given: Sequence[object]) -> dict[str, tuple[Partition, str | Partition]]:
    """Return each partition by the name of its rule, beside what a `Candidate` takes for it."""
    found: dict[str, tuple[Partition, str | Partition]] = {}
    own = 0
    for entry in given:
        if isinstance(entry, Partition):
            entry.require_sum(operator)
            own += 1
            found["own parts" if own == 1 else f"own parts {own}"] = (entry, entry)
        elif isinstance(entry, str):
            found[entry] = (Partition.of(operator, entry), entry)
        else:
            raise PartitionError(
                f"rule: neither a name nor a Partition ({entry!r}); give a rule of Partition.of, or parts of your own",
                argument="rule",
            )
    if not found:
        raise AuditError("rule: empty; give at least one rule of Partition.of", reason="no rules", limit=None)
    return found


def _orderings(given: Sequence[object]) -> list[str]:
    found: list[str] = []
    for entry in given:
        if not isinstance(entry, str) or entry not in ORDERINGS:
            close = difflib.get_close_matches(str(entry), ORDERINGS, n=1)
            remedy = f"did you mean {close[0]!r}?" if close else f"give some of {', '.join(map(repr, ORDERINGS))}"
            raise ArgumentError(f"orderings: unknown ({entry!r}); {remedy}", argument="orderings", value=entry)
        if entry not in found:
            found.append(entry)
    if not found:
        raise ArgumentError('orderings: empty; give at least one, such as "given"', argument="orderings", value=given)
    return found


def _arranged(partition: Partition, ordering: str, formula: Formula | Processed) -> list[tuple[str, Partition]]:
    """Return the partition in the order or orders that a name stands for."""
    count = len(partition.parts)
    if ordering == "given":
        return [("given", partition)]
    if ordering == "reversed":
        return [("reversed", partition.reordered(range(count)[::-1]))]
    if ordering == "gate-saving":
        return [("gate-saving", partition.gate_saving())]
    if ordering == "improved":
        if not isinstance(formula, Formula):
            raise FormulaError(
                f"orderings: 'improved' does not know the leading error of {formula.name}; choose another ordering",
                name=formula.name,
                choices=("lie", "strang"),
            )
        return [("improved", partition.improved(formula).partition)]
    if count > MOST_PARTS:
        raise ArgumentError(
            f"orderings: 'every' tries all orders of up to {MOST_PARTS} parts ({count} here); choose another ordering, "
            "or a rule with fewer parts",
            argument="orderings",
            value=ordering,
        )
    return [(f"order {' '.join(map(str, order))}", partition.reordered(order)) for order in permutations(range(count))]
