"""`trueturn cost` and `trueturn export`: circuits of a job as gates."""

from __future__ import annotations

import sys
from dataclasses import asdict
from pathlib import Path
from typing import Any

import click

from trueturn.commands.options import AS_JSON, JOB, THREADS, circuit_options, is_circuit, require_readable

__all__ = ["cost", "export"]

STEPS = click.option("--steps", type=click.IntRange(min=1), metavar="N", help="Step count, where the job says least.")


@click.command()
@click.argument("files", nargs=-1, required=True, type=JOB, metavar="JOB | CIRCUIT...")
@click.option("--job", type=JOB, metavar="JOB", help="The [device] of this job says how often gates of CIRCUITs fail.")
@circuit_options
@STEPS
@click.option("--search", is_flag=True, help="Search the step counts that JOB leaves open (least), as an audit does.")
@AS_JSON
@THREADS
def cost(
    files: tuple[Path, ...],
    job: Path | None,
    steps: int | None,
    search: bool,
    as_json: bool,
    threads: int | None,
    **reading: Any,
) -> int:
    """Count the gates of each candidate of JOB on its [device], or those that stand in OpenQASM files.

    Two-qubit gates, depth, T count, and the chance that nothing fails. Candidates are counted after all savings and with
    routing, as trueturn export writes them. Nothing is run; a candidate whose steps are least is counted with --steps, or with
    --search, which evolves the state.
    """
    from trueturn.audit.job import read_job
    from trueturn.cli import progress_bar, say, say_json
    from trueturn.export.job import job_costs, job_least

    if job is not None or len(files) > 1 or is_circuit(files):
        if steps is not None or search:
            raise click.UsageError("--steps and --search go with a job: trueturn cost JOB.toml")
        from trueturn.circuits.auditing import circuit_costs

        for path in files:
            require_readable(path)
        task = None if job is None else read_job(job, candidates_required=False, start_required=False)
        table, notes = circuit_costs(files, task, **reading)
        title = "" if task is None else task.title
        for note in notes:
            print(f"trueturn: {note}", file=sys.stderr)
    else:
        if any(value is not None for value in reading.values()):
            raise click.UsageError("--prepare, --basis and layouts go with circuits: trueturn cost CIRCUIT.qasm")
        task = read_job(files[0])
        searched = None
        if search and steps is None:
            with progress_bar() as progress:
                searched = job_least(task, threads, progress)
        table, title = job_costs(task, steps, searched), task.title
    if as_json:
        said = dict.fromkeys(sentence for one in table.counted.values() for sentence in one.assumptions)
        say_json(
            {
                "kind": "trueturn cost",
                "schema": 1,
                "title": title,
                "rows": table.to_dict(),
                "assumptions": list(said),
            }
        )
    else:
        say(repr(table))
    return 0


@click.command()
@click.argument("job", type=JOB)
@click.option("--candidate", metavar="NAME", help="Formula and rule, formula, or number of the candidate.")
@click.option("--into", type=JOB, required=True, metavar="FILE", help="The OpenQASM file to write.")
@click.option("--qasm", "version", type=click.Choice(["3", "2"]), default="3", help="Version of OpenQASM (3).")
@STEPS
@AS_JSON
def export(job: Path, candidate: str | None, into: Path, version: str, steps: int | None, as_json: bool) -> int:
    """Write the circuit of a candidate of JOB, to its last time, as OpenQASM for its [device]."""
    from trueturn.audit.job import read_job
    from trueturn.cli import say, say_json
    from trueturn.export.job import circuit_words, job_candidate, job_circuit, job_hardware
    from trueturn.export.qasm import write_qasm

    task = read_job(job)
    place = job_candidate(task, candidate)
    circuit = job_circuit(task, place, steps)
    made = write_qasm(circuit, into, int(version), circuit_words(task, place, steps), job_hardware(task))
    if as_json:
        say_json({"kind": "trueturn export", "schema": 1, "file": str(into), "version": int(version), **asdict(made)})
    else:
        swaps = f", {made.swaps} of them swaps of three" if made.swaps else ""
        say(f"Wrote {into}: {made.two_qubit_gates} two-qubit gates{swaps}; depth in them {made.two_qubit_depth}.")
    return 0
