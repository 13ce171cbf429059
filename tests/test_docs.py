"""What the documents show is what the code does."""

from __future__ import annotations

import io
import operator
import os
import re
import subprocess
import sys
from contextlib import redirect_stdout
from pathlib import Path

import pytest

import trueturn as tt
import trueturn.cli

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")


def test_the_readme_example_prints_what_the_readme_says(tmp_path, monkeypatch):
    (code, printed) = re.search(r"```python\n(.*?)```\n```\n(.*?)```", README, re.DOTALL).groups()
    monkeypatch.chdir(tmp_path)
    out = io.StringIO()
    with redirect_stdout(out):
        exec(compile(code, "README.md", "exec"), {})
    assert out.getvalue().rstrip() == printed.rstrip()
    assert (tmp_path / "audit" / "report.html").exists()


def test_the_second_example_of_the_readme_prints_what_it_says(tmp_path, monkeypatch):
    section = README[README.index("## Plan, bound, write, read, diagnose") :]
    (code, printed) = re.search(r"```python\n(.*?)```\n```\n(.*?)```", section, re.DOTALL).groups()
    monkeypatch.chdir(tmp_path)
    out = io.StringIO()
    with redirect_stdout(out):
        exec(compile(code, "README.md", "exec"), {})
    assert out.getvalue().rstrip() == printed.rstrip()


def test_the_index_of_the_pages_lists_them_all():
    index = (ROOT / "docs" / "README.md").read_text(encoding="utf-8")
    listed = re.findall(r"^- \[(.*?)\]\((.*?)\): \S", index, re.MULTILINE)
    pages = sorted(page.name for page in (ROOT / "docs").glob("*.md") if page.name != "README.md")
    assert listed == [(name, name) for name in pages]


def test_every_call_that_the_readme_names_exists():
    # spans of code and fenced blocks alike; `trueturn.formulas` is a function, so nothing lies behind it
    named = sorted(set(re.findall(r"(?<![\w./])(?:tt|trueturn)((?:\.[A-Za-z_]\w*)+)\(", README)))
    assert {".read_formulas", ".formula"} <= set(named)
    for path in named:
        operator.attrgetter(path[1:])(tt)


def test_the_entry_that_the_developers_page_shows_makes_a_formula():
    from trueturn.formulas import entry

    (code,) = re.findall(r"```python\n(Entry.*?)```", (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8"), re.DOTALL)
    made = eval(code, vars(entry)).formula()
    assert made.order == 4 and made.symmetric and f'"{made.name}"' in code


def test_every_public_name_has_a_docstring_and_is_exported_once():
    assert sorted(set(tt.__all__)) == sorted(tt.__all__)
    for name in tt.__all__:
        assert getattr(tt, name).__doc__, name


def test_every_public_method_has_a_docstring():
    for name in tt.__all__:
        thing = getattr(tt, name)
        if isinstance(thing, type):
            for method, value in vars(thing).items():
                if not method.startswith("_") and (callable(value) or isinstance(value, property)):
                    assert value.__doc__, f"{name}.{method}"


def test_pictures_are_not_imported_until_drawn():
    code = "import sys, trueturn; sys.exit('matplotlib' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code]).returncode == 0


@pytest.mark.parametrize("command", sorted(trueturn.cli.commands.commands))
def test_the_commands_of_the_readme_exist(command):
    run = subprocess.run(
        [sys.executable, "-m", "trueturn", command, "--help"],
        capture_output=True,
        text=True,
        env={**os.environ, "COLUMNS": "100"},
    )
    assert run.returncode == 0 and f"trueturn {command}" in run.stdout
    assert f"trueturn {command}" in README
