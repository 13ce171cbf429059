"""OpenQASM 2 and 3 read as circuits of Pauli rotations."""

from __future__ import annotations

import difflib
import os
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, NamedTuple, TypedDict, Unpack

from trueturn import _native
from trueturn.circuits.counts import GateCounts
from trueturn.circuits.layouts import Layouts, given_layout, marked_layouts
from trueturn.errors import ArgumentError, QasmError
from trueturn.rotations import Rotations

if TYPE_CHECKING:
    from trueturn.export import Cost

__all__ = ["Circuit", "Note", "Reading", "Register", "read_circuit", "read_qasm"]

QUARTER_TURNS = ("auto", "clifford", "diagonal", "rotations")
NATIVE_GATES = ("rzz", "swap")
LARGEST_FILE = 1 << 32

Range = tuple[int, int] | str


class Register(NamedTuple):
    """A register of qubits of the file: its first qubit and how many follow; declared one after the other."""

    name: str
    start: int
    size: int


class Note(NamedTuple):
    """Something that the reader left out or chose, with the line that made it so (0 for the whole file)."""

    line: int
    text: str

    def __str__(self) -> str:
        return f"line {self.line}: {self.text}" if self.line else self.text


@dataclass(frozen=True)
class Circuit:
    """What an OpenQASM text says.

    Attributes
    ----------
    evolution : Rotations
        What is judged: all gates but those named by `prepare` and `basis`. In logical qubits where layouts are known.
    preparation, basis : Rotations
        The gates named by `prepare` and by `basis`; without rotations where none were named.
    version : int
        2 or 3.
    registers : tuple of Register
        Empty where the file uses qubits of the machine, ``$0``.
    gates : int
        Gate calls, loops and branches outside of loops, branches and definitions; `prepare` and `basis` count in these.
    start_layout, end_layout : tuple of int or None
        Entry q is the physical qubit that holds logical qubit q before the first gate, after the last.
    quarter_turns : "clifford", "diagonal" or "rotations"
        Which rotations by multiples of π/4 stayed rotations: none, diagonal ones, all; see `read_qasm`.
    notes : tuple of Note
    """

    evolution: Rotations
    preparation: Rotations
    basis: Rotations
    version: int
    registers: tuple[Register, ...]
    gates: int
    start_layout: tuple[int, ...] | None
    end_layout: tuple[int, ...] | None
    quarter_turns: str
    notes: tuple[Note, ...]

    @property
    def gate_counts(self) -> GateCounts:
        """The gates of the evolution as they stand in the file."""
        counts = self.evolution.gate_counts
        assert counts is not None
        return counts

    def cost(self, **device: Any) -> Cost:
        """Return what the evolution costs as the file has it, at the rates of a device.

        Parameters
        ----------
        **device
            As for `Rotations.cost`, which counts the gates that trueturn would write instead. Only two_qubit_error,
            one_qubit_error, readout_error and synthesis_error matter here.

        Returns
        -------
        Cost
            Its `success` is None where there are gates on more than two qubits, whose rate is not known.

        Raises
        ------
        ArgumentError
            An unknown option, a rate out of range.

        Examples
        --------
        >>> text = 'OPENQASM 3.0; include "stdgates.inc"; qubit[2] q; cx q[0], q[1]; rz(0.7) q[1]; cx q[0], q[1];'
        >>> cost = read_circuit(text).cost(two_qubit_error=0.01)
        >>> cost.two_qubit_gates, cost.depth, round(cost.success, 4)
        (2, 3, 0.9801)
        """
        from trueturn.export.cost import cost_as_written
        from trueturn.export.hardware import Hardware

        start = self.start_layout or tuple(range(self.evolution.qubits))
        end = self.end_layout or start
        physical = max(
            sum(register.size for register in self.registers), 1 + max((*start, *end)), self.evolution.qubits
        )
        return cost_as_written(self.evolution, Hardware.of(device), start, end, physical)


class Reading(TypedDict, total=False):
    """How a file is read; each is explained at `read_qasm`."""

    prepare: Range | None
    basis: Range | None
    start_layout: Sequence[int] | None
    end_layout: Sequence[int] | None
    quarter_turns: str
    expansion_limit: int | None
    native_gates: Sequence[str] | None
    qubits: int | None


