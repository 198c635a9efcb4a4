"""The made-up run of the results' tests."""

import importlib.util
from pathlib import Path

import pytest

_spec = importlib.util.spec_from_file_location(
    "made_up_run_for_brief", Path(__file__).parents[1] / "results" / "made_up_run.py"
)
made_up_run = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(made_up_run)


@pytest.fixture(scope="session")
def make():
    """The factory of made-up runs."""
    return made_up_run.make
