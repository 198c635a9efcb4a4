"""The whole chain on the example: what is written adds up, and does not depend on how it was computed."""

import hashlib
import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import openpyxl
import pandas as pd
import pytest
import xarray as xr

import etflux
from etflux import assemble, counties, humidity, workbook
from etflux.case import Case, with_settings
from etflux.job import moved_days, run_workbook
from etflux.results.rests import rests_on
from etflux.results.summary import CONFIDENCE, confidence
from etflux.run import run_case
from etflux.workbook.report import write_report
from etflux.workbook.report_words import WORLD_SENTENCES, paragraph

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


def test_the_morning_air_by_layer_carries_what_the_table_says_was_carried(written):
    """Mixed to the depth of the afternoon the morning's crop water gives the carried part of the contribution."""
    _, results = written
    county = results.county
    day = np.datetime64("2031-07-20")
    air = results.air_profiles
    assert set(air["date"].unique()) == set(county["date"].to_numpy())
    today = air[(air["date"] == day)].set_index("county_id")
    crops = (today["humidity_g_kg"] - today["humidity_without_g_kg"]).groupby("county_id").mean()
    assert (today["humidity_without_g_kg"] >= 0.0).all()
    assert (today["humidity_without_g_kg"] <= today["humidity_g_kg"] + 1e-6).all()
    carried = county["contribution_carried_c"].sel(date=day).to_pandas()
    assert (crops[carried.index][carried > 0.05] > 0.0).all()
    height = today["height_m"].to_numpy().reshape(-1, county.sizes["layer"])
    assert (np.diff(height, axis=1) > 0.0).all()


def test_wind_and_clock_of_every_county_day(written):
    """West of its meridian the sun is late: noon by the sun comes after noon by the clock."""
    _, results = written
    county = results.county
    speed = np.hypot(county["wind_east_m_s"], county["wind_north_m_s"])
    assert (np.isfinite(speed) == np.isfinite(county["crossing_h"])).all()
    late = county["clock_minus_solar_h"]
    per_degree = (late.isel(county_id=0) - late.isel(county_id=-1)) / (
        county["longitude_deg"].isel(county_id=-1) - county["longitude_deg"].isel(county_id=0)
    )
    assert np.allclose(per_degree, 1.0 / 15.0)
    assert ((county["longitude_deg"] < -90.0) == (late.mean("date") > 0.0)).all()


@pytest.fixture(scope="module")
def air_sheets(written):
    """Values of the sheets on the air by sheet, as the rows below their headings, and the lines above."""
    book = openpyxl.load_workbook(written[0] / "results.xlsx", read_only=True)
    found = {}
    for title in ("Crop moisture", "How sure", "Hour by hour", "Who moistens whom", "Other worlds"):
        rows = list(book[title].iter_rows(values_only=True))
        top = next(place for place, row in enumerate(rows) if row[0] == "County")
        blocks = pd.Series(rows[top - 1]).ffill().fillna("")
        names = [f"{block}|{name}" for block, name in zip(blocks, rows[top], strict=False)]
        found[title] = (pd.DataFrame(rows[top + 1 :], columns=names), [str(row[0]) for row in rows[:top] if row[0]])
    return found


DAY = pd.Timestamp("2031-07-27")


def test_crop_moisture_sheet_adds_up_by_crop_and_by_day_it_left(written, air_sheets):
    rows, lines = air_sheets["Crop moisture"]
    total = rows["Afternoon|Crops added (°C)"].astype(float)
    for block in ("Which crop", "When it left the ground"):
        part = rows[[name for name in rows if name.startswith(block)]].astype(float).sum(axis=1)
        assert part.to_numpy() == pytest.approx(total.to_numpy(), abs=0.01)
    here = "Where it left the ground|"
    places = rows[here + "this county (°C)"].astype(float) + rows[here + "other counties (°C)"].astype(float)
    assert places.to_numpy() == pytest.approx(total.to_numpy(), abs=0.01)
    assert total.is_monotonic_decreasing  # most first
    county = written[1].county["contribution_c"].sel(date=DAY).to_series()
    assert total.to_numpy() == pytest.approx(county[rows.iloc[:, 0]].to_numpy(), abs=1e-3)
    assert any(line.startswith("27 July 2031 at 15 h local solar time") for line in lines)


