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
from pathlib import Path
from typing import TYPE_CHECKING

from trueturn.audit.base_candidate import BaseCandidate
from trueturn.audit.candidate import Candidate
from trueturn.audit.job_candidates import read_candidates, read_planned
from trueturn.audit.job_device import Device, read_device
from trueturn.audit.job_system import Start, read_start, read_system
from trueturn.audit.job_table import Table
from trueturn.audit.job_target import read_target
from trueturn.errors import JobError
from trueturn.operator import Operator

if TYPE_CHECKING:
    from trueturn.audit.result import Audit
    from trueturn.planning.job import PlanTask
    from trueturn.planning.result import Plan
    from trueturn.reference import Reference

__all__ = ["Job", "built_in_job", "read_job", "template"]

SECTIONS = ("system", "start", "target", "candidate", "plan", "device", "reference", "output", "run")
METHODS = ("chebyshev", "krylov", "dense")

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
    start : Start or None
        The start state; `start.state()` makes it. None where it is left out, for ``quantity="operator"``
        or with ``start_required=False``.
    times : tuple of float
        Ascending and above zero.
    tolerance : float
    quantity : "observables", "state" or "operator"
    readout : "along" or "separate"
    relative_to : None or "norm"
    observables : mapping of str to Operator
    candidates : tuple of Candidate, or GivenCircuit where files of circuits took their place
        Empty only when read with ``candidates_required=False``.
    planned : PlanTask or None
        What `[plan]` asks for; without it the formulas and rules of the candidates. None where there is neither.
    reference_tolerance : float or None
        None leaves the choice to `trueturn.audit.run.audit`.
    reference_method : str
    folder : Path or None
        Where the report goes; None where the job does not say.
    threads : int or None
    most_steps : int
        Where a search for the least step count gives up.
    title, energy_unit : str
    device : Device or None
        What the circuits run on; None where the job does not say.
    """

    path: Path | None
    operator: Operator
    start: Start | None
    times: tuple[float, ...]
    tolerance: float
    quantity: str
    readout: str
    relative_to: str | None
    observables: Mapping[str, Operator]
    candidates: tuple[BaseCandidate, ...]
    planned: PlanTask | None
    reference_tolerance: float | None
    reference_method: str
    folder: Path | None
    threads: int | None
    most_steps: int
    title: str
    energy_unit: str
    device: Device | None = None

    @property
    def formula_candidates(self) -> tuple[Candidate, ...]:
        """The candidates that are formulas: those that theorems, plans and files of circuits know of."""
        return tuple(candidate for candidate in self.candidates if isinstance(candidate, Candidate))

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
            None if self.start is None else self.start.state(),
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
            start="" if self.start is None else self.start.words,
            energy_unit=self.energy_unit,
        )

    def plan(self, threads: int | None = None, progress: Progress | None = None) -> Plan:
        """Search the ways of `planned` for their least step counts; the parameters are those of `audit`.

        Raises
        ------
        JobError
            There is nothing to search: neither `[plan]` nor a candidate.
        """
        from trueturn.planning.run import plan

        task = self.planned
        if task is None:
            raise JobError(
                'plan: missing; add a section [plan] with formulas = ["strang", "suzuki-4"], or candidates',
                path=str(self.path or ""),
                key="plan",
            )
        return plan(
            self.operator,
            None if self.start is None else self.start.state(),
            self.times,
            task.formulas,
            task.rules,
            self.tolerance,
            quantity=self.quantity,
            observables=self.observables,
            orderings=task.orderings,
            cost=task.cost,
            synthesis_error=task.synthesis_error,
            device=None if self.device is None else self.device.hardware,
            thorough=task.thorough,
            bounds=task.bounds,
            readout=self.readout,
            relative_to=self.relative_to,
            reference_tolerance=self.reference_tolerance,
            reference_method=self.reference_method,
            most_steps=self.most_steps,
            threads=self.threads if threads is None else threads,
            progress=progress,
            title=self.title,
            start="" if self.start is None else self.start.words,
            energy_unit=self.energy_unit,
        )

    def required_start(self) -> Start:
        """Return the start, for what evolves a state.

        Raises
        ------
        JobError
            There is none.
        """
        if self.start is None:
            raise JobError(
                "start: missing; a state is evolved here: add a section [start]",
                path=str(self.path or ""),
                key="start",
            )
        return self.start

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

        start = self.required_start()
        return reference(
            self.operator,
            start.state(),
            self.times,
            tolerance=1e-10 if self.reference_tolerance is None else self.reference_tolerance,
            observables=self.observables,
            method=self.reference_method,
            keep=keep,
            threads=self.threads if threads is None else threads,
            progress=progress,
            into=into,
            title=self.title,
            start=start.words,
        )


def read_job(path: str | Path, *, candidates_required: bool = True, start_required: bool = True) -> Job:
    """Read and check a job file.

    Parameters
    ----------
    path : str or Path
        The TOML file. Paths in it are taken from its own folder.
    candidates_required : bool
        Whether a job without candidates is an error; a reference needs none.
    start_required : bool
        Whether a job without `[start]` is an error; bounds need none.

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
    return parse_job(text, path, candidates_required, start_required)


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


def parse_job(text: str, path: Path | None, candidates_required: bool, start_required: bool = True) -> Job:
    """Check the text of a job file; `path` is where it came from."""
    shown = str(path) if path is not None else ""
    file = Table(parse_toml(text, shown), "", shown)
    file.only(SECTIONS)
    for key, example in (
        ("system", "a section [system]"),
        ("target", "[target]"),
    ):
        file.require(key, example)
    folder = path.parent if path is not None else Path()

    operator = read_system(file.table("system"), folder)
    section = file.table("target")
    if start_required and section.values.get("quantity") != "operator":
        file.require("start", 'a section [start], or quantity = "operator" in [target] for every start at once')
    start = read_start(file.table("start"), operator.qubits, folder) if "start" in file else None
    target = read_target(section, operator.qubits)
    candidates = read_candidates(file, operator, folder, candidates_required)
    planned = read_planned(file, operator, target.tolerance, folder, candidates)
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
        **target._asdict(),
        candidates=candidates,
        planned=planned,
        reference_tolerance=(
            reference.positive("tolerance", "tolerance = 1e-10") if "tolerance" in reference else None
        ),
        reference_method=reference.choice("method", METHODS, default="chebyshev"),
        folder=folder / output.text("folder", 'folder = "trueturn-audit"') if "folder" in output else None,
        threads=run.whole("threads", "threads = 2") if "threads" in run else None,
        most_steps=run.whole("most_steps", "most_steps = 100000") if "most_steps" in run else 1_000_000,
        title=run.text("title", 'title = "My quench"') if "title" in run else (path.stem if path else ""),
        energy_unit=run.text("energy_unit", 'energy_unit = "J"') if "energy_unit" in run else "",
        device=read_device(file, operator.qubits),
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