def read_qasm(path_or_text: str | os.PathLike[str], **reading: Unpack[Reading]) -> Rotations:
    """Read an OpenQASM 2 or 3 circuit as Pauli rotations.

    Parameters
    ----------
    path_or_text : str or path
        A file, or the text itself: a str that holds a line break or a semicolon is text.
    prepare, basis : (int, int) or str, optional
        Gates that prepare the start, and gates that change the basis before measurement; left out of the result. A pair
        is a half-open range of gates, counted from 0 outside of loops and definitions, a loop as one; a text is
        ``"0:120"``, the same, or ``"lines 4-9"``, both ends included. Preparation comes first, change of basis last.
    start_layout, end_layout : sequence of int, optional
        Entry q is the physical qubit that holds logical qubit q before the first gate, after the last. By default what
        the comments ``// trueturn: start_layout = [2, 0, 1]`` and ``// trueturn: end_layout = [...]`` of the file say.
        With layouts the result is in logical qubits, and qubits that the start layout does not list must stay idle.
    quarter_turns : "auto", "clifford", "diagonal" or "rotations"
        Rotations by multiples of π/4 are Cliffords too: rx(pi/2) is a change of basis in one file and the evolution in
        another. ``"clifford"`` takes all of them as changes of basis, ``"diagonal"`` those that are not diagonal,
        ``"rotations"`` none. ``"auto"`` reads in all these ways and takes, among those that leave no Clifford at the end
        and some rotation, the one with the fewest different strings; the first where there is none. The unitary is the
        same in each.
    expansion_limit : int, optional
        Gates that loops over their variable, gate bodies and modifiers may make. Default: 2**18, and 16 more for each
        byte of text.
    native_gates : sequence of str, optional
        Gates that the file defines and that count as one gate each in `Rotations.gate_counts`, whatever their bodies; others
        count by their bodies. Default: rzz and swap.
    qubits : int, optional
        Qubits of the result, 1 to 128: more than the file has are left alone, and idle ones beyond these are left out.
        Default: those of the file, or those that the start layout lists.

    Returns
    -------
    Rotations
        Its unitary is that of the file, global phase included (version 2 leaves that open; rx, ry, rz, u2 and u3 are taken
        in SU(2)). A Clifford left over is its `frame`, moved qubits its `relabelling`. Qubit q of the first register is
        qubit q, and registers follow each other.

    Raises
    ------
    QasmError
        The text is no unitary circuit with known values; with line, column and reason.
    ArgumentError
        A range, a layout or an option that does not fit; `qubits` fewer than are used.

    Notes
    -----
    Measurements at the end, delays and annotations are left out with a note; `read_circuit` has the notes. Angles within 4
    units in the last place of a multiple of π/4 count as that multiple where they join the Clifford. Loops whose body does
    not use the variable stay repeated blocks. Time and memory are linear in the text.

    References
    ----------
    A. Cross et al., OpenQASM 3, ACM Trans. Quantum Comput. 3, 12 (2022); A. Cross, L. Bishop, J. Smolin, J. Gambetta,
    Open Quantum Assembly Language, arXiv:1707.03429 (2017).

    Examples
    --------
    >>> zz = read_qasm('OPENQASM 3.0; include "stdgates.inc"; qubit[2] q; cx q[0], q[1]; rz(0.7) q[1]; cx q[0], q[1];')
    >>> zz.angle_totals()
    Operator('0.35 Z_0 Z_1', qubits=2)
    """
    return read_circuit(path_or_text, **reading).evolution


def read_circuit(path_or_text: str | os.PathLike[str], **reading: Unpack[Reading]) -> Circuit:
    """Read an OpenQASM 2 or 3 circuit with everything that the text says; parameters and errors are those of `read_qasm`.

    Returns
    -------
    Circuit

    Examples
    --------
    >>> text = 'OPENQASM 2.0; include "qelib1.inc"; qreg q[1]; creg c[1]; h q[0]; measure q -> c;'
    >>> print(*read_circuit(text).notes)
    line 1: measurements at the end are left out: what is read is the unitary before them
    """
    _require_known(reading)
    text, folder, path = _source(path_or_text)
    quarter_turns = reading.get("quarter_turns", "auto")
    if quarter_turns not in QUARTER_TURNS:
        raise ArgumentError(
            f"quarter_turns: unknown ({quarter_turns!r}); give one of {', '.join(QUARTER_TURNS)}",
            argument="quarter_turns",
            value=quarter_turns,
        )
    ranges = (_range("prepare", reading.get("prepare")), _range("basis", reading.get("basis")))
    given = (
        given_layout("start_layout", reading.get("start_layout")),
        given_layout("end_layout", reading.get("end_layout")),
    )
    limit = _limit(reading.get("expansion_limit"))
    native = _names(reading.get("native_gates"))
    width = _width(reading.get("qubits"))
    try:
        found = _native.read_qasm(text, folder, quarter_turns, *ranges, limit, native)
        parts, version, registers, gates, notes, marks, way, counted = found
        marked, unknown = marked_layouts(marks)
        start, end = (mine if mine is not None else its for mine, its in zip(given, marked, strict=True))
    except QasmError as error:
        raise _named(error, path) from None
    prepared, evolution, measured = (Rotations._wrap(part) for part in parts)
    layouts = Layouts(start, end, evolution.qubits)
    whole = layouts.logical(prepared, evolution, measured)
    preparation, evolution, changed = whole if width is None else (_on_qubits(part, width) for part in whole)
    said = [Note(line, words) for line, words in notes]
    said += [
        Note(line, f"a comment that says nothing known is left out (trueturn: {words})") for line, words in unknown
    ]
    if way != "clifford" and quarter_turns == "auto":
        kept = "diagonal rotations" if way == "diagonal" else "rotations"
        said.append(Note(0, f"{kept} by multiples of π/4 are taken as rotations, not as changes of basis"))
    return Circuit(
        evolution=Rotations._wrap(evolution._circuit, GateCounts._of(*counted)),
        preparation=preparation,
        basis=changed,
        version=version,
        registers=tuple(Register(*register) for register in registers),
        gates=gates,
        start_layout=start,
        end_layout=end,
        quarter_turns=way,
        notes=tuple(said),
    )