def test_at_least_is_not_the_least_that_how_sure_varies_and_the_sheet_says_so(air_sheets):
    rows, lines = air_sheets["Crop moisture"]
    least = rows.set_index("|County")["Afternoon|at least (°C)"].astype(float)
    varied = air_sheets["How sure"][0].set_index("|County")["Depth ± 25 %|lowest (°C)"].astype(float)
    assert (varied[least.index] < least).any()
    assert any("What the sheet How sure varies may go beyond" in line for line in lines)


def test_who_moistens_whom_sheet_gives_every_county_its_crops_share(written, air_sheets):
    rows, _ = air_sheets["Who moistens whom"]
    origins = rows[[name for name in rows if name.startswith("Crops of")]].astype(float)
    assert origins.shape == (24, 24)
    added = written[1].county["contribution_c"].sel(date=DAY).to_series()[rows.iloc[:, 0]]
    assert origins.sum(axis=1).to_numpy() == pytest.approx(added.to_numpy(), abs=0.05)  # rows under 1e-4 g/kg left out
    own = np.diag(origins.to_numpy())
    home = written[1].county["contribution_home_c"].sel(date=DAY).to_series()[rows.iloc[:, 0]]
    assert own == pytest.approx(home.to_numpy(), abs=0.05)


def test_how_sure_sheet_has_the_least_certain_first_and_says_what_the_band_is(written, air_sheets):
    rows, lines = air_sheets["How sure"]
    order = {word: code for code, word in CONFIDENCE.items()}
    assert rows["|How sure"].map(order).is_monotonic_increasing
    low, high = (rows[f"Depth ± 25 %|{end} (°C)"].astype(float) for end in ("lowest", "highest"))
    base = rows["|Crops added (°C)"].astype(float)
    assert (low <= base + 0.01).all()
    assert (high >= base - 0.01).all()
    assert "not the error of the method" in " ".join(lines)


def test_each_other_world_is_defined_where_it_is_shown(written, air_sheets):
    rows, lines = air_sheets["Other worlds"]
    for sentence in WORLD_SENTENCES.values():
        assert sentence in lines
    effect = rows["Rest's cover on every stand|Dew point, this world more by (°C)"].astype(float)
    here, there = rows["This world|Dew point (°C)"], rows["Rest's cover on every stand|Dew point (°C)"]
    assert effect.to_numpy() == pytest.approx((here.astype(float) - there.astype(float)).to_numpy(), abs=0.01)
    assert np.nanmin(effect.to_numpy(float)) > 0.0  # in late July crops use more water than grazed grass


def test_hour_by_hour_sheet_is_the_table_of_hours_by_solar_and_clock_time(written, air_sheets):
    rows, _ = air_sheets["Hour by hour"]
    table = pd.read_csv(written[0] / "county_hours.csv")
    table = table[table["date"] == "2031-07-27"]
    assert len(rows) == len(table)
    assert rows["Mixed air|Dew point of the mixed air (°C)"].to_numpy(float) == pytest.approx(
        table["dew_point_mixed_c"].to_numpy(), abs=1e-3
    )
    minutes = [int(text[:2]) * 60 + int(text[3:]) for text in rows["|Clock time"]]
    assert minutes == [round(60.0 * hour) for hour in table["clock_h"]]
    noon = table[(table["county_id"] == "HB01") & (table["hour"] == 12)]["contribution_c"].item()
    daily = pd.read_csv(written[0] / "county_daily.csv")
    daily = daily[(daily["county_id"] == "HB01") & (daily["date"] == "2031-07-27")]
    assert daily["contribution_12_c"].item() == pytest.approx(noon, abs=5.1e-5)  # the hours have four decimals


def test_background_air_of_a_day_bounds_what_crops_can_have_added(basin):
    """Moister background air leaves less room for water that crops can have put there on the days before."""
    days = pd.DatetimeIndex(basin.table("weather")["date"].unique())
    given = pd.DataFrame({"date": days, "background_dew_point_c": 18.0})
    moist = Case(basin.settings, {**basin.tables, "background_air": given}, basin.source)
    plain = run_case(without_extras(basin)).county
    other = run_case(without_extras(moist)).county
    july = slice("2031-07-10", "2031-07-31")
    carried = [float(found["contribution_carried_c"].sel(date=july).mean()) for found in (plain, other)]
    assert carried[1] < carried[0]


