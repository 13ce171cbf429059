"""Reference folders: written, read without trueturn, verified; damage is found and named; a full disk costs nothing."""

from __future__ import annotations

import csv
import hashlib
import json
import os
import shutil
import subprocess
import sys
import tracemalloc
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

import oracle
import trueturn as tt
from trueturn.cli import run
from trueturn.errors import ArgumentError
from trueturn.reference.folder import SEAL, seal
from trueturn.reference.verification import Check, Verification, verify

ROOT = Path(__file__).parent.parent
CHAIN = tt.model.ising(tt.lattice.chain(5), zz=-1.0, x=-0.7, z=0.2) + 2.5
START = tt.State.product("0+1-0")
WATCHED = {"m": tt.Operator("Z_2 + 3.0", qubits=5), 'odd, "name"': tt.Operator("X_1 Y_2", qubits=5)}
TIMES = [0.0, 1.5, 0.5]


def made(folder, keep="all", into=True):
    options = {"observables": WATCHED, "keep": keep}
    if into:
        return tt.reference(CHAIN, START, TIMES, into=folder, title="a test", start="0+1-0", **options)
    found = tt.reference(CHAIN, START, TIMES, **options)
    found.write(folder, title="a test", start="0+1-0")
    return found


@pytest.fixture(scope="module")
def pristine(tmp_path_factory):
    folder = tmp_path_factory.mktemp("reference") / "folder"
    made(folder)
    return folder


@pytest.fixture
def folder(pristine, tmp_path):
    return shutil.copytree(pristine, tmp_path / "folder")


def contents(folder):
    return {path.name: path.read_bytes() for path in folder.iterdir()}


def reseal(folder, change):
    """Alter the manifest and seal it again, as who forges a folder would."""
    manifest = json.loads((folder / "manifest.json").read_text(encoding="utf-8"))
    del manifest[SEAL]
    change(manifest)
    (folder / "manifest.json").write_text(seal(manifest), encoding="utf-8")


def replace_state(folder, name, amplitudes):
    """Put other amplitudes into a folder, digests and all."""
    np.save(folder / name, amplitudes)
    data = (folder / name).read_bytes()

    def change(manifest):
        manifest["files"][name] = {"bytes": len(data), "sha256": hashlib.sha256(data).hexdigest()}

    reseal(folder, change)


@pytest.mark.parametrize("into", [True, False], ids=["on the way", "afterwards"])
@pytest.mark.parametrize("keep", ["all", "last"])
def test_a_folder_holds_the_states_and_verifies(keep, into, tmp_path):
    found = made(tmp_path / "a", keep, into)
    names = {"all": ["state_0.npy", "state_1.npy", "state_2.npy"], "last": ["state_1.npy"]}[keep]
    assert sorted(contents(tmp_path / "a")) == ["expectations.csv", "manifest.json", *names]
    for name in names:
        time = TIMES[int(name[6])]
        held = np.load(tmp_path / "a" / name)
        # The reference is certified to 1e-10; a dense exponential of dimension 32 is good to 1e-13.
        assert np.linalg.norm(held - oracle.evolution(CHAIN, time) @ START.amplitudes) < 1.01e-10
    verified = tt.verify(tmp_path / "a")
    assert verified.holds and not verified.failures, verified
    assert sum("energy" in check.name for check in verified.checks) == len(names)
    assert found.states[-1].qubits == 5


def test_writing_on_the_way_and_afterwards_gives_the_same_bytes(tmp_path):
    made(tmp_path / "a")
    made(tmp_path / "b", into=False)
    assert contents(tmp_path / "a") == contents(tmp_path / "b")


def test_states_that_go_to_disk_are_not_kept(tmp_path):
    found = made(tmp_path / "a")
    assert len(found.states) == 1 and found.states[0].distance(tt.State.load(tmp_path / "a" / "state_1.npy")) == 0.0


