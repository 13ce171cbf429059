"""`trueturn plan` and `trueturn budget`: which circuit to run, on an ideal machine and on a noisy one."""

from __future__ import annotations

import sys
from pathlib import Path

import click

from trueturn.commands.options import AS_JSON, JOB, THREADS

__all__ = ["budget", "plan"]


@click.command()
@click.argument("job", type=JOB)
@click.option("--into", type=JOB, metavar="FOLDER", help="Write plan.html, plan.json and plan.csv there.")
@AS_JSON
@THREADS
def plan(job: Path, into: Path | None, as_json: bool, threads: int | None) -> int:
    """Find the least steps of every formula and rule of JOB, and rank them by cost.

    The section [plan] says what is searched and what counts; without it, the formulas and rules of the candidates. Ctrl-C
    ends the search with the best so far.
    """
    from trueturn.audit.job import read_job
    from trueturn.cli import INTERRUPTED, STATUS, progress_bar, say, say_json, say_rich
    from trueturn.planning.report import require_replaceable, terminal_table, to_dict

    task = read_job(job, candidates_required=False)
    if into is not None:
        require_replaceable(into)
    with progress_bar() as progress:
        found = task.plan(threads=threads, progress=progress)
    if as_json:
        say_json(to_dict(found))
    else:
        say_rich(lambda width: terminal_table(found, width))
    if into is not None:
        found.write(into)
        if not as_json:
            say(f"Report: {into / 'plan.html'}")
    elif not as_json:
        say("For the report with pictures, add: --into FOLDER")
    if found.interrupted:
        print("trueturn: interrupted", file=sys.stderr)
        return INTERRUPTED
    return STATUS[found.verdict]


@click.command()
@click.argument("job", type=JOB)
@click.option(
    "--errors",
    type=click.Choice(["measured", "proven"]),
    default="measured",
    help="Algorithmic errors: measured from the start state (default), or proven bounds, for which JOB needs no [start].",
)
@AS_JSON
@THREADS
def budget(job: Path, errors: str, as_json: bool, threads: int | None) -> int:
    """Weigh the error of each formula of JOB against the noise of its [device].

    For each observable at the last time: the step count of the least total error, and whether it meets the tolerance.
    """
    from trueturn.audit.job import read_job
    from trueturn.cli import STATUS, progress_bar, say_json, say_rich
    from trueturn.device.job import job_budgets, job_document

    task = read_job(job, start_required=errors == "measured")
    with progress_bar() as progress:
        found = job_budgets(task, errors, threads=threads, progress=progress)
    if as_json:
        say_json(job_document(task, found))
    else:
        from rich.text import Text

        say_rich(lambda width: Text("\n\n".join(f"{name}\n{one.table(width)}" for name, one in found.items())))
    return STATUS["meets" if all(one.verdict == "meets" for one in found.values()) else "misses"]
