"""FCIDUMP files: published cases, spellings, unrestricted integrals, refusals with their line."""

from __future__ import annotations

import json
import time
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import fermions
import oracle
import trueturn as tt
from trueturn.chemistry import ENCODINGS, read_integrals

FOLDER = Path(__file__).parent / "published"
HYDROGEN = FOLDER / "h2_sto3g.fcidump"
CASES = json.loads((FOLDER / "fcidump_cases" / "cases.json").read_text(encoding="utf-8"))


@pytest.fixture(scope="module")
def hydrogen(published):
    return published("exact.json")["h2"]


def test_hydrogen_has_the_published_terms(hydrogen):
    """J. D. Whitfield, J. Biamonte, A. Aspuru-Guzik, Mol. Phys. 109, 735 (2011); source and status in exact.md, section 4."""
    expected = tt.Operator.gather([(value, term) for value, term in hydrogen["pauli_terms"]], qubits=4)
    found = tt.read_fcidump(HYDROGEN)
    assert len(found) == hydrogen["n_terms"]
    # Sums of at most ten integrals below 1.3: rounding below 1e-14; the published digits end at 1e-10.
    assert found.near(expected, 1e-10)


@pytest.mark.parametrize("encoding", ENCODINGS)
def test_hydrogen_has_the_published_spectrum_in_every_encoding(hydrogen, encoding):
    for order in ("interleaved", "blocked"):
        levels = np.linalg.eigvalsh(oracle.dense(tt.read_fcidump(HYDROGEN, encoding, order=order)))
        assert levels == pytest.approx(hydrogen["spectrum"], abs=hydrogen["tol"])


@pytest.mark.parametrize("encoding", ["parity", "bravyi-kitaev"])
def test_hydrogen_on_two_qubits_has_the_published_ground_energy(hydrogen, encoding):
    small = tt.read_fcidump(HYDROGEN, encoding, drop_parity_qubits=True)
    assert small.qubits == 2 and len(small) == 5
    assert np.linalg.eigvalsh(oracle.dense(small))[0] == pytest.approx(hydrogen["ground_energy"], abs=hydrogen["tol"])


def test_the_determinant_of_hydrogen_has_the_hartree_fock_energy(hydrogen):
    found = read_integrals(HYDROGEN)
    assert found.determinant() == "1100"  # qubits 0 and 1, as in exact.json
    state = tt.State.product(found.determinant())
    assert state.expectation(found.operator()) == pytest.approx(hydrogen["hartree_fock_energy"], abs=hydrogen["tol"])


@pytest.mark.parametrize("name", CASES["valid"])
def test_every_spelling_gives_the_same_operator(name):
    assert tt.read_fcidump(FOLDER / "fcidump_cases" / name) == tt.read_fcidump(HYDROGEN)


@pytest.mark.parametrize("case", CASES["malformed"], ids=lambda case: case["file"])
def test_published_mistakes_are_refused_at_their_line(case):
    with pytest.raises(tt.errors.IntegralsError) as refused:
        tt.read_fcidump(FOLDER / "fcidump_cases" / case["file"])
    assert refused.value.line == case["line"] and refused.value.path == case["file"]
    for word in [*case["message_must_mention"], f"line {case['line']}", case["file"]]:
        assert word in str(refused.value)


@pytest.mark.parametrize("n", [1, 2, 3])
def test_unrestricted_integrals_give_the_hamiltonian_of_fermion_matrices(n, tmp_path):
    drawn = fermions.random_integrals(n, seed=n, spins=2)
    path = fermions.write_fcidump(tmp_path / "u", *drawn, (1, 0), unrestricted=True)
    found = oracle.dense(tt.read_fcidump(path))
    # Dimension 64, entries below 100: rounding far below 1e-10.
    assert np.abs(found - fermions.hamiltonian(*drawn)).max() < 1e-10


@pytest.mark.parametrize("n", [1, 2, 3])
def test_numbered_spin_orbitals_give_the_hamiltonian_that_six_blocks_give(n, tmp_path):
    drawn = fermions.random_integrals(n, seed=n, spins=2)
    blocks = fermions.write_fcidump(tmp_path / "u", *drawn, (1, 0), unrestricted=True)
    numbered = fermions.write_spin_orbitals(tmp_path / "s", *drawn, (1, 0))
    found = read_integrals(numbered, spin_orbitals=True)
    assert found.electrons == (1, 0)
    assert found.operator() == tt.read_fcidump(blocks)
    with pytest.raises(tt.errors.IntegralsError, match="or say spin_orbitals=True if odd and even orbital numbers"):
        tt.read_fcidump(numbered)


