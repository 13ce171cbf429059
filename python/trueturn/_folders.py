"""Folders that appear only when they are complete: written beside the old one, then put in its place."""

from __future__ import annotations

import os
import shutil
import tempfile
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path

from trueturn.errors import ArgumentError

__all__ = ["replacing", "require_replaceable", "write_texts"]

Belongs = Callable[[str], bool]


def require_replaceable(folder: Path, what: str, marker: str, belongs: Belongs) -> None:
    """Refuse a place where a folder cannot be written without losing something.

    Parameters
    ----------
    folder : Path
        May be absent, empty, or a folder of this kind with nothing else in it.
    what : str
        The kind in words, such as ``"audit"``.
    marker : str
        A file that every folder of this kind holds.
    belongs : callable
        Whether a name is that of a file of such a folder.

    Raises
    ------
    ArgumentError
        Otherwise, or where the folder above it does not accept new files.
    """

    def refuse(wrong: str, remedy: str) -> ArgumentError:
        return ArgumentError(f"folder: {wrong} ({folder}); {remedy}", argument="folder", value=str(folder))

    article = "an" if what[0] in "aeiou" else "a"
    if folder.exists() and not folder.is_dir():
        raise refuse("a file of this name exists", "choose another name")
    if folder.is_dir():
        names = sorted(entry.name for entry in folder.iterdir())
        if names and marker not in names:
            raise refuse(f"exists and is not {article} {what} folder", "choose another name, or empty it first")
        strangers = [name for name in names if not belongs(name)]
        if strangers:
            wrong = f"holds {strangers[0]}, which is no part of {article} {what}"
            raise refuse(wrong, "move it away, or choose another name")
    above = next(place for place in folder.absolute().parents if place.exists())
    if not above.is_dir() or not os.access(above, os.W_OK | os.X_OK):
        raise refuse("cannot be made here", "choose a place that you may write to")


@contextmanager
def replacing(folder: Path, what: str, marker: str, belongs: Belongs) -> Iterator[Path]:
    """Give a fresh folder to fill; when the block ends well it takes the place of `folder`.

    Parameters
    ----------
    folder, what, marker, belongs
        As for `require_replaceable`.

    Raises
    ------
    ArgumentError
        See `require_replaceable`.
    OSError
        As raised by the system. The old folder is then as it was, and nothing else is left behind.
    """
    require_replaceable(folder, what, marker, belongs)
    target = folder.resolve()
    target.parent.mkdir(parents=True, exist_ok=True)
    work = Path(tempfile.mkdtemp(prefix=f".{target.name}-", dir=target.parent))
    try:
        fresh, old = work / "new", work / "old"
        fresh.mkdir()
        yield fresh
        require_replaceable(folder, what, marker, belongs)
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


def write_texts(folder: Path, texts: Mapping[str, str]) -> None:
    """Write texts under their names into a folder, the same bytes on every system."""
    for name, text in texts.items():
        (folder / name).write_text(text, encoding="utf-8", newline="\n")
