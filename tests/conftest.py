"""Hypothesis profiles (``TRUETURN_HYPOTHESIS=dev|ci``) and fixtures shared by all tests."""

from __future__ import annotations

import json
import os
import signal
import tomllib
from pathlib import Path

# Matrices here are small: threads of the linear algebra library would only wait for each other.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import hypothesis
import pytest

hypothesis.settings.register_profile("dev", deadline=None, max_examples=60)
hypothesis.settings.register_profile("ci", deadline=None, max_examples=150, derandomize=True, print_blob=True)
hypothesis.settings.load_profile(os.environ.get("TRUETURN_HYPOTHESIS", "dev"))


def pytest_addoption(parser):
    parser.addoption("--heavy", action="store_true", help="run the tests marked heavy too")


def pytest_collection_modifyitems(config, items):
    if config.getoption("--heavy") or "heavy" in config.getoption("-m"):
        return
    for item in items:
        if "heavy" in item.keywords:
            item.add_marker(pytest.mark.skip(reason="heavy; run with --heavy"))


PUBLISHED = Path(__file__).parent / "published"


@pytest.fixture(scope="session")
def published():
    """Check values from the literature, parsed: ``published("exact.json")``."""

    def load(name):
        text = (PUBLISHED / name).read_text(encoding="utf-8")
        return json.loads(text) if name.endswith(".json") else tomllib.loads(text)

    return load


def pytest_sessionstart(session):
    # A shell that starts the tests in the background has them ignore Ctrl-C, and their children too: tests of it would wait
    # for ever.
    if signal.getsignal(signal.SIGINT) is signal.SIG_IGN:
        signal.signal(signal.SIGINT, signal.default_int_handler)