def _source(given: str | os.PathLike[str]) -> tuple[str, str | None, str]:
    """Return the text, the folder of its includes, and the name of its file."""
    if isinstance(given, str) and ("\n" in given or ";" in given or not given.strip()):
        try:
            given.encode("utf-8")
        except UnicodeEncodeError:
            message = "path_or_text: holds half of a surrogate pair; give Unicode text"
            raise QasmError(message, path="", line=1, column=1) from None
        return given, None, ""
    try:
        path = Path(given)
    except TypeError:
        raise ArgumentError(
            f"path_or_text: neither a path nor a text ({given!r}); give one", argument="path_or_text", value=given
        ) from None
    try:
        if path.stat().st_size > LARGEST_FILE:
            raise QasmError(f"{path}: larger than 4 GiB; split it", path=str(path), line=1, column=1)
        text = path.read_bytes().decode("utf-8")
    except UnicodeDecodeError as error:
        line = error.object[: error.start].count(b"\n") + 1
        message = f"{path}: line {line}: no UTF-8 text (byte {error.start}); save it as UTF-8"
        raise QasmError(message, path=str(path), line=line, column=1) from None
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
        message = f"path_or_text: cannot be read ({os.fspath(given)}: {reason}); give a file, or text with line breaks"
        raise QasmError(message, path=str(path), line=1, column=1) from None
    return text, str(path.parent), str(path)


def _named(error: QasmError, path: str) -> QasmError:
    """Put the circuit's file into an error of the core, which knows included files only."""
    if error.path:
        return error
    message = str(error)
    if path:
        message = path + message.removeprefix("circuit")
    return QasmError(message, path=path, line=error.line, column=error.column)


def _range(argument: str, given: Range | None) -> tuple[bool, int, int] | None:
    """Return whether lines are meant, and the ends."""
    if given is None:
        return None
    if isinstance(given, str):
        lines = re.fullmatch(r"\s*lines?\s+(\d{1,9})\s*(?:-\s*(\d{1,9})\s*)?", given)
        if lines is not None:
            first = int(lines[1])
            last = int(lines[2] or first)
            if 1 <= first <= last:
                return True, first, last
        gates = re.fullmatch(r"\s*(\d{1,15})\s*:\s*(\d{1,15})\s*", given)
        pair: object = (int(gates[1]), int(gates[2])) if gates is not None else None
    else:
        pair = given
    if isinstance(pair, Sequence) and len(pair) == 2 and all(type(end) is int for end in pair):
        start, stop = pair
        if 0 <= start <= stop < 1 << 63:
            return False, start, stop
    raise ArgumentError(
        f'{argument}: no range of gates ({given!r}); give (0, 120), "0:120" or "lines 4-9"',
        argument=argument,
        value=given,
    )


def _require_known(reading: Mapping[str, object]) -> None:
    known = list(Reading.__annotations__)
    for name, value in reading.items():
        if name not in known:
            near = difflib.get_close_matches(name, known, n=1, cutoff=0.5)
            hint = f"did you mean {near[0]!r}?" if near else f"known: {', '.join(known)}"
            raise ArgumentError(f"{name}: unknown option ({value!r}); {hint}", argument=name, value=value)


def _names(given: Sequence[str] | None) -> list[str]:
    if given is None:
        return list(NATIVE_GATES)
    if isinstance(given, str) or not all(isinstance(name, str) and name.isidentifier() for name in given):
        raise ArgumentError(
            f'native_gates: no names of gates ({given!r}); give for instance ["rzz", "rxx"]',
            argument="native_gates",
            value=given,
        )
    return list(given)


def _limit(given: int | None) -> int | None:
    if given is None:
        return None
    if type(given) is not int or not 1 <= given < 1 << 63:
        raise ArgumentError(
            f"expansion_limit: no number of gates ({given!r}); give 1 or more", argument="expansion_limit", value=given
        )
    return given


def _width(given: int | None) -> int | None:
    if given is None:
        return None
    if type(given) is not int or not 1 <= given <= 128:
        raise ArgumentError(f"qubits: not a whole number from 1 to 128 ({given!r})", argument="qubits", value=given)
    return given


def _on_qubits(part: Rotations, qubits: int) -> Rotations:
    """Put a circuit on more qubits, or on fewer where the others are idle."""
    if qubits >= part.qubits:
        return Rotations._wrap(part._circuit.widened(qubits))
    narrow = part._circuit.narrowed(qubits)
    if narrow is None:
        raise ArgumentError(
            f"qubits: {qubits} asked, and the circuit on {part.qubits} qubits uses others too; "
            "give its own number, or the layout (start_layout) of the qubits that it uses",
            argument="qubits",
            value=qubits,
        )
    return Rotations._wrap(narrow)
