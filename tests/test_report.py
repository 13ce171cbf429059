"""The report: what is written, how it is written, and what is refused."""

from __future__ import annotations

import csv
import json
import math
import re
from html.parser import HTMLParser
from importlib import import_module
from pathlib import Path
from xml.etree import ElementTree

import pytest

from sample_audit import TIMES, sample_audit
from trueturn.audit.figures import count, interval, nearest, plain, upper
from trueturn.audit.report import FILES, plain_table, require_replaceable, to_dict, write_folder
from trueturn.audit.report.document import COLUMNS, SCHEMA, json_text
from trueturn.audit.report.page import page
from trueturn.audit.report.pictures import MOST_OBSERVABLES, gates_picture, steps_picture, time_picture
from trueturn.errors import ArgumentError
from trueturn.operator import Operator

VOID = {"meta", "br", "hr", "img", "link", "input"}


class Outline(HTMLParser):
    """Check that every element is closed in order, and collect tags, ids and attributes."""

    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.tags: list[str] = []
        self.ids: list[str] = []
        self.references: list[str] = []
        self.text: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        if tag not in VOID:
            self.open.append(tag)
        self.note(attrs)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        self.note(attrs)

    def note(self, attrs: list[tuple[str, str | None]]) -> None:
        facts = dict(attrs)
        self.ids += [facts["id"] or ""] if "id" in facts else []
        self.references += [value or "" for key, value in attrs if key in ("href", "xlink:href", "src")]

    def handle_endtag(self, tag: str) -> None:
        assert self.open and self.open.pop() == tag, f"</{tag}> closes nothing"

    def handle_data(self, data: str) -> None:
        self.text.append(data)


@pytest.fixture(scope="module")
def outline() -> Outline:
    parser = Outline()
    parser.feed(page(sample_audit()))
    parser.close()
    return parser


def test_page_closes_every_element_and_repeats_no_id(outline: Outline) -> None:
    assert outline.open == []
    assert len(outline.ids) == len(set(outline.ids))


def test_page_needs_nothing_from_elsewhere(outline: Outline) -> None:
    assert not {"script", "link", "img", "iframe", "object"} & set(outline.tags)
    assert all(reference.startswith("#") for reference in outline.references)
    assert {reference[1:] for reference in outline.references} <= set(outline.ids)
    text = page(sample_audit())
    assert "@import" not in text
    assert not re.search(r"url\((?!#)", text)


def test_page_says_verdict_and_recommendation_before_the_table(outline: Outline) -> None:
    text = " ".join(outline.text)
    places = [text.index(word) for word in ("keep the error within", "Recommended: strang, commuting", "depth")]
    assert places == sorted(places)


def test_page_escapes_what_the_user_wrote() -> None:
    hostile = "<script>alert('x')</script> & \"quoted\""
    audit = sample_audit(title=hostile, start=hostile, energy_unit=hostile, reason=hostile, cautions=(hostile,))
    text = page(audit)
    assert "<script" not in text
    assert text.count("&lt;script&gt;") >= 5


def test_page_shows_inputs_certificate_and_grounds(outline: Outline) -> None:
    text = " ".join(" ".join(outline.text).split())
    for needed in (
        "1.0 X_0 X_1",
        "product state 011001",
        "0.5, 1, 2",
        "state error ≤ 9.1e-11",
        "Two segments.",
        "Assumed",
        "Proven",
        "Measured only",
        "does not validate a machine",
        "edge <order> & more",
        "commutator bound, theorem 1",
    ):
        assert needed in text, needed


def test_page_is_the_same_for_the_same_audit() -> None:
    assert page(sample_audit()) == page(sample_audit())


def test_page_of_one_candidate_without_title_or_recommendation() -> None:
    audit = sample_audit()
    lone = sample_audit(
        rows=audit.rows[:1],
        recommended=None,
        verdict="misses",
        title="",
        reason="No candidate meets it.",
        proven=(),
    )
    text = page(lone)
    assert "the candidate does not keep the error within 0.01" in text
    assert "No recommendation: No candidate meets it." in text
    assert "<h3>Proven</h3>" not in text


@pytest.mark.parametrize("picture", [steps_picture, gates_picture, time_picture])
def test_picture_is_an_svg_with_a_label_in_the_colours_of_the_page(picture) -> None:
    text = picture(sample_audit())
    root = ElementTree.fromstring(text)
    assert root.tag.endswith("svg")
    assert root.get("role") == "img"
    assert len(root.get("aria-label") or "") > 20
    assert "var(--ink)" in text and "var(--series-1)" in text
    assert "metadata" not in text


