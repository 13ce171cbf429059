"""Job files whose Hamiltonian is a molecule's."""

from __future__ import annotations

import re
import shutil
import tomllib
from pathlib import Path

import pytest

import trueturn as tt
from trueturn.audit.job import read_job
from trueturn.audit.job_system import FCIDUMP

HYDROGEN = Path(__file__).parent / "published" / "h2_sto3g.fcidump"
REST = """
[start]
product = "{start}"
[target]
times = [1.0, 5.0]
tolerance = 1e-3
[target.observables]
pair = "0.25 - 0.25 Z_2 - 0.25 Z_3 + 0.25 Z_2 Z_3"
[[candidate]]
formula = "strang"
steps = 20
"""


def job(tmp_path, system, rest=None):
    shutil.copy(HYDROGEN, tmp_path / "h2.fcidump")
    path = tmp_path / "job.toml"
    path.write_text(f"[system]\n{system}\n{rest or REST.format(start='1100')}", encoding="utf-8")
    return read_job(path)


def test_a_job_reads_the_molecule_and_its_reference_has_the_published_dynamics(tmp_path):
    """Closed form and values: exact.md, section 4, population of |0011> from the Hartree-Fock state."""
    task = job(tmp_path, 'fcidump = "h2.fcidump"')
    assert task.operator == tt.read_fcidump(HYDROGEN)
    found = task.reference().expectations["pair"]
    # Twelve digits are published; the reference is certified to 1e-10, so the value to 2e-10 times the norm 1.
    assert list(found) == pytest.approx([0.026298633197, 0.030908118761], abs=3e-10)


@pytest.mark.parametrize(
    ("system", "options"),
    [
        ('encoding = "parity"', {"encoding": "parity"}),
        ("spin_orbitals = false", {}),
        ('encoding = "bravyi-kitaev"\norder = "blocked"', {"encoding": "bravyi-kitaev", "order": "blocked"}),
    ],
)
def test_the_options_of_a_job_are_those_of_the_reader(system, options, tmp_path):
    found = job(tmp_path, f'fcidump = "h2.fcidump"\n{system}').operator
    assert found == tt.read_fcidump(HYDROGEN, **options)


def test_windows_and_dropped_qubits_in_a_job(tmp_path):
    rest = REST.format(start="01").replace('pair = "0.25 - 0.25 Z_2 - 0.25 Z_3 + 0.25 Z_2 Z_3"', 'z = "Z_0"')
    text = 'fcidump = "h2.fcidump"\nencoding = "parity"\ndrop_parity_qubits = true\nfrozen = 0\nwindow = [0, 1]'
    assert job(tmp_path, text, rest).operator == tt.read_fcidump(HYDROGEN, "parity", drop_parity_qubits=True)


def test_the_page_on_molecules_names_keys_that_exist():
    text = (Path(__file__).parent.parent / "docs" / "chemistry.md").read_text(encoding="utf-8")
    (block,) = re.findall(r"```toml\n(.*?)```", text, re.DOTALL)
    assert set(tomllib.loads(block)["system"]) <= {"fcidump", *FCIDUMP}


@pytest.mark.parametrize(
    ("system", "key", "message"),
    [
        ('fcidump = "none.fcidump"', "system.fcidump", "no such file"),
        ('fcidump = "bad.fcidump"', "system.fcidump", "line 2 of bad.fcidump: has 4 columns, not 5"),
        ('fcidump = "h2.fcidump"\nencoding = "parety"', "system.encoding", "did you mean parity"),
        ('fcidump = "h2.fcidump"\nfrozen = -1', "system.frozen", "below 0"),
        ('fcidump = "h2.fcidump"\nwindow = [0, 1.5]', "system.window", "not a list of whole numbers"),
        ('fcidump = "h2.fcidump"\nwindow = [7]', "system.window", "orbital out of range (7)"),
        ('fcidump = "h2.fcidump"\ndrop_parity_qubits = true', "system.drop_parity_qubits", "no single qubit holds"),
        ('fcidump = "h2.fcidump"\nqubits = 4', "system.qubits", "whose orbitals fix the qubits"),
        ('fcidump = "h2.fcidump"\nperiodic = true', "system.periodic", "goes with a model only"),
        ('terms = "Z_0"\nencoding = "parity"', "system.encoding", "goes with fcidump only"),
        ('fcidump = "h2.fcidump"\nterms = "Z_0"', "system", "needs exactly one of terms, file, fcidump or model"),
    ],
)
def test_mistakes_name_their_key(system, key, message, tmp_path):
    (tmp_path / "bad.fcidump").write_text("&FCI NORB=1 &END\n 1.0 1 1 1\n")
    with pytest.raises(tt.errors.JobError) as refused:
        job(tmp_path, system)
    assert refused.value.key == key and message in str(refused.value)
