"""Writing an audit down: report.html, audit.json, audit.csv, and a table for the terminal."""

from __future__ import annotations

import os
import shutil
import tempfile
from pathlib import Path
from typing import TYPE_CHECKING

from trueturn.audit.report.document import csv_text, json_text, to_dict
from trueturn.audit.report.tables import plain_table, terminal_table
from trueturn.errors import ArgumentError

if TYPE_CHECKING:
    from trueturn.audit.result import Audit

__all__ = ["FILES", "plain_table", "require_replaceable", "terminal_table", "to_dict", "write_folder"]

FILES = ("report.html", "audit.json", "audit.csv")


def require_replaceable(folder: Path) -> None:
    """Refuse a place where an audit folder cannot be written without losing something.

    Parameters
    ----------
    folder : Path
        May be absent, empty, or an audit folder with nothing else in it.

    Raises
    ------
    ArgumentError
        Otherwise, or where the folder above it does not accept new files.
    """

    def refuse(wrong: str, remedy: str) -> ArgumentError:
        return ArgumentError(f"folder: {wrong} ({folder}); {remedy}", argument="folder", value=str(folder))

    if folder.exists() and not folder.is_dir():
        raise refuse("a file of this name exists", "choose another name")
    if folder.is_dir():
        names = sorted(entry.name for entry in folder.iterdir())
        if names and "audit.json" not in names:
            raise refuse("exists and is not an audit folder", "choose another name, or empty it first")
        strangers = [name for name in names if name not in FILES]
        if strangers:
            raise refuse(f"holds {strangers[0]}, which is no part of an audit", "move it away, or choose another name")
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
    target = folder.resolve()
    target.parent.mkdir(parents=True, exist_ok=True)
    work = Path(tempfile.mkdtemp(prefix=f".{target.name}-", dir=target.parent))
    try:
        fresh, old = work / "new", work / "old"
        fresh.mkdir()
        texts = (page(audit), json_text(to_dict(audit)), csv_text(audit))
        for name, text in zip(FILES, texts, strict=True):
            (fresh / name).write_text(text, encoding="utf-8", newline="\n")
        require_replaceable(folder)
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
