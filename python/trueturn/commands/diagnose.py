"""The command `trueturn diagnose`."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

import click

from trueturn.commands.options import circuit_options, require_readable

__all__ = ["STATUS", "diagnose"]

STATUS = {True: 0, False: 1, None: 4}
"""Exit statuses: matches, does not match, cannot tell."""
FILE = click.Path(path_type=Path)


@click.command()
@click.argument("circuit", type=FILE)
@click.option(
    "--job", required=True, type=FILE, metavar="JOB.toml", help="Job that names the Hamiltonian and the times."
)
@click.option("--time", type=float, metavar="T", help="Evolution time; the job's last one by default.")
@click.option(
    "--tolerance", type=float, default=1e-8, show_default=True, metavar="SHARE", help="Share of c·t that is rounding."
)
@circuit_options
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object and nothing else.")
def diagnose(circuit: Path, job: Path, time: float | None, tolerance: float, as_json: bool, **reading: Any) -> int:
    """Compare the OpenQASM file CIRCUIT with exp(-iHt) and name the mistake where it differs.

    No state vector is needed. Exit status: 0 matches, 1 does not match, 4 cannot tell, 2 bad input.
    """
    from trueturn.audit.job import read_job
    from trueturn.circuits.reading import read_circuit
    from trueturn.cli import say, say_json
    from trueturn.diagnosis import diagnose as diagnosed

    task = read_job(job, candidates_required=False, start_required=False)
    require_readable(circuit)
    read = read_circuit(circuit, **reading)
    for note in read.notes:
        print(f"trueturn: {circuit.name}: {note}", file=sys.stderr)
    length = task.times[-1] if time is None else time
    found = diagnosed(read.evolution, task.operator, length, tolerance=tolerance)
    if as_json:
        say_json(found.to_dict())
    else:
        say(str(found))
    return STATUS[found.matches]
