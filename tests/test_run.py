"""The whole chain on the example: what is written adds up, and does not depend on how it was computed."""

import hashlib
import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import etflux
from etflux import assemble, counties, humidity, workbook
from etflux.case import Case, with_settings
from etflux.run import run_case
from etflux.workbook.job import moved_days, run_workbook

EXAMPLES = Path(__file__).parents[1] / "station_examples"
BASIN, COUNTY = EXAMPLES / "harrowbend.xlsx", EXAMPLES / "tallgrove_us.xlsx"


@pytest.fixture(scope="module")
def basin():
    return workbook.read(BASIN)[0]


@pytest.fixture(scope="module")
def written(tmp_path_factory):
    folder = tmp_path_factory.mktemp("run") / "basin"
    before = hashlib.sha256(BASIN.read_bytes()).hexdigest()
    results = run_workbook(BASIN, output=folder, on="2031-07-27")
    assert hashlib.sha256(BASIN.read_bytes()).hexdigest() == before  # inputs are never written to
    return folder, results


def test_water_closes_from_the_written_tables_alone(written):
    folder, _ = written
    daily = pd.read_csv(folder / "stand_daily.csv")
    stands = pd.read_csv(folder / "stands.csv").set_index("unit_id")
    flows = daily.groupby("unit_id")[
        ["rain_stand_mm", "irrigation_mm", "capillary_rise_mm", "runoff_mm", "drainage_mm", "evaporation_mm",
         "transpiration_mm"]
    ].sum()  # fmt: skip
    last = daily.sort_values("date").groupby("unit_id").last()
    stored = last["snow_mm"] - last["dr_mm"] - last["ds_mm"]
    came = flows["rain_stand_mm"] + flows["irrigation_mm"] + flows["capillary_rise_mm"]
    went = flows[["runoff_mm", "drainage_mm", "evaporation_mm", "transpiration_mm"]].sum(axis=1)
    error = came - went - (stored - stands["stored_start_mm"])
    assert len(error) > 150
    assert error.abs().max() < 1e-6


def test_county_is_the_area_sum_of_its_units(written):
    folder, _ = written
    daily = pd.read_csv(folder / "stand_daily.csv")
    stands = pd.read_csv(folder / "stands.csv")
    county = pd.read_csv(folder / "county_daily.csv").set_index(["date", "county_id"])
    area = pd.read_csv(folder / "counties.csv").set_index("county_id")["area_km2"]
    merged = daily.merge(stands[["unit_id", "area_km2", "county_id", "kind"]], on="unit_id", suffixes=("", "_unit"))
    into_air = (merged["et_mm"] + merged["sprinkler_loss_mm"]) * merged["area_km2"]
    total = into_air.groupby([merged["date"], merged["county_id"]]).sum()
    mean = total / area.reindex(total.index.get_level_values(1)).to_numpy()
    assert np.abs(mean - county["et_county_mm"].reindex(mean.index)).max() < 1e-8
    own = merged[merged["kind"] == "stand"]
    share = own["area_km2"].groupby([own["date"], own["county_id"]]).sum()
    use = (own["et_mm"] * own["area_km2"]).groupby([own["date"], own["county_id"]]).sum() / share
    assert np.abs(use - county["et_stands_mm"].reindex(use.index)).max() < 1e-8


def test_latent_flux_by_cover_sums_to_the_county(written):
    county = written[1].county
    total = county["le_by_tag_w_m2"].sum("tag")
    assert np.abs(total - county["le_county_w_m2"]).max() < 1e-9
    parts = county["le_transpiration_w_m2"] + county["le_evaporation_w_m2"]
    assert np.abs(parts - county["le_county_w_m2"]).max() < 1e-9


def test_contribution_table_sums_to_the_county(written):
    folder, results = written
    table = pd.read_csv(folder / "contribution.csv")
    at = table[(table["hour"] == 15) & (table["cover"] != "rest")]
    total = at.groupby(["date", "county_id"])["contribution_c"].sum(min_count=1).dropna()
    county = pd.read_csv(folder / "county_daily.csv").set_index(["date", "county_id"])["contribution_c"]
    assert len(total) > 2000
    assert np.abs(total - county.reindex(total.index)).max() < 1e-6


def test_tagged_water_and_energy_are_accounted_for(written):
    budget = written[1].budget
    lost = budget[(budget["balance"] == "tagged water") & (budget["term"] == "unaccounted")]["value"]
    left = budget[(budget["balance"] == "tagged water") & (budget["term"] == "left the ground")]["value"]
    assert len(lost) == 5
    assert lost.abs().max() < 1e-9 * left.max()
    energy = budget[(budget["balance"] == "energy by day") & (budget["term"] == "closure")]["value"]
    assert energy.abs().max() < 1e-9


def test_humid_episode_is_what_forecasters_know(written):
    """Common practice, no source: afternoon dew points in the mid to upper 70s °F, a day adds a few °F."""
    county = written[1].county.sel(date=slice("2031-07-25", "2031-07-28"))
    dew_f = county["dew_point_mixed_c"] * 1.8 + 32.0
    assert 72.0 < float(dew_f.mean()) < 79.0
    assert 1.0 < float(county["contribution_same_day_c"].median()) < 5.0
    assert 800.0 < float(county["mixing_depth_m"].median()) < 1500.0


