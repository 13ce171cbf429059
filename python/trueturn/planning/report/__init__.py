"""Writing a plan down: plan.html, plan.json, plan.csv, and a table for the terminal."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from trueturn import _folders
from trueturn.audit.report.document import json_text
from trueturn.planning.report.document import csv_text, to_dict
from trueturn.planning.report.table import plain_table, terminal_table

if TYPE_CHECKING:
    from trueturn.planning.result import Plan

__all__ = ["FILES", "plain_table", "require_replaceable", "terminal_table", "to_dict", "write_folder"]

FILES = ("plan.html", "plan.json", "plan.csv")
_KIND = ("plan", "plan.json", FILES.__contains__)


def require_replaceable(folder: Path) -> None:
    """Refuse a place where a plan folder cannot be written without losing something; see `trueturn.audit.report`."""
    _folders.require_replaceable(folder, *_KIND)


def write_folder(plan: Plan, folder: Path) -> Path:
    """Write plan.html, plan.json and plan.csv into a folder that appears only when it is complete.

    Raises
    ------
    ArgumentError
        See `require_replaceable`.
    """
    from trueturn.planning.report.page import page

    with _folders.replacing(folder, *_KIND) as fresh:
        texts = (page(plan), json_text(to_dict(plan)), csv_text(plan))
        _folders.write_texts(fresh, dict(zip(FILES, texts, strict=True)))
    return folder