def test_three_lines_of_numpy_read_a_folder_without_trueturn(pristine):
    """The lines are those that docs/references.md shows, run where trueturn cannot be imported."""
    (code,) = [
        block.split("```")[0]
        for block in (ROOT / "docs" / "references.md").read_text(encoding="utf-8").split("```python\n")[1:]
        if "np.load" in block
    ]
    lines = [line for line in code.splitlines() if line and not line.startswith("import ")]
    assert len(lines) == 3
    check = (
        "import sys; sys.modules['trueturn'] = None\n" + code + "\n"
        "assert abs(np.linalg.norm(state) - 1) < 1e-9 and table.shape == (3, 6) and list(table[:, 0]) == [0.0, 1.5, 0.5]\n"
        "assert manifest['certificate']['proven']\n"
    )
    found = subprocess.run([sys.executable, "-c", check], cwd=pristine.parent, capture_output=True, text=True)
    assert found.returncode == 0, found.stderr


def test_the_table_is_plain_csv_with_full_precision(pristine):
    with (pristine / "expectations.csv").open(newline="") as file:
        rows = list(csv.reader(file))
    assert rows[0] == ["time", "state_error_bound", "m", "m_bound", 'odd, "name"', 'odd, "name"_bound']
    found = tt.reference(CHAIN, START, TIMES, observables=WATCHED)
    assert [float(row[2]) for row in rows[1:]] == found.expectations["m"].tolist()
    assert [float(row[5]) for row in rows[1:]] == found.expectation_bounds['odd, "name"'].tolist()


def test_the_manifest_states_inputs_from_which_the_same_folder_comes_again(pristine, tmp_path):
    inputs = json.loads((pristine / "manifest.json").read_text(encoding="utf-8"))["inputs"]

    def operator(lines):
        return tt.Operator("\n".join(lines), inputs["qubits"])

    watched = {name: operator(lines) for name, lines in inputs["observables"].items()}
    start = tt.State.product(inputs["start"]["words"])
    tt.reference(
        operator(inputs["hamiltonian"]),
        start,
        inputs["times"],
        inputs["tolerance"],
        watched,
        keep="all",
        into=tmp_path / "again",
        title="a test",
        start=inputs["start"]["words"],
    )
    assert contents(tmp_path / "again") == contents(pristine)


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_one_flipped_bit_anywhere_is_found_and_its_file_named(data, pristine, tmp_path_factory):
    folder = shutil.copytree(pristine, tmp_path_factory.mktemp("flip") / "folder")
    name = data.draw(st.sampled_from(sorted(contents(folder))))
    held = bytearray((folder / name).read_bytes())
    place, bit = data.draw(st.integers(0, len(held) - 1)), data.draw(st.integers(0, 7))
    held[place] ^= 1 << bit
    (folder / name).write_bytes(held)
    found = tt.verify(folder)
    assert not found.holds
    assert [check.name for check in found.failures] == [name]
    assert name in repr(found) and "NOT verified" in repr(found)


@pytest.mark.parametrize("name", ["state_0.npy", "expectations.csv"])
def test_a_missing_a_short_and_an_unlisted_file_are_named(name, folder):
    held = (folder / name).read_bytes()
    (folder / name).write_bytes(held[:-1])
    assert any(check.name == name and "bytes, not" in check.detail for check in tt.verify(folder).failures)
    (folder / name).unlink()
    assert any(check.name == name and check.detail == "is missing" for check in tt.verify(folder).failures)
    (folder / name).write_bytes(held)
    (folder / "extra.npy").write_bytes(held)
    assert [check.name for check in tt.verify(folder).failures] == ["extra.npy"]


