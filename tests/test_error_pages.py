"""The examples of the pages on errors print what the pages say."""

from __future__ import annotations

import io
import re
from contextlib import redirect_stdout
from pathlib import Path

import pytest

DOCS = Path(__file__).parent.parent / "docs"


@pytest.mark.parametrize("name", ["effective-hamiltonian.md", "measured-errors.md"])
def test_the_example_prints_what_the_page_says(name):
    text = (DOCS / name).read_text(encoding="utf-8")
    ((code, printed),) = re.findall(r"```python\n(.*?)```\n```\n(.*?)```", text, re.DOTALL)
    out = io.StringIO()
    with redirect_stdout(out):
        exec(compile(code, name, "exec"), {})
    assert out.getvalue().rstrip() == printed.rstrip()
