"""A job file: one audit written down in TOML.

`read_job` turns the file into a frozen `Job` and checks everything in it first: types, names, sizes, operator
text. Nothing is allocated or evolved until `Job.audit` or `Job.reference` is called. Whatever is wrong is a
`JobError` that names the key; an error of a lower layer stays attached as its cause.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from importlib import resources
from itertools import pairwise
from pathlib import Path
from typing import TYPE_CHECKING

from trueturn.audit.candidate import Candidate
from trueturn.audit.job_system import Start, read_start, read_system
from trueturn.audit.job_table import Table, nearest
from trueturn.errors import FormulaError, JobError
from trueturn.formulas import Formula, formula, formulas, read_formulas
from trueturn.formulas.structure import require_structure
from trueturn.operator import Operator
from trueturn.partition_rules import RULES

if TYPE_CHECKING:
    from trueturn.audit.result import Audit
    from trueturn.reference import Reference

__all__ = ["Job", "built_in_job", "read_job", "template"]

SECTIONS = ("system", "start", "target", "candidate", "reference", "output", "run")
METHODS = ("chebyshev", "krylov", "dense")
EXAMPLE_CANDIDATE = '[[candidate]] with formula = "strang", rule = "commuting", steps = "least"'

Progress = Callable[[str, float, float], None]


@dataclass(frozen=True)
class Job:
    """One audit, fully checked and not yet run.

    Attributes
    ----------
    path : Path or None
        The job file; None for the built-in job.
    operator : Operator
        The Hamiltonian.
    start : Start
        The start state; `start.state()` makes it.
    times : tuple of float
        Ascending and above zero.
    tolerance : float
    quantity : "observables" or "state"
    readout : "along" or "separate"
    relative_to : None or "norm"
    observables : mapping of str to Operator
    candidates : tuple of Candidate
        Empty only when read with ``candidates_required=False``.
    reference_tolerance : float or None
        None leaves the choice to `trueturn.audit.run.audit`.
    reference_method : str
    folder : Path or None
        Where the report goes; None where the job does not say.
    threads : int or None
    most_steps : int
        Where a search for the least step count gives up.
    title, energy_unit : str
    """

    path: Path | None
    operator: Operator
    start: Start
    times: tuple[float, ...]
    tolerance: float
    quantity: str
    readout: str
    relative_to: str | None
    observables: Mapping[str, Operator]
    candidates: tuple[Candidate, ...]
    reference_tolerance: float | None
    reference_method: str
    folder: Path | None
    threads: int | None
    most_steps: int
    title: str
    energy_unit: str

    def audit(self, threads: int | None = None, progress: Progress | None = None) -> Audit:
        """Run the audit.

        Parameters
        ----------
        threads : int, optional
            Overrides the job's own.
        progress : callable, optional
            Called with the stage, what is done and the total.

        Returns
        -------
        Audit
        """
        from trueturn.audit.run import audit

        return audit(
            self.operator,
            self.start.state(),
            self.times,
            self.candidates,
            self.tolerance,
            quantity=self.quantity,
            observables=self.observables,
            readout=self.readout,
            relative_to=self.relative_to,
            reference_tolerance=self.reference_tolerance,
            reference_method=self.reference_method,
            most_steps=self.most_steps,
            threads=self.threads if threads is None else threads,
            progress=progress,
            title=self.title,
            start=self.start.words,
            energy_unit=self.energy_unit,
        )

    def reference(
        self,
        threads: int | None = None,
        progress: Progress | None = None,
        *,
        into: Path | None = None,
        keep: str = "last",
    ) -> Reference:
        """Compute only the certified reference.

        Parameters
        ----------
        threads, progress
            As for `audit`.
        into : Path, optional
            Write a reference folder there.
        keep : "last" or "all"
            Which states to keep, or with `into` to write.
        """
        from trueturn.reference import reference

        return reference(
            self.operator,
            self.start.state(),
            self.times,
            tolerance=1e-10 if self.reference_tolerance is None else self.reference_tolerance,
            observables=self.observables,
            method=self.reference_method,
            keep=keep,
            threads=self.threads if threads is None else threads,
            progress=progress,
            into=into,
            title=self.title,
            start=self.start.words,
        )


def read_job(path: str | Path, *, candidates_required: bool = True) -> Job:
    """Read and check a job file.

    Parameters
    ----------
    path : str or Path
        The TOML file. Paths in it are taken from its own folder.
    candidates_required : bool
        Whether a job without candidates is an error; a reference needs none.

    Returns
    -------
    Job

    Raises
    ------
    JobError
        The file is missing or not TOML, or a key is unknown, missing, of the wrong type or out of range.
        `path` and `key` say where; the message reads ``key: what is wrong (value); what to do``.
    """
    path = Path(path)
    try:
        text = path.read_bytes().decode("utf-8")
    except FileNotFoundError as error:
        remedy = "check the name, or write one with: trueturn init"
        raise JobError(f"job file: no such file ({path}); {remedy}", path=str(path), key="") from error
    except UnicodeDecodeError as error:
        message = f"job file: not UTF-8 text (byte {error.start}); save it as UTF-8"
        raise JobError(message, path=str(path), key="") from error
    except OSError as error:
        message = f"job file: cannot be read ({error.strerror or error}); check the path and its permissions"
        raise JobError(message, path=str(path), key="") from error
    return parse_job(text, path, candidates_required)


def template() -> str:
    """Give the text of the built-in job, commented so that it serves as a pattern for others.

    Examples
    --------
    >>> "[[candidate]]" in template()
    True
    """
    return resources.files("trueturn.audit").joinpath("ladder_quench.toml").read_text(encoding="utf-8")


def built_in_job() -> Job:
    """Give the job that runs when no file is named: an invented ladder of 18 spins after a field quench."""
    return parse_job(template(), None, True)


def parse_job(text: str, path: Path | None, candidates_required: bool) -> Job:
    """Check the text of a job file; `path` is where it came from."""
    shown = str(path) if path is not None else ""
    file = Table(parse_toml(text, shown), "", shown)
    file.only(SECTIONS)
    for key, example in (
        ("system", "a section [system]"),
        ("start", "a section [start]"),
        ("target", "[target]"),
    ):
        file.require(key, example)
    folder = path.parent if path is not None else Path()

    operator = read_system(file.table("system"), folder)
    start = read_start(file.table("start"), operator.qubits, folder)
    target = file.table("target")
    target.only(("times", "time", "tolerance", "quantity", "readout", "relative_to", "observables"))
    times = read_times(target)
    tolerance = target.positive("tolerance", "tolerance = 0.01")
    quantity = target.choice("quantity", ("observables", "state"), default="observables")
    readout = target.choice("readout", ("along", "separate"), default="along")
    relative_to = target.choice("relative_to", ("norm",)) if "relative_to" in target else None
    if relative_to is not None and quantity == "state":
        raise target.error("relative_to", "has no meaning for states, whose norm is 1", "take it out")
    observables = read_observables(target, operator.qubits)
    if quantity == "observables" and not observables:
        remedy = 'add [target.observables] with a line such as edge = "Z_0", or set quantity = "state"'
        raise target.error("observables", "missing", remedy)

    candidates = read_candidates(file, operator, folder, candidates_required)
    reference = Table(file.table("reference").values if "reference" in file else {}, "reference", shown)
    reference.only(("tolerance", "method"))
    output = Table(file.table("output").values if "output" in file else {}, "output", shown)
    output.only(("folder",))
    run = Table(file.table("run").values if "run" in file else {}, "run", shown)
    run.only(("threads", "most_steps", "title", "energy_unit"))
    return Job(
        path=path,
        operator=operator,
        start=start,
        times=times,
        tolerance=tolerance,
        quantity=quantity,
        readout=readout,
        relative_to=relative_to,
        observables=observables,
        candidates=candidates,
        reference_tolerance=(
            reference.positive("tolerance", "tolerance = 1e-10") if "tolerance" in reference else None
        ),
        reference_method=reference.choice("method", METHODS, default="chebyshev"),
        folder=folder / output.text("folder", 'folder = "trueturn-audit"') if "folder" in output else None,
        threads=run.whole("threads", "threads = 2") if "threads" in run else None,
        most_steps=run.whole("most_steps", "most_steps = 100000") if "most_steps" in run else 1_000_000,
        title=run.text("title", 'title = "My quench"') if "title" in run else (path.stem if path else ""),
        energy_unit=run.text("energy_unit", 'energy_unit = "J"') if "energy_unit" in run else "",
    )


def parse_toml(text: str, path: str) -> dict[str, object]:
    """Parse TOML; an error gives line, column and the line itself."""
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        reason = str(error)
        place = re.search(r"\s*\(at (?:line (\d+), column (\d+)|end of document)\)$", reason)
        lines = text.splitlines() or [""]
        where, line = "the end of the file", lines[-1]
        if place is not None:
            reason = reason[: place.start()]
            if place[1]:
                where, line = f"line {place[1]}, column {place[2]}", lines[min(int(place[1]), len(lines)) - 1]
        what = reason[:1].lower() + reason[1:]
        message = f"job file: not valid TOML at {where}: {what} ({line.strip()[:60]!r}); mend that line"
        raise JobError(message, path=path, key="") from error
    except (ValueError, RecursionError) as error:  # integers of thousands of digits, brackets nested a thousand deep
        message = f"job file: cannot be read ({str(error)[:60]}); write shorter numbers and fewer nested brackets"
        raise JobError(message, path=path, key="") from error


def read_times(target: Table) -> tuple[float, ...]:
    """Read `times`, or `time` for a single one; ascending and above zero."""
    if ("times" in target) == ("time" in target):
        wrong = "given together with time" if "times" in target else "missing"
        raise target.error("times", wrong, "write times = [0.5, 1.0], or time = 1.0 for a single one")
    if "time" in target:
        return (target.positive("time", "time = 1.0"),)
    example = "times = [0.5, 1.0]"
    values = target.values["times"]
    if not isinstance(values, list):
        raise target.error("times", "not a list", f"write {example}, or time = 1.0", values)
    if not values:
        raise target.error("times", "empty", f"write {example}")
    times = [target.checked_number("times", value, example, index) for index, value in enumerate(values)]
    if times[0] <= 0 or any(later <= earlier for earlier, later in pairwise(times)):
        raise target.error("times", "not ascending from above zero", f"write for instance {example}", times)
    return tuple(times)


def read_observables(target: Table, qubits: int) -> dict[str, Operator]:
    """Read `[target.observables]`: names with operator text on the qubits of the system."""
    if "observables" not in target:
        return {}
    section = target.table("observables")
    observables = {}
    for name in section.values:
        text = section.text(name, f'{name} = "Z_0 Z_1"')
        with section.blame(name):
            observables[name] = Operator(text, qubits=qubits)
    return observables


def read_candidates(file: Table, operator: Operator, folder: Path, required: bool) -> tuple[Candidate, ...]:
    """Read every `[[candidate]]`, and try its rule on the operator."""
    entries = file.values.get("candidate", [])
    if not isinstance(entries, list) or not all(isinstance(entry, dict) for entry in entries):
        raise file.error("candidate", "not a list of sections", f"write {EXAMPLE_CANDIDATE}")
    if not entries and required:
        raise file.error("candidate", "missing", f"add {EXAMPLE_CANDIDATE}")
    candidates = []
    for index, entry in enumerate(entries, start=1):
        section = Table(entry, f"candidate[{index}]", file.path)
        section.only(("formula", "formula_file", "rule", "steps"))
        name = section.text("formula", 'formula = "strang"')
        chosen = own_formula(section, name, folder) if "formula_file" in section else known_formula(section, name)
        rule = section.choice("rule", tuple(RULES), default="commuting")
        candidate = Candidate(chosen, rule=rule, steps=read_steps(section))
        with section.blame("rule"):
            require_structure(chosen, candidate.partition(operator))
        candidates.append(candidate)
    return tuple(candidates)


def known_formula(section: Table, name: str) -> Formula:
    """Find a formula by name; an unknown one is refused with the nearest that is known."""
    try:
        return formula(name)
    except FormulaError as error:
        raise section.error("formula", "unknown", nearest(name, formulas(special=True)), name) from error


def own_formula(section: Table, name: str, folder: Path) -> Formula:
    """Find a formula in the file that `formula_file` names; what is wrong in there is told with its own key."""
    file = section.text("formula_file", 'formula_file = "mine.toml"')
    try:
        found = {one.name: one for one in read_formulas(folder / file)}
    except JobError as error:
        full = section.full("formula_file")
        raise JobError(f"{full}: {file}: {error}", path=section.path, key=full) from error
    if name not in found:
        raise section.error("formula", f"not in {file}", nearest(name, tuple(found)), name)
    return found[name]


def read_steps(section: Table) -> int | str:
    """Read `steps`: a positive whole number or ``"least"``."""
    value = section.values.get("steps", "least")
    if value == "least":
        return "least"
    if isinstance(value, str):
        raise section.error("steps", "neither a number nor least", 'write steps = 20 or steps = "least"', value)
    return section.whole("steps", 'steps = 20 or steps = "least"')
