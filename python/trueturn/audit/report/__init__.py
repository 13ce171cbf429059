"""Writing an audit down: report.html, audit.json, audit.csv, and a table for the terminal."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from trueturn import _folders
from trueturn.audit.report.document import csv_text, json_text, to_dict
from trueturn.audit.report.tables import plain_table, terminal_table

if TYPE_CHECKING:
    from trueturn.audit.result import Audit

__all__ = ["FILES", "plain_table", "require_replaceable", "terminal_table", "to_dict", "write_folder"]

FILES = ("report.html", "audit.json", "audit.csv")
_KIND = ("audit", "audit.json", FILES.__contains__)


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
    _folders.require_replaceable(folder, *_KIND)


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

    with _folders.replacing(folder, *_KIND) as fresh:
        texts = (page(audit), json_text(to_dict(audit)), csv_text(audit))
        _folders.write_texts(fresh, dict(zip(FILES, texts, strict=True)))
    return folder
