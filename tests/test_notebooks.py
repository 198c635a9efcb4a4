"""The notebooks run from top to bottom, and are kept without outputs."""

import os
from pathlib import Path

import nbformat
import pytest
from nbclient import NotebookClient

NOTEBOOKS = sorted((Path(__file__).parents[1] / "notebooks").glob("*.ipynb"))


def test_there_are_notebooks():
    assert len(NOTEBOOKS) >= 4


@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda path: path.stem)
def test_kept_without_outputs(path):
    notebook = nbformat.read(path, as_version=4)
    nbformat.validate(notebook)
    for cell in notebook.cells:
        assert not cell.get("outputs")
        assert cell.get("execution_count") is None


@pytest.mark.filterwarnings("ignore")  # of the kernel's own libraries
@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda path: path.stem)
def test_runs_from_top_to_bottom(path):
    measured = Path(os.environ.get("ETFLUX_MEASURED") or "nowhere") / "us_ne1_daily_2001-2006.csv"
    if "measured" in path.stem and not measured.exists():
        if "measured" in os.environ.get("ETFLUX_REQUIRE", ""):
            pytest.fail("ETFLUX_MEASURED must name the folder of measurements")
        pytest.skip("ETFLUX_MEASURED names no folder with measurements")
    notebook = nbformat.read(path, as_version=4)
    place = {"metadata": {"path": path.parent}}
    NotebookClient(notebook, timeout=300, kernel_name="python3", resources=place).execute()
    errors = [
        output
        for cell in notebook.cells
        for output in cell.get("outputs", [])
        if output.output_type == "error" or (output.output_type == "stream" and output.name == "stderr")
    ]
    assert not errors