HEADER = "&FCI NORB=2, NELEC=2, MS2=0 &END\n"
BODY = "0.5 1 1 1 1\n-1.0 1 1 0 0\n0.7 0 0 0 0\n"
PLAIN = HEADER + BODY


def written(tmp_path, text):
    path = tmp_path / "case.fcidump"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return path


@pytest.mark.parametrize(
    "text",
    [
        PLAIN.replace("\n", "\r\n"),
        PLAIN.replace("0.5 ", "5.d-1  "),
        PLAIN.replace("0.5 ", ".5Q+0 "),
        PLAIN.replace("0.5 ", "50.-002 "),
        PLAIN.replace("0.7 0", "\n\n  0.7 0"),
        PLAIN.rstrip("\n"),
        PLAIN.replace("&FCI", "$fci").replace("&END", "$end"),
        PLAIN.replace(" &END", "\n ORBSYM=2*1\n ISYM=1 NPROP(1)=1,1 IUHF=0 UHF=.FALSE.\n/"),
        PLAIN.replace(" &END", ", THR=1.0E-5, 'none' OCC=2.0,2*0.d0 &END"),
        PLAIN + "0.3 2 0 0 0\n",
        PLAIN.replace("-1.0 1 1 0 0\n", "-1.0 1 1 0 0\n-1.00000000000001 1 1 0 0\n"),
    ],
)
def test_common_spellings_are_read_alike(text, tmp_path):
    assert tt.read_fcidump(written(tmp_path, text)) == tt.read_fcidump(written(tmp_path, PLAIN))


@pytest.mark.parametrize(
    ("text", "line", "message"),
    [
        ("", 1, "no header"),
        ("0.5 1 1 1 1\n", 1, "no header"),
        ("&FCI NORB=2,\n NELEC=2\n", 2, "the file ends inside the header"),
        ("&FCI NORB=2, NORB=3 &END\n" + BODY, 1, "NORB is given twice"),
        ("&FCI NORB=0 &END\n" + BODY, 1, r"NORB is not above zero \(0\)"),
        ("&FCI NORB=1,2 &END\n" + BODY, 1, r"NORB is not one whole number of at most 9 digits \(1 2\)"),
        ("&FCI NORB=10000000000 &END\n" + BODY, 1, "NORB is not one whole number"),
        ("&FCI NORB=2,\nORBSYM=1,1,1\n&END\n" + BODY, 2, "ORBSYM has 3 entries for NORB = 2"),
        ("&FCI NORB=2,ORBSYM=a &END\n" + BODY, 1, r"no key or whole number of a header \(a\)"),
        ("&FCI NORB=2,\nNELEC=2,MS2=1 &END\n" + BODY, 2, "MS2 = 1 contradicts NELEC = 2"),
        ("&FCI NORB=2,NELEC=3,\nMS2=3 &END\n" + BODY, 2, "MS2 = 3 contradicts NELEC = 3 in 2 orbitals"),
        ("&FCI NORB=2 &END 0.5 1 1 1 1\n" + BODY, 1, "text after the end of the header"),
        (HEADER + "0.5 1 1 1 1\n", 2, "the file ends without the constant, so it may be cut off"),
        (HEADER + "0.5 0 0 0 0\n", 2, "the file holds no integrals"),
        (HEADER, 1, "the file ends without the constant"),
        (PLAIN + "0.8 0 0 0 0\n", 5, "a second constant, 0.8 after 0.7"),
        (PLAIN[:-3], 4, "has 4 columns, not 5"),
        (HEADER + "1e999 1 1 1 1\n", 2, "1e999 is no finite number"),
        (HEADER + "(0.5,0.1) 1 1 1 1\n", 2, "complex integrals are not read"),
        (HEADER + "0.5 1 1 -1 1\n", 2, "-1 is no orbital index"),
        (HEADER + "0.5 1 1 1.0 1\n", 2, "1.0 is no orbital index"),
        (HEADER + "0.5 0 1 0 0\n", 2, "orbital indices 0 1 0 0 with a 0"),
        (HEADER + f"0.5 1 1 1 {'9' * 5000}\n", 2, "is above NORB = 2"),
        (HEADER + "0.5 " * 40_000 + "\n", 2, "longer than any line of an FCIDUMP file"),
        (HEADER.encode() + b"0.5 1 1 1 \xff\n", 2, "is no orbital index"),
        (
            "&FCI NORB=2,\nUHF=.T. &END\n" + BODY,
            2,
            "UHF is set, .* line 4 gives a one-electron integral in block 1 of 6",
        ),
        ("&FCI NORB=2,IUHF=1 &END\n0.5 1 1 1 1\n0.0 0 0 0 0\n", 1, "the file ends in block 2 of 6"),
        ("&FCI NORB=2,IUHF=1 &END\n0.5 1 1 1 1\n0.3 0 0 0 0\n", 1, "line 3 gives the constant in block 1 of 6"),
    ],
)
def test_mistakes_are_refused_at_their_line(text, line, message, tmp_path):
    with pytest.raises(tt.errors.IntegralsError, match=message) as refused:
        tt.read_fcidump(written(tmp_path, text))
    assert refused.value.line == line and refused.value.path == "case.fcidump" and len(str(refused.value)) < 400