def test_pictures_hold_the_tolerance_and_every_candidate() -> None:
    for picture in (steps_picture, gates_picture):
        text = picture(sample_audit())
        assert "tolerance 0.01" in text
        assert all(label in text for label in ("lie, commuting", "strang, commuting", "suzuki-4, bond", "strang, axis"))
    text = time_picture(sample_audit())
    assert "middle_rung_zz" in text and "edge &lt;order&gt; &amp; more" in text


def test_pictures_leave_the_users_settings_alone() -> None:
    matplotlib = pytest.importorskip("matplotlib")
    with matplotlib.rc_context({"font.size": 31.0, "text.usetex": True, "svg.fonttype": "path"}):
        before = dict(matplotlib.rcParams)
        styled = steps_picture(sample_audit())
        assert dict(matplotlib.rcParams) == before
    assert styled == steps_picture(sample_audit())


def test_pictures_take_errors_that_reach_zero_and_names_with_dollars() -> None:
    audit = sample_audit()
    row = audit.rows[0]
    zero = type(row)(**{**vars(row), "error": (0.0, 1e-12), "label": "_my $formula, bond"})
    zero = type(row)(**{**vars(zero), "trials": tuple(type(t)(t.steps, (0.0, 0.0), "meets", 0) for t in row.trials)})
    changed = sample_audit(rows=(zero,), recommended=zero)
    for picture in (steps_picture, gates_picture, time_picture):
        ElementTree.fromstring(picture(changed))
    assert "_my $formula, bond" in steps_picture(changed)
    assert "no candidate has any two-qubit gates" in gates_picture(changed)


def state_audit():
    audit = sample_audit()
    rows = []
    for row in audit.rows:
        points = [
            type(point)(point.time, "state", math.nan, math.nan, point.error)
            for point in row.points
            if point.name == "middle_rung_zz"
        ]
        rows.append(type(row)(**{**vars(row), "points": tuple(points)}))
    return sample_audit(rows=tuple(rows), recommended=rows[1], quantity="state", observables={})


def test_a_state_audit_has_its_own_picture_and_nulls_for_values() -> None:
    audit = state_audit()
    assert "state error" in time_picture(audit)
    assert "state error within 0.01" in page(audit)
    points = json.loads(json_text(to_dict(audit)))["rows"][0]["points"]
    assert points[0]["value"] is None and points[0]["reference"] is None
    assert "Largest error of every candidate: t = 2." in plain_table(audit)


def test_many_observables_are_drawn_in_part_and_the_page_says_so() -> None:
    audit = sample_audit()
    observables = {f"site {site}": Operator(f"Z_{site % 6}", 6) for site in range(9)}
    rows = []
    for row in audit.rows:
        points = [
            type(point)(point.time, name, point.value, point.reference, point.error)
            for name in observables
            for point in row.points[: len(TIMES)]
        ]
        rows.append(type(row)(**{**vars(row), "points": tuple(points)}))
    reference = audit.reference
    reference.expectations = {name: [0.1] * len(TIMES) for name in observables}
    reference.expectation_bounds = {name: [1e-10] * len(TIMES) for name in observables}
    text = page(sample_audit(rows=tuple(rows), observables=observables, reference=reference))
    assert f"Of 9 observables the {MOST_OBSERVABLES} with the largest errors" in text


def test_json_comes_back_as_it_was_written_and_holds_what_the_page_shows() -> None:
    audit = sample_audit()
    document = to_dict(audit)
    assert json.loads(json_text(document)) == document
    assert document["schema"] == SCHEMA
    assert document["recommended"] == 1
    assert document["system"]["terms"] == 16 and document["system"]["complete"]
    assert Operator("\n".join(document["system"]["text"])) == audit.operator
    assert len(document["rows"][1]["trials"]) == 8
    assert document["reference"]["error_bound"] == [3e-11, 5e-11, 9.1e-11]
    for sentence in (*audit.assumptions, *audit.proven, *audit.measured, *audit.cautions):
        assert sentence in json_text(document)


def test_csv_has_one_line_a_row(tmp_path: Path) -> None:
    folder = sample_audit().write(tmp_path / "audit")
    with (folder / "audit.csv").open(encoding="utf-8", newline="") as file:
        lines = list(csv.DictReader(file))
    assert tuple(lines[0]) == COLUMNS
    assert [line["verdict"] for line in lines] == ["misses", "meets", "meets", "undecided"]
    assert [line["recommended"] for line in lines] == ["no", "yes", "no", "no"]
    assert float(lines[0]["error_low"]) < float(lines[0]["error_high"])
    assert lines[2]["bound"] == "" and lines[2]["accidental_steps"] == "2"


def test_folder_is_complete_and_nothing_else_is_left(tmp_path: Path) -> None:
    folder = write_folder(sample_audit(), tmp_path / "deep" / "audit")
    assert sorted(path.name for path in folder.iterdir()) == sorted(FILES)
    assert [path.name for path in folder.parent.iterdir()] == ["audit"]
    assert "Infinity" not in (folder / "audit.json").read_text()


