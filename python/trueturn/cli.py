"""The command `trueturn`.

Answers go to stdout, everything else to stderr. The exit status is the verdict: 0 meets, 1 misses, 4
undecided; 2 is bad input, 3 refused for memory, 130 interrupted, 70 a bug of ours. Heavy modules are imported
when a command needs them, so that help is instant.
"""

from __future__ import annotations

import json
import os
import sys
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from trueturn.commands.bound import bound
from trueturn.commands.circuits import cost, export
from trueturn.commands.diagnose import diagnose
from trueturn.commands.options import AS_JSON, JOB, THREADS, circuit_options, is_circuit, require_readable
from trueturn.commands.plans import budget, plan
from trueturn.commands.references import reference, verify

if TYPE_CHECKING:
    from trueturn.audit.job import Progress
    from trueturn.partition import Partition

__all__ = ["commands", "main", "run"]

STATUS = {"meets": 0, "misses": 1, "undecided": 4}
BAD_INPUT, NO_MEMORY, BUG, INTERRUPTED = 2, 3, 70, 130


@click.group(context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(package_name="trueturn", message="%(prog)s %(version)s")
def commands() -> None:
    """Prove product-formula circuits against a certified reference.

    Exit status: 0 meets, 1 misses, 4 undecided, 2 bad input, 3 refused for memory, 130 interrupted.
    """


commands.add_command(bound)
commands.add_command(budget)
commands.add_command(cost)
commands.add_command(diagnose)
commands.add_command(export)
commands.add_command(plan)
commands.add_command(reference)
commands.add_command(verify)


@commands.command()
@click.argument("files", nargs=-1, type=JOB, metavar="[JOB | CIRCUIT... --job JOB]")
@click.option("--job", type=JOB, metavar="JOB", help="Judge the circuits of OpenQASM files against this job.")
@circuit_options
@click.option("--into", type=JOB, metavar="FOLDER", help="Write report.html, audit.json and audit.csv there.")
@AS_JSON
@THREADS
def audit(
    files: tuple[Path, ...],
    job: Path | None,
    into: Path | None,
    as_json: bool,
    threads: int | None,
    **reading: Any,
) -> int:
    """Judge the candidates of JOB and recommend one, or judge circuits against JOB.

    JOB is a TOML file; `trueturn init` writes one to start from. Without JOB the built-in scenario runs: an
    invented ladder of 18 spins after a field quench. With --job the files are OpenQASM circuits, taken to evolve to
    the job's last time; the job's own candidates are left out.
    """
    from trueturn.audit.job import built_in_job, read_job
    from trueturn.audit.report import require_replaceable, terminal_table, to_dict

    if job is not None:
        if not files:
            raise click.UsageError("--job goes with circuits: trueturn audit CIRCUIT.qasm --job JOB.toml")
        from trueturn.circuits.auditing import job_for_circuits

        for path in files:
            require_readable(path)
        task, notes = job_for_circuits(read_job(job, candidates_required=False), files, **reading)
        for note in notes:
            print(f"trueturn: {note}", file=sys.stderr)
    elif len(files) > 1 or any(value is not None for value in reading.values()) or is_circuit(files):
        raise click.UsageError("circuits need a job: trueturn audit CIRCUIT.qasm --job JOB.toml")
    else:
        task = read_job(files[0]) if files else built_in_job()
    folder = into or task.folder
    if folder is not None:
        require_replaceable(folder)
    with progress_bar() as progress:
        found = task.audit(threads=threads, progress=progress)
    if as_json:
        say_json(to_dict(found))
    else:
        say_rich(lambda width: terminal_table(found, width))
    if folder is not None:
        found.write(folder)
        if not as_json:
            say(f"Report: {folder / 'report.html'}")
    elif not as_json:
        say("For the report with pictures, add: --into FOLDER")
    return STATUS[found.verdict]


@commands.command()
@click.argument("path", required=False, default="job.toml", type=JOB)
@click.option("--force", is_flag=True, help="Replace a file that exists.")
def init(path: Path, force: bool) -> int:
    """Write a commented job file to PATH (job.toml) to start from."""
    from trueturn.audit.job import template
    from trueturn.errors import ArgumentError

    try:
        with path.open("w" if force else "x", encoding="utf-8", newline="\n") as file:
            file.write(template())
    except FileExistsError as error:
        message = f"path: exists already ({path}); choose another name, or replace it with --force"
        raise ArgumentError(message, argument="path", value=str(path)) from error
    except OSError as error:
        message = f"path: cannot be written ({path}: {error.strerror}); choose another place"
        raise ArgumentError(message, argument="path", value=str(path)) from error
    say(f"Wrote {path}. Run it with: trueturn audit {path}")
    return 0


@commands.command()
@click.argument("job", required=False, type=JOB)
@AS_JSON
def formulas(job: Path | None, as_json: bool) -> int:
    """List the formulas: order, stages, symmetry, leading error at equal cost, source.

    With JOB the list shows how many rotations a step takes for its Hamiltonian, for each rule of its candidates.
    """
    from trueturn.formulas import formula
    from trueturn.formulas import formulas as all_names
    from trueturn.formulas.listing import document, page

    partitions: dict[str, Partition] = {}
    if job is not None:
        from trueturn.audit.job import read_job

        task = read_job(job)
        for candidate in task.formula_candidates:
            partitions.setdefault(str(candidate.rule), candidate.partition(task.operator))
    known = [formula(name) for name in all_names(special=True)]
    if as_json:
        say_json(document(known, partitions))
    else:
        say_rich(lambda width: page(known, partitions))
    return 0


def say(text: str) -> None:
    """Print a line to stdout; a reader that went away (``| head``) changes nothing about the exit status."""
    try:
        print(text, flush=True)
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def say_json(document: dict[str, Any]) -> None:
    """Print one JSON object."""
    say(json.dumps(document, indent=1, ensure_ascii=False, allow_nan=False))


def say_rich(lay_out: Callable[[int], Any]) -> None:
    """Print something laid out for the width of the terminal, in colour only there."""
    from io import StringIO

    from rich.console import Console

    seen = Console()
    page = StringIO()
    colour: Any = seen.color_system
    console = Console(file=page, width=seen.width, color_system=colour, force_terminal=seen.is_terminal)
    console.print(lay_out(seen.width))
    say("\n".join(line.rstrip() for line in page.getvalue().rstrip("\n").split("\n")))


@contextmanager
def progress_bar() -> Iterator[Progress | None]:
    """Show progress on stderr while it is a terminal; otherwise give no callable at all."""
    if not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console
    from rich.progress import BarColumn, TextColumn, TimeElapsedColumn
    from rich.progress import Progress as Bars

    columns = (TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn())
    with Bars(*columns, console=Console(stderr=True), transient=True, redirect_stdout=False) as bars:
        task = bars.add_task("starting", total=None)

        def report(stage: str, done: float, total: float) -> None:
            bars.update(task, description=stage, completed=done, total=total)

        yield report


def run(arguments: Sequence[str] | None = None) -> int:
    """Run the command line and give its exit status; nothing escapes but `SystemExit` of Python itself.

    Parameters
    ----------
    arguments : sequence of str, optional
        What stands after the program's name; the process's own by default.

    Returns
    -------
    int
    """
    arguments = sys.argv[1:] if arguments is None else arguments
    try:
        status = commands.main(args=list(arguments), prog_name="trueturn", standalone_mode=False)
        return status if isinstance(status, int) else 0
    except click.ClickException as error:
        error.show()
        return error.exit_code
    except (click.Abort, KeyboardInterrupt):
        print("trueturn: interrupted", file=sys.stderr)
        return INTERRUPTED
    except Exception as error:
        if os.environ.get("TRUETURN_DEBUG") == "1":
            import traceback

            traceback.print_exc()
        status, message = explain(error)
        if "--json" in arguments:
            say_json(
                {
                    "kind": "trueturn error",
                    "class": type(error).__name__,
                    "message": message,
                    "status": status,
                }
            )
        print(f"trueturn: {message}", file=sys.stderr)
        return status


def explain(error: Exception) -> tuple[int, str]:
    """Give the exit status and the one line for an error."""
    from trueturn.errors import InternalError, JobError, TrueturnError

    if isinstance(error, TrueturnError) and not isinstance(error, InternalError):
        path = error.path if isinstance(error, JobError) else ""
        message = f"{path}: {error}" if path not in str(error) else str(error)
        return (NO_MEMORY if isinstance(error, MemoryError) else BAD_INPUT), " ".join(message.split())
    if isinstance(error, MemoryError):
        return NO_MEMORY, "memory ran out; close other programs or take fewer qubits"
    if isinstance(error, OSError) and error.strerror:
        return BAD_INPUT, f"{error.filename or 'file'}: {error.strerror}"
    what = str(error) if isinstance(error, InternalError) else f"{type(error).__name__}: {error}"
    advice = "this is a bug; please report it with the job file and this line (TRUETURN_DEBUG=1 shows where)"
    return BUG, " ".join(f"{what}; {advice}: {build_line()}".split())


def build_line() -> str:
    """Give the build in one line, even where the package is too broken to tell."""
    try:
        from trueturn._build import build_info

        return ", ".join(f"{key} {value}" for key, value in build_info().items())
    except Exception as error:
        return f"build unknown ({type(error).__name__}: {error})"


def main() -> None:
    """Run the command line of this process and leave with its status."""
    for stream in (sys.stdout, sys.stderr):
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(errors="replace")
    sys.exit(run())


if __name__ == "__main__":
    main()
