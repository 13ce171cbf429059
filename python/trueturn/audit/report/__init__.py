"""Writing an audit down: report.html, audit.json, audit.csv, and a table for the terminal."""

from __future__ import annotations

import os
import shutil
import tempfile
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from trueturn.audit.report.document import csv_text, json_text, to_dict
from trueturn.audit.report.tables import plain_table, terminal_table
from trueturn.errors import ArgumentError

if TYPE_CHECKING:
    from trueturn.audit.result import Audit

__all__ = [
    "FILES",
    "plain_table",
    "require_replaceable",
    "terminal_table",
    "to_dict",
    "write_files",
    "write_folder",
]

FILES = ("report.html", "audit.json", "audit.csv")


def require_replaceable(folder: Path, files: Sequence[str] = FILES, kind: str = "audit") -> None:
    """Refuse a place where a report folder cannot be written without losing something.

    Parameters
    ----------
    folder : Path
        May be absent, empty, or a folder of the same kind with nothing else in it.
    files : sequence of str
        All files of such a folder.
    kind : str
        What the folder holds; its mark is ``KIND.json``.

    Raises
    ------
    ArgumentError
        Otherwise, or where the folder above it does not accept new files.
    """

    def refuse(wrong: str, remedy: str) -> ArgumentError:
        return ArgumentError(f"folder: {wrong} ({folder}); {remedy}", argument="folder", value=str(folder))

    article = "an" if kind[0] in "aeiou" else "a"
    if folder.exists() and not folder.is_dir():
        raise refuse("a file of this name exists", "choose another name")
    if folder.is_dir():
        names = sorted(entry.name for entry in folder.iterdir())
        if names and f"{kind}.json" not in names:
            raise refuse(f"exists and is not {article} {kind} folder", "choose another name, or empty it first")
        strangers = [name for name in names if name not in files]
        if strangers:
            wrong = f"holds {strangers[0]}, which is no part of {article} {kind}"
            raise refuse(wrong, "move it away, or choose another name")
    above = next(place for place in folder.absolute().parents if place.exists())
    if not above.is_dir() or not os.access(above, os.W_OK | os.X_OK):
        raise refuse("cannot be made here", "choose a place that you may write to")


def write_folder(audit: Audit, folder: Path) -> Path:
    """Write report.html, audit.json and audit.csv into a folder that appears only when it is complete.

    Parameters
    ----------
    audit : Audit
    folder : Path
        An existing audit folder is replaced; any other folder that is not empty is refused.

    Returns
    -------
    Path
        The folder.

    Raises
    ------
    ArgumentError
        See `require_replaceable`.
    """
    from trueturn.audit.report.page import page

    require_replaceable(folder)
    texts = (page(audit), json_text(to_dict(audit)), csv_text(audit))
    return write_files(folder, dict(zip(FILES, texts, strict=True)), "audit")


def write_files(folder: Path, texts: Mapping[str, str], kind: str) -> Path:
    """Write texts under their names into a folder that appears only when it is complete; see `require_replaceable`."""
    require_replaceable(folder, tuple(texts), kind)
    target = folder.resolve()
    target.parent.mkdir(parents=True, exist_ok=True)
    work = Path(tempfile.mkdtemp(prefix=f".{target.name}-", dir=target.parent))
    try:
        fresh, old = work / "new", work / "old"
        fresh.mkdir()
        for name, text in texts.items():
            (fresh / name).write_text(text, encoding="utf-8", newline="\n")
        if target.exists():
            target.rename(old)
        try:
            fresh.rename(target)
        except OSError:
            if old.exists():
                old.rename(target)
            raise
    finally:
        shutil.rmtree(work, ignore_errors=True)
    return folder
