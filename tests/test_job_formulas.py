"""Job files whose candidates take formulas of the user's own from a file, and jobs beyond all limits."""

from __future__ import annotations

from pathlib import Path

import pytest

from test_job import GOOD
from trueturn.audit.job import Job, read_job
from trueturn.errors import JobError

MINE = """
[[formula]]
name = "mine"
weights = ["0.25", "0.75"]

[[formula]]
name = "other"
a = ["0.5", "0.5"]
b = ["1"]
"""
OWN = ('formula = "strang"', 'formula = "mine"\nformula_file = "own/mine.toml"')


@pytest.fixture
def mine(tmp_path: Path):
    (tmp_path / "own").mkdir()
    path = tmp_path / "own" / "mine.toml"
    path.write_text(MINE, encoding="utf-8")
    return path


@pytest.fixture
def read(tmp_path: Path):
    def read(old: str, new: str) -> Job:
        assert old in GOOD
        path = tmp_path / "job.toml"
        path.write_text(GOOD.replace(old, new), encoding="utf-8")
        return read_job(path)

    return read


def test_a_candidate_takes_a_formula_from_a_file_beside_the_job(read, mine, monkeypatch, tmp_path) -> None:
    (tmp_path / "elsewhere").mkdir()
    monkeypatch.chdir(tmp_path / "elsewhere")  # the path is taken from the folder of the job
    job = read(*OWN)
    (candidate,) = job.candidates
    assert (candidate.formula.name, candidate.formula.order, candidate.steps) == ("mine", 2, 4)
    assert [stage.weight for stage in candidate.formula.stages] == [0.125, 0.125, 0.375, 0.375]
    assert job.audit().rows[0].candidate == candidate


@pytest.mark.parametrize(
    ("old", "new", "key", "message"),
    [
        ('"mine"', '"othr"', "formula", r"formula: not in own/mine.toml \('othr'\); did you mean other\?"),
        ('"mine"', '"strang"', "formula", r"formula: not in own/mine.toml \('strang'\); known: mine, other"),
        ('"own/mine.toml"', "3", "formula_file", r"formula_file: not a text but a whole number \(3\)"),
        (
            '"own/mine.toml"',
            '"no.toml"',
            "formula_file",
            r"formula_file: no.toml: formula file: cannot be read \(No such",
        ),
    ],
)
def test_a_formula_file_that_does_not_serve_is_refused(read, mine, old, new, key, message) -> None:
    with pytest.raises(JobError, match=rf"^candidate\[1\]\.{message}") as caught:
        read(OWN[0], OWN[1].replace(old, new))
    assert caught.value.key == f"candidate[1].{key}"


def test_a_mistake_in_a_formula_file_is_told_with_both_keys(read, mine) -> None:
    mine.write_text(MINE.replace('"0.75"', '"0.7"'), encoding="utf-8")
    message = r"^candidate\[1\]\.formula_file: own/mine.toml: formula\[1\]\.weights: do not sum to 1 \(0.95\); divide"
    with pytest.raises(JobError, match=message) as caught:
        read(*OWN)
    assert isinstance(caught.value.__cause__, JobError) and caught.value.__cause__.path == str(mine)


@pytest.mark.parametrize("value", ["1" * 5000, "[" * 20000], ids=["digits", "nested"])
def test_a_job_beyond_all_limits_is_refused(read, value) -> None:
    with pytest.raises(JobError, match=r"^job file: cannot be read \(.*\); write shorter numbers and fewer nested"):
        read("steps = 4", f"steps = {value}")
