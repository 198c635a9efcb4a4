"""A small made-up run with plausible numbers, so that what is written can be tested without computing a season."""

import importlib.util
from pathlib import Path

import pytest

_spec = importlib.util.spec_from_file_location("made_up_run", Path(__file__).with_name("made_up_run.py"))
made_up_run = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(made_up_run)


@pytest.fixture(scope="session")
def make():
    """The factory itself."""
    return made_up_run.make


@pytest.fixture(scope="session")
def small():
    """Three counties, one of them without stands, forty days, with the air of the last five."""
    return made_up_run.make(counties=3, days=40)