def test_draws_give_bands_around_the_estimate_and_the_same_for_the_same_seed(basin):
    small = without_extras(basin)
    few = Case(with_settings(small.settings, air_draws=12), small.tables, small.source)
    found = run_case(few).county
    low, middle, high = (found[f"contribution_p{share}_c"].to_numpy() for share in (10, 50, 90))
    there = np.isfinite(low) & np.isfinite(high)
    assert there.sum() > 1000
    assert (low[there] <= middle[there]).all()
    assert (middle[there] <= high[there]).all()
    base = found["contribution_c"].to_numpy()
    assert np.mean((low <= base)[there] & (base <= high)[there]) > 0.8
    again = run_case(few).county
    np.testing.assert_array_equal(again["contribution_p90_c"], found["contribution_p90_c"])
    other = run_case(Case(with_settings(few.settings, air_seed=2), few.tables, few.source)).county
    assert not np.array_equal(other["contribution_p90_c"], found["contribution_p90_c"], equal_nan=True)


def without_extras(case: Case) -> Case:
    """The case without other worlds and ranges, which take most of the time, and of June and July alone."""
    settings = with_settings(
        case.settings, air_worlds=False, air_ranges=False, season_start="2031-06-01", season_end="2031-07-31"
    )
    return Case(settings, case.tables, case.source)


def test_confidence_in_the_table_is_that_of_its_own_columns(written):
    daily = pd.read_csv(written[0] / "county_daily.csv")
    again = confidence(daily["flags"], daily["provisional"], daily["contribution_c"], daily["profile_distance_km"])
    assert (again == daily["confidence_code"]).all()
    assert set(daily["confidence_code"]) >= {0, 1, 2, 3}


def test_with_a_station_and_the_balloon_missing_the_brief_names_what_stands_in(basin, tmp_path):
    weather = basin.table("weather")
    last = pd.Timestamp("2031-07-27")
    station = weather["station_id"].iloc[0]
    gone = (weather["station_id"] == station) & (weather["date"] == last)
    assert gone.sum() == 1
    kept = weather[~gone & (weather["date"] <= last)].reset_index(drop=True)
    profiles = basin.table("profiles")
    profiles = profiles[profiles["time"] < last].reset_index(drop=True)
    small = without_extras(basin)
    case = Case(small.settings, {**basin.tables, "weather": kept, "profiles": profiles}, basin.source)
    results = run_case(with_end(case, last))
    rests = {part.name: part for part in rests_on(results, np.datetime64("2031-07-27"))}
    assert rests["Weather"].fallback
    # the other one is a morning observer, who has read the day only in part
    assert "temperature from a neighbour at 2" in rests["Weather"].text
    assert rests["Morning air"].text.startswith("no balloon: standard profile in all counties")
    write_report(results, tmp_path / "brief.xlsx", on="2031-07-27")
    text = str(openpyxl.load_workbook(tmp_path / "brief.xlsx")["Brief"]["A8"].value)
    assert rests["Weather"].text in text
    assert "no balloon: standard profile in all counties" in text
    assert np.isfinite(results.county["contribution_c"].sel(date=last)).sum() > 12


def with_end(case: Case, last: pd.Timestamp) -> Case:
    return Case(with_settings(case.settings, season_end=str(last.date())), case.tables, case.source)


def test_convective_energy_is_told_in_two_sentences_where_it_was_asked_for(basin):
    pytest.importorskip("metpy")
    last = pd.Timestamp("2031-07-27")
    case = with_end(without_extras(basin), last)
    asked = with_settings(case.settings, season_start="2031-07-15", air_cape=True, cape_days=1)
    results = run_case(Case(asked, case.tables, case.source))
    text = paragraph(results, results.summary(str(last.date())), "si")
    assert text.count("J/kg") >= 2
    assert "CAPE" in text or "convective" in text
    quiet = run_case(Case(with_settings(asked, air_cape=False), case.tables, case.source))
    assert "J/kg" not in paragraph(quiet, quiet.summary(str(last.date())), "si")


def test_the_brief_carries_the_map_and_the_folder_the_page(written):
    import zipfile

    folder, results = written
    with zipfile.ZipFile(folder / "results.xlsx") as archive:
        pictures = [name for name in archive.namelist() if name.endswith(".png")]
        drawing = archive.read("xl/drawings/drawing1.xml").decode()
    assert len(pictures) == 1
    assert "Contribution to the dew point (°C)" in drawing
    page = (folder / "brief.html").read_text(encoding="utf-8")
    assert len(page) < 3e6
    assert results.run_id in page
    manifest = json.loads((folder / "run.json").read_text())
    assert "brief.html" in manifest["files"]
