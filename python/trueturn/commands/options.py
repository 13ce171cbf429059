"""Arguments that several commands share."""

from __future__ import annotations

from pathlib import Path

import click

__all__ = ["AS_JSON", "JOB", "THREADS"]

JOB = click.Path(path_type=Path)
THREADS = click.option(
    "--threads", type=click.IntRange(min=1), metavar="N", help="Threads to use; results do not depend on it."
)
AS_JSON = click.option("--json", "as_json", is_flag=True, help="Print one JSON object and nothing else.")
