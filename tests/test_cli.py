"""The command line: answers on stdout, complaints on stderr, and the exit status."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from importlib import import_module
from pathlib import Path

import pytest
from click.testing import CliRunner

from sample_audit import sample_audit
from trueturn import cli
from trueturn.audit.job import Job, read_job, template
from trueturn.audit.report import FILES
from trueturn.errors import InternalError, MemoryRefusedError

SMALL = """
[system]
model = "ising"
lattice = "chain"
sites = 4
zz = -1.0
x = 0.7
[start]
pattern = "0"
[target]
times = [0.5, 1.0]
tolerance = {tolerance}
[target.observables]
edge = "Z_0"
bulk = "Z_1 Z_2"
[[candidate]]
formula = "strang"
steps = {steps}
"""


@pytest.fixture
def job(tmp_path: Path) -> Path:
    path = tmp_path / "small.toml"
    path.write_text(SMALL.format(tolerance=0.01, steps=10), encoding="utf-8")
    return path


@pytest.fixture
def canned(monkeypatch: pytest.MonkeyPatch):
    """Answer every audit with the sample, so that only the command line is tested."""

    def answer(result=None, **changes) -> None:
        def audit(self, threads=None, progress=None):
            if isinstance(result, BaseException):
                raise result
            return sample_audit(**changes)

        monkeypatch.setattr(Job, "audit", audit)

    answer()
    return answer


def process(*arguments: str, cwd: Path, **environment: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "trueturn.cli", *arguments],
        cwd=cwd,
        env={**os.environ, **environment},
        capture_output=True,
        text=True,
        encoding="utf-8",
        timeout=120,
    )


@pytest.mark.parametrize(("verdict", "status"), [("meets", 0), ("misses", 1), ("undecided", 4)])
def test_the_verdict_is_the_exit_status(canned, job: Path, verdict: str, status: int) -> None:
    canned(verdict=verdict)
    assert cli.run(["audit", str(job)]) == status


def test_audit_prints_the_table_and_how_to_get_the_report(canned, job: Path, capsys) -> None:
    assert cli.run(["audit", str(job)]) == 0
    out, err = capsys.readouterr()
    assert "✓ MEETS" in out and "Recommended: strang, commuting with 14 steps" in out
    assert out.endswith("For the report with pictures, add: --into FOLDER\n")
    assert err == "" and "\x1b" not in out


def test_audit_without_a_job_runs_the_built_in_one(canned, capsys) -> None:
    assert cli.run(["audit"]) == 0
    assert "MEETS" in capsys.readouterr().out


@pytest.mark.parametrize("width", [80, 120])
def test_the_table_keeps_to_the_width_of_the_terminal(canned, job: Path, capsys, monkeypatch, width: int) -> None:
    monkeypatch.setenv("COLUMNS", str(width))
    cli.run(["audit", str(job)])
    assert max(map(len, capsys.readouterr().out.splitlines())) <= width


def test_json_is_one_object_and_nothing_else(canned, job: Path, capsys) -> None:
    assert cli.run(["audit", str(job), "--json"]) == 0
    out, err = capsys.readouterr()
    assert json.loads(out)["kind"] == "trueturn audit"
    assert err == ""


def test_into_writes_the_folder_and_says_where(canned, job: Path, tmp_path: Path, capsys) -> None:
    folder = tmp_path / "found"
    assert cli.run(["audit", str(job), "--into", str(folder)]) == 0
    assert sorted(path.name for path in folder.iterdir()) == sorted(FILES)
    assert f"Report: {folder / 'report.html'}" in capsys.readouterr().out


def test_the_folder_of_the_job_is_used(canned, job: Path, capsys) -> None:
    job.write_text(job.read_text() + '[output]\nfolder = "here"\n')
    assert cli.run(["audit", str(job), "--json"]) == 0
    assert (job.parent / "here" / "report.html").is_file()
    json.loads(capsys.readouterr().out)


def test_a_folder_that_is_refused_is_refused_before_the_run(canned, job: Path, tmp_path: Path, capsys) -> None:
    canned(AssertionError("must not run"))
    (tmp_path / "thesis.tex").write_text("precious")
    assert cli.run(["audit", str(job), "--into", str(tmp_path)]) == 2
    assert "trueturn: folder: exists and is not an audit folder" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("[system\n", "small.toml: job file: not valid TOML at line 1"),
        (SMALL.format(tolerance=-1, steps=4), "small.toml: target.tolerance: not above zero (-1.0); write"),
        (SMALL.format(tolerance=1, steps='"lest"'), "candidate[1].steps: neither a number nor least"),
    ],
)
def test_bad_input_is_one_line_and_status_2(canned, job: Path, capsys, text: str, message: str) -> None:
    job.write_text(text)
    assert cli.run(["audit", str(job)]) == 2
    out, err = capsys.readouterr()
    assert out == "" and err.startswith("trueturn: ") and message in err and err.count("\n") == 1


def test_bad_input_with_json_is_an_object_too(job: Path, capsys) -> None:
    assert cli.run(["audit", str(job.parent / "gone.toml"), "--json"]) == 2
    out, err = capsys.readouterr()
    document = json.loads(out)
    assert document["kind"] == "trueturn error" and document["class"] == "JobError" and document["status"] == 2
    assert document["message"] in err


def test_refused_memory_is_status_3(canned, job: Path, capsys) -> None:
    refused = MemoryRefusedError("audit: does not fit in memory (9 TiB); at most 29 qubits fit", needed=1)
    canned(refused)
    assert cli.run(["audit", str(job)]) == 3
    assert "at most 29 qubits fit" in capsys.readouterr().err
    canned(MemoryError())
    assert cli.run(["audit", str(job)]) == 3


def test_an_interrupt_is_status_130(canned, job: Path, capsys) -> None:
    canned(KeyboardInterrupt())
    assert cli.run(["audit", str(job)]) == 130
    assert "trueturn: interrupted" in capsys.readouterr().err


@pytest.mark.parametrize("error", [ZeroDivisionError("by\nzero"), InternalError("lost a pass")])
def test_a_bug_asks_for_a_report_without_a_traceback(canned, job: Path, capsys, error: Exception, monkeypatch) -> None:
    canned(error)
    monkeypatch.delenv("TRUETURN_DEBUG", raising=False)
    assert cli.run(["audit", str(job)]) == 70
    err = capsys.readouterr().err
    assert err.count("\n") == 1 and "please report it" in err and "Traceback" not in err
    monkeypatch.setenv("TRUETURN_DEBUG", "1")
    assert cli.run(["audit", str(job)]) == 70
    assert "Traceback" in capsys.readouterr().err


def test_a_disk_that_is_full_is_one_line_after_the_table(
    canned, job: Path, tmp_path: Path, capsys, monkeypatch
) -> None:
    def fail(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(import_module("trueturn.audit.report"), "json_text", fail)
    assert cli.run(["audit", str(job), "--into", str(tmp_path / "new")]) == 2
    out, err = capsys.readouterr()
    assert "MEETS" in out and "No space left on device" in err and err.count("\n") == 1


@pytest.mark.parametrize(
    "arguments", [["adit"], ["audit", "--jsn"], ["audit", "a", "b"], ["audit", "--threads", "0"], []]
)
def test_unknown_commands_and_options_are_status_2_with_help(arguments: list[str], capsys) -> None:
    assert cli.run(arguments) == 2
    out, err = capsys.readouterr()
    assert "Usage: trueturn" in out + err


def test_help_and_version_are_status_0() -> None:
    for arguments, needed in (
        (["--help"], "4 undecided"),
        (["audit", "-h"], "--into"),
        (["--version"], "trueturn 0."),
    ):
        result = CliRunner().invoke(cli.commands, arguments, prog_name="trueturn")
        assert result.exit_code == 0 and needed in result.output


def test_init_writes_the_template_once(tmp_path: Path, capsys) -> None:
    path = tmp_path / "mine.toml"
    assert cli.run(["init", str(path)]) == 0
    assert path.read_text(encoding="utf-8") == template()
    assert read_job(path).operator.qubits == 18
    path.write_text("precious")
    assert cli.run(["init", str(path)]) == 2
    assert path.read_text() == "precious"
    assert "replace it with --force" in capsys.readouterr().err
    assert cli.run(["init", str(path), "--force"]) == 0
    assert path.read_text(encoding="utf-8") == template()
    assert cli.run(["init", str(tmp_path / "no" / "such" / "folder.toml")]) == 2


def test_formulas_lists_names_orders_and_sources(capsys) -> None:
    assert cli.run(["formulas"]) == 0
    out = capsys.readouterr().out
    assert "strang" in out and "suzuki-4" in out and "Sources" in out
    assert cli.run(["formulas", "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert {"name": "strang", "order": 2, "stages": 2} in [
        {key: entry[key] for key in ("name", "order", "stages")} for entry in document["formulas"]
    ]


def test_a_reader_that_goes_away_does_not_change_the_status(tmp_path: Path) -> None:
    command = f"{sys.executable} -m trueturn.cli formulas | true; exit ${{PIPESTATUS[0]}}"
    done = subprocess.run(["bash", "-c", command], capture_output=True, text=True, timeout=60, cwd=tmp_path)
    assert done.returncode == 0 and "Traceback" not in done.stderr


def test_help_does_not_import_the_heavy_modules() -> None:
    script = (
        "import sys; from trueturn import cli; cli.run(['--help']); "
        "heavy = {'matplotlib', 'rich.table', 'trueturn.audit.job'}; "
        "print(sorted(heavy & set(sys.modules)), file=sys.stderr)"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, timeout=60)
    assert done.stderr.strip() == "[]"


@pytest.mark.parametrize(
    ("tolerance", "steps", "status"),
    [(0.01, 40, 0), (1e-4, 4, 1), (0.01, '"least"', 0)],
    ids=["meets", "misses", "least"],
)
def test_a_real_audit_ends_with_its_status(job: Path, tolerance: float, steps: object, status: int) -> None:
    job.write_text(SMALL.format(tolerance=tolerance, steps=steps))
    done = process("audit", job.name, "--json", cwd=job.parent)
    assert done.stderr == ""
    assert done.returncode == status
    assert json.loads(done.stdout)["rows"][0]["verdict"] == ("misses" if status else "meets")


def test_a_real_audit_writes_a_report(job: Path) -> None:
    done = process("audit", job.name, "--into", "found", cwd=job.parent, COLUMNS="80")
    assert (done.returncode, done.stderr) == (0, "")
    assert sorted(path.name for path in (job.parent / "found").iterdir()) == sorted(FILES)


def test_a_real_reference_agrees_with_the_dense_answer(job: Path, capsys) -> None:
    import numpy as np
    from scipy.linalg import expm

    assert cli.run(["reference", str(job), "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    task = read_job(job)
    start = np.zeros(16, dtype=complex)
    start[0] = 1.0
    for index, time in enumerate(document["times"]):
        state = expm(-1j * time * task.operator.dense()) @ start
        for name, observable in task.observables.items():
            exact = np.vdot(state, observable.dense() @ state).real
            assert document["expectations"][name][index] == pytest.approx(exact, abs=1e-9)
    assert document["certificate"]["proven"] is True
    assert cli.run(["reference", str(job)]) == 0
    out = capsys.readouterr().out
    assert "edge" in out and "operator applications" in out
