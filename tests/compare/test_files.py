"""What a comparison writes, and the command."""

import subprocess
import sys

import openpyxl
import pandas as pd
import pytest

from etflux.cli import NO_FILE, PROBLEMS, main
from etflux.compare import compare, measurements_from, write_comparison
from etflux.compare.files import summary_text
from etflux.findings import CannotWrite
from etflux.results import write_folder


@pytest.fixture
def two_series(rows):
    return pd.concat([rows.assign(series="raw"), rows.assign(series="=closed", value=rows["value"] * 1.1)])


def test_every_file_is_there_and_says_the_same(run, two_series, tmp_path):
    found = compare(run, measurements_from(two_series, "field.csv"))
    write_comparison(run, found, tmp_path / "out")
    names = {path.name for path in (tmp_path / "out").iterdir()}
    assert names == {
        "comparison.csv", "comparison_pairs.csv", "comparison.xlsx", "comparison.html",
        "comparison_S02-1_et_mm_scatter.png", "comparison_S02-1_et_mm_scatter.svg",
        "comparison_S02-1_et_mm_days.png", "comparison_S02-1_et_mm_days.svg",
    }  # fmt: skip
    metrics = pd.read_csv(tmp_path / "out" / "comparison.csv")
    assert metrics["rmse"].to_numpy() == pytest.approx(found.metrics["rmse"].to_numpy(), abs=1e-5, nan_ok=True)
    assert "'=closed" in set(metrics["series"])
    pairs = pd.read_csv(tmp_path / "out" / "comparison_pairs.csv")
    assert len(pairs) == 240
    book = openpyxl.load_workbook(tmp_path / "out" / "comparison.xlsx")
    assert book.sheetnames == ["Agreement", "Pairs", "Figures"]
    assert len(book["Figures"]._images) == 2
    sheet = book["Agreement"]
    headings = [cell.value for cell in sheet[4]]
    bias = [row[headings.index("Bias")].value for row in sheet.iter_rows(min_row=5)]
    assert bias[0] == pytest.approx(found.metrics["bias"].iloc[0])
    page = (tmp_path / "out" / "comparison.html").read_text(encoding="utf-8")
    assert "RMSE" in page
    assert page.count("data:image/png") == 2
    assert "http" not in page.replace("http-equiv", "")


def test_a_second_comparison_replaces_the_first_and_leaves_nothing_else(run, rows, tmp_path):
    write_comparison(run, compare(run, measurements_from(rows)), tmp_path)
    write_comparison(run, compare(run, measurements_from(rows.assign(value=1.0))), tmp_path)
    assert pd.read_csv(tmp_path / "comparison_pairs.csv")["measured"].eq(1.0).all()
    assert not list(tmp_path.glob(".etflux*"))


def test_a_folder_that_cannot_be_written(run, rows, tmp_path):
    (tmp_path / "file").write_text("x")
    with pytest.raises(CannotWrite, match="cannot write"):
        write_comparison(run, compare(run, measurements_from(rows)), tmp_path / "file")


def test_summary_names_place_series_and_folder(run, two_series, tmp_path):
    text = summary_text(compare(run, measurements_from(two_series)), tmp_path)
    assert "S02-1, Crop water use against raw: 120 days, bias -0.25 mm/day" in text
    assert "inside" in text
    assert str(tmp_path) in text


def test_the_command(run, rows, tmp_path, capsys):
    write_folder(run, tmp_path / "run")
    rows.assign(date=rows["date"].dt.strftime("%Y-%m-%d")).to_csv(tmp_path / "field.csv", index=False)
    with pytest.raises(SystemExit) as left:
        main(["compare", str(tmp_path / "run"), str(tmp_path / "field.csv"), "-o", str(tmp_path / "out")])
    assert left.value.code == 0
    assert "120 days, bias -0.25" in capsys.readouterr().out
    assert (tmp_path / "out" / "comparison.xlsx").exists()


def test_the_commands_errors_are_words(run, rows, tmp_path, capsys):
    write_folder(run, tmp_path / "run")
    rows.assign(date="yesterday").to_csv(tmp_path / "field.csv", index=False)
    for file, code, words in (("field.csv", PROBLEMS, "is not a date"), ("none.csv", NO_FILE, "cannot read")):
        with pytest.raises(SystemExit) as left:
            main(["compare", str(tmp_path / "run"), str(tmp_path / file)])
        assert left.value.code == code
        assert words in capsys.readouterr().err
    with pytest.raises(SystemExit) as left:
        main(["compare", str(tmp_path), str(tmp_path / "field.csv")])
    assert left.value.code == NO_FILE


def test_metrics_load_no_drawing():
    code = "import sys, etflux.compare; print('matplotlib' in sys.modules, 'openpyxl' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "False False"
