"""The ``.terms`` file: the written notation, one term a line, with comments."""

from __future__ import annotations

import os
import re
import tempfile
from pathlib import Path

from trueturn.errors import OperatorError

__all__ = ["one_a_line", "read_text", "write_text"]

_QUBITS_COMMENT = re.compile(r"^[ \t]*#[ \t]*qubits:[ \t]*(\S*)[ \t]*$", re.MULTILINE)


def read_text(path: Path) -> tuple[str, int | None]:
    """Return the text of the file and the number that its ``# qubits: N`` comment states, if any."""
    try:
        text = path.read_text(encoding="utf-8")
    except UnicodeDecodeError as error:
        message = f"{path}: not UTF-8 text (byte {error.start}); give a .terms file"
        raise OperatorError(message, argument="path") from None
    stated = _QUBITS_COMMENT.search(text)
    if stated is None:
        return text, None
    if not (stated[1].isascii() and stated[1].isdigit()):
        message = f"{path}: the qubits comment holds no number ({stated[1]!r}); write it like '# qubits: 4'"
        raise OperatorError(message, argument="path")
    return text, int(stated[1])


def one_a_line(text: str) -> list[str]:
    """Split the text of an operator into its terms, each with its sign."""
    return text.replace(" + ", "\n").replace(" - ", "\n-").split("\n")


def write_text(path: Path, text: str, qubits: int) -> None:
    """Write the terms of `text` one a line, under a temporary name that is renamed when complete."""
    lines = "\n".join(one_a_line(text))
    handle, temporary = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.", suffix=".part")
    try:
        with os.fdopen(handle, "w", encoding="utf-8", newline="\n") as file:
            file.write(f"# qubits: {qubits}\n{lines}\n")
        os.chmod(temporary, 0o666 & ~_umask())  # temporary files are private, the finished one is not
        os.replace(temporary, path)
    except BaseException:
        Path(temporary).unlink(missing_ok=True)
        raise


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