def test_an_audit_folder_is_replaced(tmp_path: Path) -> None:
    folder = sample_audit().write(tmp_path / "audit")
    sample_audit(title="second").write(folder)
    assert json.loads((folder / "audit.json").read_text())["title"] == "second"
    assert [path.name for path in tmp_path.iterdir()] == ["audit"]


def test_an_empty_folder_is_filled(tmp_path: Path) -> None:
    (tmp_path / "audit").mkdir()
    assert (sample_audit().write(tmp_path / "audit") / "report.html").is_file()


@pytest.mark.parametrize(
    ("names", "wrong"),
    [(("thesis.tex",), "is not an audit folder"), (("audit.json", "notes.txt"), "holds notes.txt")],
)
def test_a_folder_with_other_things_is_refused_and_kept(tmp_path: Path, names, wrong: str) -> None:
    folder = tmp_path / "mine"
    folder.mkdir()
    for name in names:
        (folder / name).write_text("precious")
    with pytest.raises(ArgumentError, match=wrong) as caught:
        sample_audit().write(folder)
    assert caught.value.argument == "folder"
    assert sorted(path.name for path in folder.iterdir()) == sorted(names)
    assert [path.name for path in tmp_path.iterdir()] == ["mine"]


def test_a_file_of_the_name_is_refused(tmp_path: Path) -> None:
    (tmp_path / "audit").write_text("precious")
    with pytest.raises(ArgumentError, match="a file of this name exists"):
        require_replaceable(tmp_path / "audit")
    with pytest.raises(ArgumentError, match="cannot be made here"):
        require_replaceable(tmp_path / "audit" / "below")


def test_a_failure_while_writing_leaves_the_old_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    folder = sample_audit(title="first").write(tmp_path / "audit")

    def fail(document) -> str:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(import_module("trueturn.audit.report"), "json_text", fail)
    with pytest.raises(OSError, match="No space left"):
        sample_audit(title="second").write(folder)
    assert json.loads((folder / "audit.json").read_text())["title"] == "first"
    assert [path.name for path in tmp_path.iterdir()] == ["audit"]


@pytest.mark.parametrize("width", [60, 80, 100, 120, 160])
def test_table_fits_the_width_and_says_everything(width: int) -> None:
    text = plain_table(sample_audit(), width)
    assert max(map(len, text.splitlines())) <= width
    joined = " ".join(text.split())
    for needed in (
        "MEETS",
        "2.40e-2",
        "9.6e-3 … 1.1e-2",
        "0.40",
        "? undecided",
        "middle_rung_zz, t = 2",
        "single precision",
        "Recommended: strang, commuting with 14 steps",
        "state error ≤ 9.1e-11",
        "proven",
        "does not validate a machine",
        "met by accident",
    ):
        assert needed in joined, needed


def test_repr_is_the_table() -> None:
    assert repr(sample_audit()) == plain_table(sample_audit())


def test_a_search_that_failed_shows_how_far_it_went() -> None:
    audit = sample_audit()
    row = type(audit.rows[0])(**{**vars(audit.rows[1]), "verdict": "misses", "steps": 4096})
    assert "to 4\u00a0096" in plain_table(sample_audit(rows=(row,), recommended=None, verdict="misses"))


@pytest.mark.parametrize(
    ("low", "high", "text"),
    [
        (0.0, 0.0, "≤ 0"),
        (0.0, 9.71e-9, "≤ 9.8e-9"),
        (0.0031415926, 0.0031415927, "3.14e-3"),
        (0.00312, 0.00356, "3.1e-3 … 3.6e-3"),
        (0.00999991, 0.00999992, "9.9999e-3"),
        (0.01, 0.01, "1.00e-2"),
        (0.0099999, 0.0100001, "9.9e-3 … 1.1e-2"),
        (1.5, 2.0, "1.5 … 2.0"),
    ],
)
def test_interval_is_compact_and_never_too_narrow(low: float, high: float, text: str) -> None:
    assert interval(low, high, 0.01) == text


def test_figures_round_in_the_direction_that_is_safe() -> None:
    assert upper(0.0101) == "1.1e-2"
    assert upper(0.01) == "1.0e-2"
    assert upper(9.99e-5) == "1.0e-4"
    assert nearest(0.0) == "0"
    assert upper(math.inf) == "inf"
    assert (upper(73.2), upper(732.0), upper(7320.0), upper(0.0999)) == ("74", "740", "7.4e3", "0.10")
    assert plain(1e-10) == "1e-10" and plain(0.1) == "0.1" and plain(1e22) == "1e22" and plain(1 / 3)[:4] == "0.33"
    assert count(1234567) == "1\u00a0234\u00a0567"
