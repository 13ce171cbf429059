"""`trueturn reference` and `trueturn verify`: certified references, printed, written and checked."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from trueturn.commands.options import AS_JSON, JOB, THREADS

if TYPE_CHECKING:
    from trueturn.audit.job import Job
    from trueturn.reference import Reference

__all__ = ["reference", "verify"]


@click.command()
@click.argument("job", type=JOB)
@click.option("--into", type=JOB, metavar="FOLDER", help="Write manifest.json, expectations.csv and state_*.npy there.")
@click.option(
    "--states", type=click.Choice(["all", "last"]), default="all", help="Which states to write; all by default."
)
@AS_JSON
@THREADS
def reference(job: Path, into: Path | None, states: str, as_json: bool, threads: int | None) -> int:
    """Compute only the certified reference of JOB.

    Prints the expectations of its observables at its times, and the certificate.
    """
    from trueturn.audit.job import read_job
    from trueturn.cli import progress_bar, say, say_json

    task = read_job(job, candidates_required=False)
    keep = "last" if into is None else states
    with progress_bar() as progress:
        found = task.reference(threads=threads, progress=progress, into=into, keep=keep)
    if as_json:
        say_json(reference_document(task, found))
    else:
        say_reference(task, found)
        if into is not None:
            say(f"Folder: {into}")
    return 0


@click.command()
@click.argument("folder", type=JOB)
@AS_JSON
@THREADS
def verify(folder: Path, as_json: bool, threads: int | None) -> int:
    """Verify a reference FOLDER: nothing altered or missing, norm and energy conserved within the certificate.

    Exit status 0 where every check holds, 1 where one does not.
    """
    from trueturn.cli import progress_bar, say, say_json
    from trueturn.reference.verification import verify as verified

    with progress_bar() as progress:
        found = verified(folder, threads=threads, progress=progress)
    if as_json:
        say_json(found.to_dict())
    else:
        say(repr(found))
    return 0 if found.holds else 1


def reference_document(task: Job, found: Reference) -> dict[str, Any]:
    """Give a reference as plain data."""
    from trueturn.reference.folder import certificate_data

    return {
        "kind": "trueturn reference",
        "schema": 1,
        "title": task.title,
        "times": [float(time) for time in found.times],
        "expectations": {name: [float(value) for value in values] for name, values in found.expectations.items()},
        "certificate": certificate_data(found.certificate, found.times),
    }


def say_reference(task: Job, found: Reference) -> None:
    """Print times, expectations and the certificate for people."""
    from rich.console import Group
    from rich.table import Table
    from rich.text import Text

    from trueturn.audit.figures import count, outward, plain, upper
    from trueturn.cli import say_rich

    proof = found.certificate
    table = Table(box=None, padding=(0, 2, 0, 0), header_style="dim")
    for heading in ("time", *found.expectations, "state error ≤"):
        table.add_column(Text(heading), justify="right")
    for index, time in enumerate(found.times):
        values = [f"{float(series[index]):+.10f}" for series in found.expectations.values()]
        table.add_row(plain(float(time)), *values, upper(float(proof.error_bound[time])))
    low, high = proof.spectral_interval
    lines = [
        f"{proof.method}, {'proven' if proof.proven else 'estimated, not proven'}; "
        f"{count(proof.applications)} operator applications; spectrum within {outward(low, high)}.",
        *proof.notes,
    ]
    say_rich(lambda width: Group(Text(task.title, style="bold"), Text(), table, Text(), Text("\n".join(lines))))
