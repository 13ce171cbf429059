"""The command `trueturn bound`."""

from __future__ import annotations

from pathlib import Path

import click

__all__ = ["bound"]


@click.command()
@click.argument("job", type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object and nothing else.")
def bound(job: Path, as_json: bool) -> int:
    """Bound the error of every candidate of JOB by theorems alone.

    No state is made, so any size up to 128 qubits will do, and JOB needs no [start]. Exit status 0 where a candidate is
    proven to meet the tolerance with its own steps, 4 where none is. Randomised formulas are no candidates of a job: in
    Python the channel_bound() of trueturn.randomised bounds their average.
    """
    from trueturn.accuracy.job_bounds import document, job_bounds, page
    from trueturn.audit.job import read_job
    from trueturn.cli import STATUS, say_json, say_rich

    task = read_job(job, start_required=False)
    rows = job_bounds(task)
    if as_json:
        say_json(document(task, rows))
    else:
        say_rich(lambda width: page(task, rows))
    proven = any(row.error is not None and row.error <= task.tolerance for row in rows)
    return STATUS["meets" if proven else "undecided"]