def test_a_state_off_in_norm_or_energy_is_found_although_all_digests_fit(folder):
    held = np.load(folder / "state_1.npy")
    replace_state(folder, "state_1.npy", held * (1 + 1e-8))
    assert [check.name for check in tt.verify(folder).failures][:1] == ["state_1.npy: norm"]
    turned = tt.State.from_array(held.copy())
    turned.rotate("Z_2", 1e-3)
    replace_state(folder, "state_1.npy", turned.amplitudes)
    failures = [check.name for check in tt.verify(folder).failures]
    assert "state_1.npy: energy" in failures and "state_1.npy: norm" not in failures


def test_a_state_of_another_energy_shell_is_told_by_its_expectations(folder):
    """Exact evolution to another time conserves norm and energy; only the table gives it away."""
    other = tt.reference(CHAIN, START, 1.6).states[0]
    replace_state(folder, "state_1.npy", other.amplitudes)
    (failure,) = tt.verify(folder).failures
    assert failure.name == "state_1.npy: expectations" and "in expectations.csv" in failure.detail


def forged(key, value):
    def change(manifest):
        *path, last = key
        for step in path:
            manifest = manifest[step]
        manifest[last] = value

    return change


@pytest.mark.parametrize(
    ("change", "name", "detail"),
    [
        (forged(["schema"], 2), "manifest.json", "has schema 2; this version reads 1"),
        (forged(["kind"], "web app"), "manifest.json", "is not of the kind"),
        (forged(["certificate", "error_bound"], [0.0, 1e-12, 1e-12]), "certificate", "is not truncation plus rounding"),
        (forged(["inputs", "tolerance"], 1e-16), "certificate", "above 1e-16"),
        (forged(["inputs", "times"], [0.0, 1.5, "x"]), "schema", "times: no number"),
        (forged(["inputs", "tolerance"], 10**400), "schema", "tolerance: no number"),
        (forged(["inputs", "hamiltonian"], ["Z_9"]), "schema", "hamiltonian:"),
        (forged(["inputs", "hamiltonian"], 3), "schema", "hamiltonian: not a list of terms"),
        (forged(["inputs", "start"], None), "schema", "start: missing"),
        (forged(["states"], [{"time": 9.0, "file": "state_0.npy"}]), "schema", "a time that is not among those"),
        (forged(["states", 0, "file"], "state_7.npy"), "state_7.npy", "gives no SHA-256"),
        (forged(["files", "../state_0.npy"], {}), "schema", "is no plain file name"),
        (forged(["inputs", "observables"], {}), "schema", "has not the columns and lines"),
        (forged(["inputs", "start", "energy_without_identity"], 1.0), "state_0.npy: energy", "but at most"),
    ],
)
def test_a_manifest_that_is_sealed_but_wrong_is_told_what_is_wrong(change, name, detail, folder):
    reseal(folder, change)
    failures = {check.name: check.detail for check in tt.verify(folder).failures}
    assert detail in failures[name]


def test_what_is_no_reference_folder_is_refused(tmp_path):
    with pytest.raises(tt.errors.ArgumentError, match="folder: no such folder"):
        tt.verify(tmp_path / "none")
    with pytest.raises(tt.errors.ArgumentError, match=r"folder: holds no manifest\.json"):
        tt.verify(tmp_path)


def test_a_folder_is_replaced_and_what_is_none_is_not(folder, tmp_path):
    made(folder, "last")
    assert sorted(contents(folder)) == ["expectations.csv", "manifest.json", "state_1.npy"]
    (folder / "thesis.txt").write_text("mine")
    with pytest.raises(tt.errors.ArgumentError, match=r"folder: holds thesis\.txt, which is no part of a reference"):
        made(folder)
    (tmp_path / "other").mkdir()
    (tmp_path / "other" / "thesis.txt").write_text("mine")
    with pytest.raises(tt.errors.ArgumentError, match="exists and is not a reference folder"):
        made(tmp_path / "other")


@pytest.mark.parametrize("name", ["time", "two\nlines", "state_error_bound"])
def test_names_that_cannot_head_a_column_are_refused_before_anything_is_computed(name, tmp_path):
    with pytest.raises(tt.errors.ArgumentError, match="observables: a name that cannot head a column"):
        tt.reference(CHAIN, START, 1.0, observables={name: WATCHED["m"]}, into=tmp_path / "a")