def test_blocks_change_nothing(basin, written, monkeypatch):
    monkeypatch.setattr(assemble.blocks, "__defaults__", (20,))
    again = run_case(basin)
    for name in ("et_mm", "dr_mm", "irrigation_mm"):
        assert float(np.abs(again.stand[name] - written[1].stand[name]).max()) < 1e-9, name


def test_run_json_names_every_file_with_its_hash(written):
    folder, _ = written
    manifest = json.loads((folder / "run.json").read_text())
    assert {path.name for path in folder.iterdir()} == {*manifest["files"], "run.json"}
    for name, entry in manifest["files"].items():
        digest = entry["sha256"] if isinstance(entry, dict) else entry
        assert hashlib.sha256((folder / name).read_bytes()).hexdigest() == digest


def test_netcdf_opens_as_it_was(written):
    folder, results = written
    with xr.open_dataset(folder / "results.nc", group="county", engine="h5netcdf") as found:
        assert np.array_equal(found["et_county_mm"], results.county["et_county_mm"], equal_nan=True)


def test_missing_rain_stops_the_season_and_says_so(basin):
    tables = dict(basin.tables)
    weather, gauges = tables["weather"].copy(), tables["rain_gauges"]
    weather.loc[weather["date"].between("2031-08-10", "2031-08-12"), "rain_mm"] = np.nan
    tables["weather"] = weather
    tables["rain_gauges"] = gauges[~gauges["date"].between("2031-08-08", "2031-08-13")].reset_index(drop=True)
    results = run_case(Case(basin.settings, tables))
    assert {f.code for f in results.findings if f.table == "counties"} == {"rain-missing"}
    et = results.county["et_county_mm"]
    assert np.isfinite(et.sel(date="2031-08-08")).all()  # what a morning observer reads on the 10th fell on the 9th
    assert np.isnan(et.sel(date=slice("2031-08-11", None))).all()
    dry = run_case(Case(with_settings(basin.settings, missing_rain="treat as 0"), tables))
    assert np.isfinite(dry.county["et_county_mm"]).all()
    assert {f.code for f in dry.findings if f.table == "counties"} == {"rain-treated-as-zero"}


def _command(*arguments, cwd):
    return subprocess.run(
        [sys.executable, "-m", "etflux.cli", *arguments], capture_output=True, text=True, cwd=cwd, check=False
    )


def test_command_line_from_template_to_brief(tmp_path):
    done = _command("template", "mine.xlsx", "--units", "us", cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    assert _command("template", "mine.xlsx", cwd=tmp_path).returncode == 3  # never over a file that is there
    empty = _command("check", "mine.xlsx", "--json", cwd=tmp_path)
    assert empty.returncode == 1
    assert {row["severity"] for row in json.loads(empty.stdout)} >= {"error"}
    assert _command("run", "mine.xlsx", cwd=tmp_path).returncode == 1
    assert not (tmp_path / "mine-etflux").exists()  # no half output
    done = _command("run", str(COUNTY), "--on", "2031-07-27", cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    assert "°F" in done.stdout
    assert "°C" not in done.stdout
    assert (tmp_path / "tallgrove_us-etflux" / "run.json").exists()
    quiet = _command("run", "-q", str(COUNTY), cwd=tmp_path)
    assert (quiet.returncode, quiet.stdout, quiet.stderr) == (0, "", "")


@pytest.mark.parametrize(
    ("arguments", "code"),
    [(["frob"], 2), (["run"], 2), (["run", "nowhere.xlsx"], 3), (["--version"], 0), (["--help"], 0)],
)
def test_exit_codes(arguments, code, tmp_path):
    done = _command(*arguments, cwd=tmp_path)
    assert done.returncode == code, done.stderr
    assert "Traceback" not in done.stderr


def test_day_of_the_brief_must_be_on_record(tmp_path):
    done = _command("run", str(COUNTY), "--on", "2031-12-24", cwd=tmp_path)
    assert done.returncode == 1
    assert "the record runs from 2031-04-01 to 2031-09-30" in done.stderr


def test_daytime_flux_carries_the_day_s_water():
    hours = np.array([10.0, 15.0])
    whole = counties.latent_flux(5.0, 20.0) * 24.0
    assert counties.latent_flux(5.0, 20.0, hours) * hours == pytest.approx(whole)
    assert counties.latent_flux(1.0, 20.0) == pytest.approx(humidity.latent_heat_of_vaporization(20.0) * 1e6 / 86400.0)


def test_county_sums_want_sorted_units():
    with pytest.raises(ValueError, match="must not decrease"):
        counties.county_sums([1.0, 2.0], [1, 0], 2)


def test_public_names_are_the_promised_ones():
    assert {"run_workbook", "run_case", "Case", "Results", "eto_fao56", "check"} <= set(etflux.__all__)


def test_rerun_lists_the_days_that_moved(tmp_path):
    folder = tmp_path / "out"
    first = run_workbook(COUNTY, output=folder)
    assert not (folder / "moved.csv").exists()
    again = run_workbook(COUNTY, output=folder)
    assert len(pd.read_csv(folder / "moved.csv")) == 0
    assert "days-moved" not in {finding.code for finding in again.findings}
    case, findings = workbook.checked(COUNTY)
    wetter = run_case(Case(with_settings(case.settings, residue_no_till_pct=0.0), case.tables), findings)
    moved = moved_days(wetter, folder)
    changed = np.abs(wetter.stand["et_mm"] - first.stand["et_mm"]) > 0.2
    assert len(moved) == int(changed.sum()) > 10
