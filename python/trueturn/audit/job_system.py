"""The `[system]` and `[start]` sections of a job file: the Hamiltonian and the state it starts from."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from trueturn import lattice, model
from trueturn.audit.job_table import Table, clip, kind_of
from trueturn.lattice import Lattice
from trueturn.operator import Operator
from trueturn.state import State

__all__ = ["Start", "read_start", "read_system"]

Site = str | tuple[float, float]

SIZES = {
    "chain": ("sites",),
    "ring": ("sites",),
    "complete": ("sites",),
    "ladder": ("rungs",),
    "square": ("rows", "columns"),
}
STRENGTHS = {
    "ising": (("zz", "x"), ("z",)),
    "exchange": (("xx", "yy", "zz"), ("x", "y", "z")),
    "heisenberg": (("coupling",), ("z",)),
    "hubbard": (("hopping", "repulsion"), ("potential",)),
}
ON_BONDS = ("zz", "xx", "yy", "coupling", "hopping")
FCIDUMP = ("encoding", "frozen", "window", "order", "drop_parity_qubits", "spin_orbitals")
WORDS = ("0", "1", "+", "-", "+i", "-i")


@dataclass(frozen=True)
class Start:
    """The start state as the job gives it; the amplitudes are made only when asked for.

    Attributes
    ----------
    sites : tuple or None
        One entry a qubit for a product state: ``0 1 + - +i -i`` or an angle pair (theta, phi).
    file : Path or None
        The .npy file otherwise.
    """

    sites: tuple[Site, ...] | None
    file: Path | None

    @property
    def words(self) -> str:
        """The start state in words."""
        if self.sites is None:
            return f"amplitudes from the file {self.file.name if self.file else ''}"
        if all(isinstance(site, str) and len(site) == 1 for site in self.sites):
            return "product state " + "".join(str(site) for site in self.sites) + ", qubit 0 first"
        shown = (site if isinstance(site, str) else f"({site[0]:g}, {site[1]:g})" for site in self.sites)
        return "product state " + " ".join(shown) + ", qubit 0 first"

    def state(self) -> State:
        """Make the state vector."""
        if self.sites is not None:
            return State.product(list(self.sites))
        assert self.file is not None
        return State.load(self.file)


def read_system(section: Table, folder: Path) -> Operator:
    """Read the Hamiltonian from `[system]`; a file is looked up from `folder`."""
    given = [key for key in ("terms", "file", "fcidump", "model") if key in section]
    if len(given) != 1:
        found = " and ".join(given) if given else "none"
        raise section.error(
            "", f"needs exactly one of terms, file, fcidump or model ({found} given)", "keep one of them"
        )
    if given == ["model"]:
        return read_model(section)
    if given == ["fcidump"]:
        return read_molecule(section, folder)
    foreign = {key: "goes with fcidump only" for key in FCIDUMP} | {
        key: "goes with a model only" for key in model_keys()
    }
    section.only(("terms", "file", "qubits"), foreign)
    qubits = section.whole("qubits", "qubits = 8") if "qubits" in section else None
    if given == ["terms"]:
        text = section.text("terms", 'terms = "-1.0 Z_0 Z_1 + 0.5 X_0"')
        with section.blame("terms"):
            return Operator(text, qubits=qubits)
    path = folder / section.text("file", 'file = "model.terms"')
    require_file(section, path)
    with section.blame("file"):
        operator = Operator.read(path)
    if qubits is None or qubits == operator.qubits:
        return operator
    with section.blame("qubits"):
        return Operator.from_masks(operator.x_masks, operator.z_masks, operator.coefficients, qubits)


def read_molecule(section: Table, folder: Path) -> Operator:
    """Read the Hamiltonian of a molecule from an FCIDUMP file."""
    from trueturn.chemistry import ENCODINGS, read_fcidump

    foreign = {key: "goes with a model only" for key in model_keys()}
    section.only(("fcidump", *FCIDUMP), foreign | {"qubits": "not used with fcidump, whose orbitals fix the qubits"})
    path = folder / section.text("fcidump", 'fcidump = "molecule.fcidump"')
    require_file(section, path, "fcidump")
    options: dict[str, Any] = {key: read_orbitals(section, key) for key in ("frozen", "window") if key in section}
    if "order" in section:
        options["order"] = section.choice("order", ("interleaved", "blocked"))
    encoding = section.choice("encoding", ENCODINGS, default="jordan-wigner")
    for key in ("drop_parity_qubits", "spin_orbitals"):
        options[key] = section.flag(key, False)
    with section.blame("", fallback="fcidump"):
        return read_fcidump(path, encoding, **options)


def read_orbitals(section: Table, key: str) -> int | list[int]:
    """Read orbitals: a count, or a list of numbers from 0."""
    example = f"{key} = 2, or a list of orbitals counted from 0"
    value = section.require(key, example)
    if not isinstance(value, list):
        return section.whole(key, example, least=0)
    if not all(type(orbital) is int for orbital in value):
        raise section.error(key, "not a list of whole numbers", f"write {example}", value)
    return value


def model_keys() -> tuple[str, ...]:
    """Every key of `[system]` that belongs to a model or a lattice."""
    keys = ["model", "lattice", "bonds", "periodic", "spin", "extra"]
    for group in (*SIZES.values(), *(part for both in STRENGTHS.values() for part in both)):
        keys += [key for key in group if key not in keys]
    return tuple(keys)


def read_model(section: Table) -> Operator:
    """Make the Hamiltonian of a named model on a named lattice."""
    name = section.choice("model", tuple(STRENGTHS))
    if ("lattice" in section) == ("bonds" in section):
        raise section.error("lattice", "needs exactly one of lattice or bonds", 'write lattice = "chain", sites = 8')
    kind = None if "bonds" in section else section.choice("lattice", tuple(SIZES))
    required, optional = STRENGTHS[name]
    known = ["model", "extra", "lattice", "bonds", *required, *optional]
    known += SIZES[kind] if kind else ()
    known += ["periodic"] if kind == "square" else []
    known += ["spin"] if name == "heisenberg" else []
    place = f"the lattice {kind}" if kind else "bonds"
    foreign = {key: f"not used by the model {name} on {place}" for key in model_keys()}
    foreign["qubits"] = "not used with a model, whose lattice fixes the qubits"
    section.only(known, foreign)

    graph = read_lattice(section, kind)
    strengths: dict[str, Any] = {}
    for key in (*required, *(key for key in optional if key in section)):
        strengths[key] = read_strength(section, key, graph, kind)
    if name == "heisenberg":
        strengths["spin"] = section.choice("spin", ("pauli", "half"), default="pauli")
    with section.blame(""):
        operator: Operator = getattr(model, name)(graph, **strengths)
    if "extra" in section:
        with section.blame("extra"):
            operator = operator + Operator(section.text("extra", 'extra = "0.1 X_0"'), qubits=operator.qubits)
    return operator


def read_lattice(section: Table, kind: str | None) -> Lattice:
    """Make the lattice that `lattice` with its sizes, or `bonds`, describes."""
    if kind is None:
        pairs = section.require("bonds", "bonds = [[0, 1], [1, 2]]")
        if not isinstance(pairs, list) or not pairs:
            raise section.error("bonds", "not a list of pairs", "write bonds = [[0, 1], [1, 2]]", pairs)
        for index, pair in enumerate(pairs):
            whole = isinstance(pair, list) and all(type(site) is int for site in pair)
            if not whole or len(pair) != 2:
                raise section.error(
                    "bonds",
                    f"entry {index} is not a pair of site numbers",
                    "write bonds = [[0, 1], [1, 2]]",
                    pair,
                )
        with section.blame("bonds"):
            return lattice.from_bonds([(first, second) for first, second in pairs])
    sizes = {key: section.whole(key, f"{key} = 6") for key in SIZES[kind]}
    with section.blame(SIZES[kind][0]):
        match kind:
            case "chain":
                return lattice.chain(sizes["sites"])
            case "ring":
                return lattice.ring(sizes["sites"])
            case "complete":
                return lattice.complete(sizes["sites"])
            case "ladder":
                return lattice.ladder(sizes["rungs"])
            case _:
                return lattice.square(**sizes, periodic=section.flag("periodic", False))


def read_strength(section: Table, key: str, graph: Lattice, kind: str | None) -> float | list[float]:
    """Read one strength: a number, a list, or on a ladder a table with legs and rungs."""
    example = f"{key} = 1.0, or a list with one number a " + ("bond" if key in ON_BONDS else "site")
    if not isinstance(section.require(key, example), dict):
        return section.strength(key, example)
    if kind != "ladder" or key not in ON_BONDS:
        raise section.error(key, "a table of strengths fits only the bonds of a ladder", f"write {example}")
    table = section.table(key)
    table.only(("legs", "rungs"))
    legs, rungs = (table.number(name, f"{name} = 1.0") for name in ("legs", "rungs"))
    return [rungs if abs(first - second) == 1 else legs for first, second in graph.bonds]


def read_start(section: Table, qubits: int, folder: Path) -> Start:
    """Read the start state from `[start]` for a Hamiltonian on `qubits` qubits."""
    section.only(("product", "pattern", "file"))
    given = list(section.values)
    if len(given) != 1:
        found = " and ".join(given) if given else "none"
        raise section.error(
            "",
            f"needs exactly one of product, pattern or file ({found} given)",
            'write for instance pattern = "01"',
        )
    key = given[0]
    if key == "file":
        path = folder / section.text("file", 'file = "state.npy"')
        require_file(section, path)
        require_amplitudes(section, path, qubits)
        return Start(sites=None, file=path)
    sites = read_sites(section, key)
    if key == "pattern":
        if len(sites) > qubits:
            raise section.error(key, f"longer than the {qubits} qubits of the system", "shorten it", len(sites))
        sites = [sites[qubit % len(sites)] for qubit in range(qubits)]
    if len(sites) != qubits:
        wrong = f"describes {len(sites)} qubits, but the system has {qubits}"
        raise section.error(key, wrong, "give one entry a qubit, or use pattern to repeat a short one")
    return Start(sites=tuple(sites), file=None)


def read_sites(section: Table, key: str) -> list[Site]:
    """Read the one-qubit states of a product: a text of characters, or a list of words and angle pairs."""
    value = section.values[key]
    example = f'write {key} = "01+-", or a list of 0 1 + - +i -i and [theta, phi]'
    if not isinstance(value, str | list):
        raise section.error(key, f"not a text or list but {kind_of(value)}", example, value)
    if not value:
        raise section.error(key, "empty", example)
    sites: list[Site] = []
    for index, entry in enumerate(value):
        if isinstance(entry, str) and entry in (WORDS[:4] if isinstance(value, str) else WORDS):
            sites.append(entry)
        elif isinstance(entry, list) and len(entry) == 2:
            theta, phi = (section.checked_number(key, angle, "angles in radians", index) for angle in entry)
            sites.append((theta, phi))
        else:
            raise section.error(key, f"entry {index} is no state of a qubit", example, entry)
    return sites


def require_file(section: Table, path: Path, key: str = "file") -> None:
    """Refuse a path that is no file, naming it as the job does."""
    if not path.is_file():
        wrong = "is a folder" if path.is_dir() else "no such file"
        raise section.error(key, wrong, "the path is taken from the job file's own folder", section.values[key])


def require_amplitudes(section: Table, path: Path, qubits: int) -> None:
    """Check type and length of an .npy file without reading its data."""
    try:
        array = np.load(path, mmap_mode="r", allow_pickle=False)
        shape, kind = array.shape, array.dtype
    except (ValueError, OSError, EOFError, AttributeError) as error:
        remedy = "write the amplitudes with State.save or numpy.save"
        raise section.error("file", "not a NumPy .npy file", remedy, clip(error)) from error
    if kind not in (np.dtype(np.complex128), np.dtype(np.complex64)):
        raise section.error("file", "not complex amplitudes", "save them as complex128 or complex64", kind)
    if shape != (1 << qubits,):
        wrong = f"holds an array of the wrong shape for {qubits} qubits"
        raise section.error("file", wrong, f"give {1 << qubits} amplitudes in one dimension", shape)
