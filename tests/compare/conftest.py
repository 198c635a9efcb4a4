"""The made-up run of tests/results, and measurements made of it with known errors."""

import importlib.util
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

_spec = importlib.util.spec_from_file_location("made_up_run", Path(__file__).parents[1] / "results" / "made_up_run.py")
made_up_run = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(made_up_run)


@pytest.fixture(scope="session")
def run():
    """Three counties, 120 days."""
    return made_up_run.make(counties=3, days=120)


@pytest.fixture
def rows(run):
    """Water use of one stand as the run has it, 0.5 mm more on every second day."""
    et = run.stand["et_mm"].sel(unit_id="S02-1").to_numpy()
    more = np.where(np.arange(len(et)) % 2, 0.5, 0.0)
    return pd.DataFrame(
        {"place": "S02-1", "date": run.stand["date"].to_numpy(), "quantity": "et_mm", "value": et + more,
         "unit": "mm/day"}
    )  # fmt: skip