def test_a_reference_put_together_by_hand_cannot_be_written(tmp_path):
    found = tt.reference(CHAIN, START, 1.0)
    bare = tt.Reference(found.times, found.states, {}, {}, found.certificate)
    with pytest.raises(tt.errors.ArgumentError, match="reference: does not know what it was computed from"):
        bare.write(tmp_path / "a")


def test_what_the_disk_has_no_room_for_is_refused_before_anything_is_computed(tmp_path, monkeypatch):
    monkeypatch.setattr(shutil, "disk_usage", lambda path: SimpleNamespace(free=1000))
    with pytest.raises(tt.errors.ArgumentError, match=r"the states do not fit on the disk \(1\.5 KiB of 1000 B free\)"):
        made(tmp_path / "a")


FILLING = """
import resource, sys
import trueturn as tt
size = int(sys.argv[2])
resource.setrlimit(resource.RLIMIT_FSIZE, (size, size))
h = tt.model.ising(tt.lattice.chain(10), zz=-1.0, x=-0.7)
try:
    tt.reference(h, tt.State.product("0" * 10), [0.5, 1.0], keep="all", into=sys.argv[1])
except OSError as error:
    print(type(error).__name__, error.errno)
    sys.exit(7)
"""


@pytest.mark.parametrize("limit", [100, 10_000], ids=["at once", "half-way through a state"])
def test_a_disk_that_fills_leaves_the_old_folder_as_it_was(limit, folder):
    """A file of a 10-qubit state has 16512 bytes; the limit on file size fails the write as a full disk does."""
    before = contents(folder)
    found = subprocess.run(
        [sys.executable, "-c", FILLING, str(folder), str(limit)],
        capture_output=True,
        text=True,
        env={**os.environ, "PYTHONPATH": str(Path(tt.__file__).parent.parent)},
    )
    assert found.returncode == 7, found.stderr
    assert contents(folder) == before and tt.verify(folder).holds
    assert [path.name for path in folder.parent.iterdir()] == ["folder"]


def test_a_rename_that_fails_at_the_very_end_puts_the_old_folder_back(folder, monkeypatch):
    before = contents(folder)
    rename = Path.rename

    def failing(self, target):
        if self.name == "new":
            raise OSError("invented failure")
        return rename(self, target)

    monkeypatch.setattr(Path, "rename", failing)
    with pytest.raises(OSError, match="invented failure"):
        made(folder, "last")
    assert contents(folder) == before and [path.name for path in folder.parent.iterdir()] == ["folder"]


def test_an_interrupt_on_the_way_leaves_the_old_folder_as_it_was(folder):
    before = contents(folder)

    def stop(stage, done, total):
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        tt.reference(CHAIN, START, TIMES, keep="all", into=folder, progress=stop)
    assert contents(folder) == before and [path.name for path in folder.parent.iterdir()] == ["folder"]


def test_writing_a_state_takes_no_second_vector(tmp_path):
    """At 18 qubits a vector has 4 MiB. Pieces of 16 MiB are views of it, so writing takes the digest's room alone."""
    state = tt.State.random(18, 1)
    h = tt.Operator("0.1 Z_0", qubits=18)
    found = tt.reference(h, state, 1.0, observables={"z": tt.Operator("Z_0", qubits=18)})
    tracemalloc.start()
    found.write(tmp_path / "a")
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 2**20


def test_states_on_the_way_to_disk_are_not_held_in_memory(tmp_path):
    """Nine times at 16 qubits, 1 MiB a vector: kept in memory they take nine more vectors than on the way to disk."""
    h = tt.Operator("0.1 Z_0 + 0.2 X_3", qubits=16)
    start = tt.State.product("0" * 16)
    peaks = {}
    for into in (None, tmp_path / "a"):
        tracemalloc.start()
        tt.reference(h, start, [0.1 * k for k in range(1, 10)], keep="all", into=into)
        peaks[into] = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
    assert peaks[None] - peaks[tmp_path / "a"] > 7 * 2**20


