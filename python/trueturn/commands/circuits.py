"""`trueturn cost` and `trueturn export`: circuits of a job as gates."""

from __future__ import annotations

from dataclasses import asdict
from pathlib import Path

import click

from trueturn.commands.options import AS_JSON, JOB

__all__ = ["cost", "export"]

STEPS = click.option("--steps", type=click.IntRange(min=1), metavar="N", help="Step count, where the job says least.")


@click.command()
@click.argument("job", type=JOB)
@STEPS
@AS_JSON
def cost(job: Path, steps: int | None, as_json: bool) -> int:
    """Count the gates of each candidate of JOB on its [device].

    Two-qubit gates after all savings and with routing, depth, T count, and the chance that nothing fails. Nothing is run.
    A candidate whose steps are least is counted with --steps only.
    """
    from trueturn.audit.job import read_job
    from trueturn.cli import say, say_json
    from trueturn.export.job import job_costs

    task = read_job(job)
    table = job_costs(task, steps)
    if as_json:
        said = dict.fromkeys(sentence for one in table.counted.values() for sentence in one.assumptions)
        say_json(
            {
                "kind": "trueturn cost",
                "schema": 1,
                "title": task.title,
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