@pytest.mark.parametrize(
    ("text", "line", "message"),
    [
        (HEADER + "0.5 1 2 1 1\n0.0 0 0 0 0\n", 2, "pairs spin orbitals of different spins"),
        (HEADER + "0.5 1 2 0 0\n0.0 0 0 0 0\n", 2, "pairs spin orbitals of different spins"),
        (PLAIN.replace("NORB=2", "NORB=3"), 1, r"NORB is odd \(3\), but spin orbitals come in pairs"),
        (PLAIN.replace("NELEC=2", "NELEC=4"), 1, "NELEC = 4 does not fit: NORB = 2 orbitals hold 0 to 2"),
    ],
)
def test_mistakes_in_numbered_spin_orbitals_are_refused_at_their_line(text, line, message, tmp_path):
    with pytest.raises(tt.errors.IntegralsError, match=message) as refused:
        tt.read_fcidump(written(tmp_path, text), spin_orbitals=True)
    assert refused.value.line == line


def test_a_huge_number_of_orbitals_is_refused_at_once_and_before_memory_is_taken(tmp_path):
    began = time.perf_counter()
    with pytest.raises(tt.errors.MemoryRefusedError, match="read_fcidump: does not fit in memory"):
        tt.read_fcidump(written(tmp_path, PLAIN.replace("NORB=2", "NORB=100000000")))
    assert time.perf_counter() - began < 1.0


def test_more_than_64_orbitals_need_a_window(tmp_path):
    path = written(tmp_path, PLAIN.replace("NORB=2", "NORB=65"))
    with pytest.raises(tt.errors.ArgumentError, match="window: 65 orbitals need more than 128 qubits"):
        tt.read_fcidump(path)
    assert tt.read_fcidump(path, window=2) == tt.read_fcidump(written(tmp_path, PLAIN))


def test_numbers_of_electrons_are_needed_only_to_drop_qubits(tmp_path):
    path = written(tmp_path, PLAIN.replace("NELEC=2, MS2=0", ""))
    assert tt.read_fcidump(path) == tt.read_fcidump(written(tmp_path, PLAIN))
    path = written(tmp_path, PLAIN.replace("NELEC=2, MS2=0", "NELEC=1"))
    with pytest.raises(tt.errors.ArgumentError, match=r"drop_parity_qubits: the numbers of electrons are not known"):
        tt.read_fcidump(path, "parity", drop_parity_qubits=True)
    assert tt.read_fcidump(path, "parity", drop_parity_qubits=True, electrons=(1, 0)).qubits == 2
    with pytest.raises(tt.errors.ArgumentError, match=r"electrons: no numbers of spin up and down that fit into 2 orb"):
        tt.read_fcidump(path, electrons=(3, 0))


def test_a_file_that_cannot_be_read_is_named(tmp_path):
    with pytest.raises(
        tt.errors.IntegralsError, match=r"^path: cannot be read \(.*none.fcidump: No such file or directory\); give"
    ):
        tt.read_fcidump(tmp_path / "none.fcidump")
    with pytest.raises(tt.errors.ArgumentError, match=r"^path: no path \(None\); give an FCIDUMP file"):
        tt.read_fcidump(None)


@given(data=st.data())
def test_a_mangled_file_is_read_or_refused_and_never_breaks(data, tmp_path_factory):
    text = HYDROGEN.read_text()
    for _ in range(data.draw(st.integers(1, 3))):
        place = data.draw(st.integers(0, len(text)))
        cut = data.draw(st.integers(0, 4))
        text = text[:place] + data.draw(st.text("0123456789.-+eD&/=,N \n\t(é", max_size=4)) + text[place + cut :]
    path = tmp_path_factory.getbasetemp() / "mangled.fcidump"
    path.write_text(text, encoding="utf-8")
    try:
        found = tt.read_fcidump(path)
    except (tt.errors.IntegralsError, tt.errors.MemoryRefusedError, tt.errors.ArgumentError) as refusal:
        assert str(refusal)
    else:
        assert np.isfinite(found.coefficients).all()