RESIDENT = """
import resource, sys
import trueturn as tt
start = tt.State.product("0" * 22)
before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
start.save(sys.argv[1])
print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before)
"""


def test_saving_a_state_adds_next_to_nothing_to_the_resident_memory(tmp_path):
    """22 qubits are 64 MiB; the limit is a quarter of that."""
    path = str(tmp_path / "state.npy")
    env = {**os.environ, "PYTHONPATH": str(Path(tt.__file__).parent.parent)}
    found = subprocess.run([sys.executable, "-c", RESIDENT, path], capture_output=True, text=True, check=True, env=env)
    unit = 1 if sys.platform == "darwin" else 1024
    assert int(found.stdout) * unit < 16 << 20


JOB = """
[system]
model = "ising"
lattice = "chain"
sites = 4
zz = -1.0
x = -0.7
[start]
product = "0+1-"
[target]
times = [0.5, 1.0]
tolerance = 1e-3
observables = { m = "Z_2" }
"""


def test_a_verification_is_as_true_as_it_holds(tmp_path):
    good = Verification(tmp_path, (Check("schema", True, ""),))
    bad = Verification(tmp_path, (Check("schema", True, ""), Check("norm", False, "")))
    assert good and good.holds
    assert not bad and not bad.holds
    with pytest.raises(ArgumentError, match=r"^folder: no path \(None\); give one that"):
        verify(None)


def test_the_command_line_writes_and_verifies(tmp_path, capsys):
    (tmp_path / "job.toml").write_text(JOB)
    where = tmp_path / "out"
    assert run(["reference", str(tmp_path / "job.toml"), "--into", str(where)]) == 0
    assert f"Folder: {where}" in capsys.readouterr().out
    assert sorted(contents(where)) == ["expectations.csv", "manifest.json", "state_0.npy", "state_1.npy"]
    manifest = json.loads((where / "manifest.json").read_text(encoding="utf-8"))
    assert manifest["title"] == "job" and manifest["inputs"]["start"]["words"] == "product state 0+1-, qubit 0 first"
    assert run(["verify", str(where)]) == 0
    assert f"{where}: verified" in capsys.readouterr().out
    assert run(["reference", str(tmp_path / "job.toml"), "--into", str(where), "--states", "last"]) == 0
    held = bytearray((where / "state_1.npy").read_bytes())
    held[200] ^= 4
    (where / "state_1.npy").write_bytes(held)
    capsys.readouterr()
    assert run(["verify", str(where), "--json"]) == 1
    document = json.loads(capsys.readouterr().out)
    assert not document["holds"] and [c["name"] for c in document["checks"] if not c["holds"]] == ["state_1.npy"]
    assert run(["verify", str(tmp_path)]) == 2
    assert "holds no manifest.json" in capsys.readouterr().err


@pytest.mark.parametrize("method", ["chebyshev", "krylov", "dense"])
@pytest.mark.parametrize("times", [[-0.5, -1.0], [0.7, 0.7], [0.0]], ids=["backwards", "repeated", "start alone"])
@pytest.mark.parametrize("dtype", [np.complex128, np.complex64])
def test_folders_of_every_method_times_and_precision_verify(method, times, dtype, tmp_path):
    start = tt.State.product("0+1-0", dtype=dtype)
    found = tt.reference(CHAIN, start, times, 1e-9, WATCHED, method, "all", into=tmp_path / "a")
    verified = tt.verify(tmp_path / "a")
    assert verified.holds, verified
    assert len(found.states) == 1
    written = {path.name for path in (tmp_path / "a").glob("state_*.npy")}
    assert len(written) == len(set(times))
