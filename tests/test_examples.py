"""The examples: made by rule, the same every time, and plausible to someone who farms or forecasts at 42 degrees.

Bounds without a source are common practice, no source.
"""

import importlib.util
import json
from pathlib import Path

import numpy as np
import openpyxl
import pandas as pd
import pytest

from etflux import humidity, reference, solar, stands, weather, workbook
from etflux.case import TABLES, Case, Settings
from etflux.outlines import EARTH_RADIUS_KM, area_and_centroid, read, shared_borders
from etflux.run import run_case
from etflux.variables import from_si, quantities

FOLDER = Path(__file__).parents[1] / "station_examples"
EPISODE = pd.date_range("2031-07-24", "2031-07-28")


def _script():
    spec = importlib.util.spec_from_file_location("make_examples", FOLDER / "make_examples.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


make_examples = _script()


@pytest.fixture(scope="module")
def basin():
    return make_examples.basin_tables()


@pytest.fixture(scope="module")
def tables(basin):
    return basin[0]


@pytest.fixture(scope="module")
def county():
    return make_examples.county_tables()


def _case(tables, settings):
    return Case(Settings(**settings), tables)


@pytest.fixture(scope="module")
def filled(basin):
    case = _case(basin[0], basin[1])
    record, findings = weather.fill(weather.arrange(case), case.settings)
    assert findings == []
    return record


# --- the same every time ---


def test_made_twice_is_the_same(basin, county):
    again = make_examples.basin_tables()
    for name, table in basin[0].items():
        pd.testing.assert_frame_equal(table, again[0][name])
    assert basin[1] == again[1]
    for name, table in county[0].items():
        pd.testing.assert_frame_equal(table, make_examples.county_tables()[0][name])


def test_outlines_file_is_what_the_script_makes(basin, tmp_path):
    make_examples.write_outlines(basin[2], tmp_path / "again.geojson")
    committed = FOLDER / make_examples.OUTLINES_FILE
    assert (tmp_path / "again.geojson").read_bytes() == committed.read_bytes()


def test_weather_file_is_what_the_script_makes(tables, tmp_path):
    _, apart = make_examples.split_weather(tables)
    assert list(apart) == ["harrowbend_om.csv"]
    for name, rows in apart.items():
        make_examples.write_weather(rows, tmp_path / name)
        assert (tmp_path / name).read_bytes() == (FOLDER / name).read_bytes()


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    folder = tmp_path_factory.mktemp("examples")
    make_examples.main(folder)
    return folder


def _cells(path):
    book = openpyxl.load_workbook(path, read_only=True)
    return {page.title: [[cell.value for cell in row] for row in page.iter_rows()] for page in book.worksheets}


@pytest.mark.parametrize("name", ["harrowbend.xlsx", "tallgrove_us.xlsx"])
def test_workbooks_are_what_the_script_makes(name, made):
    again, committed = _cells(made / name), _cells(FOLDER / name)
    assert list(again) == list(committed)
    for title, rows in committed.items():
        assert again[title] == rows, f"{title}: run station_examples/make_examples.py again"


@pytest.mark.parametrize(("name", "which"), [("harrowbend.xlsx", "basin"), ("tallgrove_us.xlsx", "county")])
def test_workbooks_read_back_as_the_tables_they_were_made_from(name, which, request):
    tables, settings = request.getfixturevalue(which)[:2]
    case, findings, _ = workbook.read(FOLDER / name)
    assert [finding.sentence() for finding in findings] == []
    for key, value in settings.items():
        assert getattr(case.settings, key) == value, key
    for table_name, table in tables.items():
        found = case.table(table_name)
        if table_name == "weather":  # rows of the file beside the workbook come last
            order = ["station_id", "date"]
            found = found.sort_values(order, ignore_index=True)
            table = table.sort_values(order, ignore_index=True)
        if table_name == "soils":
            found = found[found["soil_id"].isin(table["soil_id"])].reset_index(drop=True)
        assert len(found) == len(table), table_name
        for column in table.columns:
            assert (found[column].isna() == table[column].isna()).all(), (table_name, column)
            good = table[column].notna()
            if pd.api.types.is_float_dtype(table[column]):
                assert found.loc[good, column].to_numpy(float) == pytest.approx(
                    table.loc[good, column], rel=1e-9, abs=1e-9
                )
            else:
                assert found.loc[good, column].tolist() == table.loc[good, column].tolist(), (table_name, column)


# --- tables as the package wants them ---


@pytest.mark.parametrize("which", ["basin", "county"])
def test_tables_have_the_registry_columns_and_ranges(which, request):
    for name, table in request.getfixturevalue(which)[0].items():
        must, may = TABLES[name]
        assert set(must) <= set(table.columns) <= set(must) | set(may), name
        for column in table.columns:
            row = quantities().get(column)
            if row is None or row.low is None or not pd.api.types.is_numeric_dtype(table[column]):
                continue
            values = table[column].dropna()
            assert values.between(row.low, row.high).all(), (name, column)


@pytest.mark.parametrize("which", ["basin", "county"])
def test_ids_refer_to_rows_that_exist(which, request):
    found = request.getfixturevalue(which)[0]
    known = {
        "county_id": set(found["counties"]["county_id"]),
        "station_id": set(found["stations"]["station_id"]),
        "stand_id": set(found["stands"]["stand_id"]),
        "rule_id": set(found["irrigation_rules"]["rule_id"]),
        "cover_id": set(stands.packaged("covers")["cover_id"]),
        "soil_id": set(stands.packaged("soils")["soil_id"]) | set(found.get("soils", {}).get("soil_id", [])),
        "water_regime": set(stands.packaged("wetted_fractions")["water_regime"]),
    }
    for name, table in found.items():
        for column in set(known) & set(table.columns) - ({"soil_id"} if name == "soils" else set()):
            assert set(table[column].dropna()) <= known[column], (name, column)
    for name, key in (("stands", "stand_id"), ("counties", "county_id"), ("stations", "station_id")):
        assert found[name][key].is_unique


@pytest.mark.parametrize(
    ("name", "expected"),
    [("harrowbend.xlsx", [("pyranometer-drift", "station DS")]), ("tallgrove_us.xlsx", [])],
)
def test_checks_speak_of_the_drifting_pyranometer_and_nothing_else(name, expected):
    findings = workbook.check(FOLDER / name)
    assert [(finding.code, finding.subject) for finding in findings] == expected


# --- land ---


def _spherical_area_km2(ring):
    """Area on the sphere by the excess of triangles; sides straight on Lambert's equal-area map, in 40 steps."""
    flat = np.stack([np.radians(ring[:, 0]), np.sin(np.radians(ring[:, 1]))], axis=1)
    step = np.linspace(0.0, 1.0, 40, endpoint=False)[:, None, None]
    fine = (flat[:-1] + step * (flat[1:] - flat[:-1])).transpose(1, 0, 2).reshape(-1, 2)
    lon, z = np.vstack([fine, fine[:1]]).T
    xyz = np.stack([np.sqrt(1.0 - z**2) * np.cos(lon), np.sqrt(1.0 - z**2) * np.sin(lon), z], axis=1)
    a, b, c = xyz[0], xyz[1:-1], xyz[2:]
    excess = 2.0 * np.arctan2(np.cross(b, c) @ a, 1.0 + b @ a + (b * c).sum(axis=1) + c @ a)
    return abs(float(excess.sum())) * EARTH_RADIUS_KM**2


def test_areas_are_those_of_the_outlines(basin):
    counties = basin[0]["counties"].set_index("county_id")
    assert len(counties) == len(basin[2]) == 24
    for county_id, shape in basin[2].items():
        area, latitude, longitude = area_and_centroid(shape)
        assert counties.loc[county_id, "area_km2"] == pytest.approx(area, abs=0.005)
        assert area == pytest.approx(_spherical_area_km2(shape.polygons[0][0]), rel=1e-6)
        assert counties.loc[county_id, "latitude_deg"] == pytest.approx(latitude, abs=5e-5)
        assert counties.loc[county_id, "longitude_deg"] == pytest.approx(longitude, abs=5e-5)
    assert counties["area_km2"].between(35.0**2, 53.0**2).all()  # about 45 km across
    assert counties["area_km2"].mean() ** 0.5 == pytest.approx(45.0, abs=2.0)


def test_neighbours_share_their_borders_exactly(basin):
    """What is not shared is one closed outer line, and the counties fill what it encloses."""
    segments: dict[frozenset, int] = {}
    for shape in basin[2].values():
        points = [tuple(point) for point in shape.polygons[0][0]]
        assert points[0] == points[-1]
        for pair in zip(points[:-1], points[1:], strict=True):
            segments[frozenset(pair)] = segments.get(frozenset(pair), 0) + 1
    assert set(segments.values()) == {1, 2}
    outer: dict[tuple, list] = {}
    for pair in (pair for pair, count in segments.items() if count == 1):
        a, b = pair
        outer.setdefault(a, []).append(b)
        outer.setdefault(b, []).append(a)
    assert all(len(near) == 2 for near in outer.values())
    start = next(iter(outer))
    ring, before = [start, outer[start][0]], start
    while ring[-1] != start:
        here = ring[-1]
        ring.append(next(point for point in outer[here] if point != before))
        before = here
    assert len(ring) == len(outer) + 1
    whole = type(next(iter(basin[2].values())))("all", "all", ((np.array(ring),),))
    parts = sum(area_and_centroid(shape)[0] for shape in basin[2].values())
    assert area_and_centroid(whole)[0] == pytest.approx(parts, rel=1e-9)


def test_every_county_has_neighbours_and_no_outline_crosses_itself(basin):
    borders = shared_borders(basin[2])
    near = {name: set() for name in basin[2]}
    for border in borders:
        near[border.first].add(border.second)
        near[border.second].add(border.first)
    assert all(2 <= len(names) <= 7 for names in near.values())
    for shape in basin[2].values():
        a, b = shape.polygons[0][0][:-1], shape.polygons[0][0][1:]

        def side(p, q, r):
            return (q[..., 0] - p[..., 0]) * (r[..., 1] - p[..., 1]) - (q[..., 1] - p[..., 1]) * (r[..., 0] - p[..., 0])

        first = side(a[:, None], b[:, None], a[None]) * side(a[:, None], b[:, None], b[None])
        crossing = (first < 0.0) & (first.T < 0.0)
        assert not crossing.any(), shape.county_id


def test_outlines_read_back(basin):
    found = read(FOLDER / make_examples.OUTLINES_FILE)
    assert list(found) == list(basin[2])
    document = json.loads((FOLDER / make_examples.OUTLINES_FILE).read_text(encoding="utf-8"))
    assert [feature["properties"]["county_id"] for feature in document["features"]] == list(basin[2])
    for county_id, shape in basin[2].items():
        assert np.array_equal(found[county_id].polygons[0][0], shape.polygons[0][0])


# --- farms ---


def test_represented_shares(tables):
    share = (
        tables["stands"].groupby("county_id")["area_km2"].sum() / tables["counties"].set_index("county_id")["area_km2"]
    )
    assert sorted(share[share < 0.70].index) == ["HB05", "HB24"]
    assert share[share >= 0.70].between(0.735, 0.95).all()


def test_stands_show_every_feature(tables):
    stand = tables["stands"]
    assert 85 <= len(stand) <= 95
    assert set(stand["cover_id"]) == {"corn", "soybean", "grass_rotated", "grass_extensive", "hay_averaged", "hay_cut"}
    assert len(set(stand["soil_id"])) == 4
    assert set(stand["tillage"].dropna()) == {"conventional", "reduced", "no-till"}
    assert {"rainfed", "sprinkler", "drip"} < set(stand["water_regime"])
    assert (stand["water_regime"] == "drip").sum() == 1
    assert stand["water_regime"].str.startswith("furrow").sum() >= 3
    assert set(stand["drained"].dropna()) == {True, False}
    assert stand["available_water_mm_m"].notna().sum() >= 10
    assert stand["available_water_mm_m"].isna().sum() >= 5
    assert stand["planting_date_late"].notna().sum() == 8
    assert stand["county_id"].nunique() == 24


def test_planting_dates_are_in_season(tables):
    stand = tables["stands"]
    windows = {"corn": ("2031-04-22", "2031-05-20"), "soybean": ("2031-05-05", "2031-06-05")}
    names = ["planting_date", "planting_date_early", "planting_date_middle", "planting_date_late"]
    for cover, (first, last) in windows.items():
        dates = stand.loc[stand["cover_id"] == cover, names].stack()
        assert dates.between(first, last).all(), dates[~dates.between(first, last)]
    grass = stand[~stand["cover_id"].isin(windows)]
    assert grass[names].isna().all().all()


def test_irrigation_is_on_irrigated_stands_only(tables):
    regime = tables["stands"].set_index("stand_id")["water_regime"]
    ruled = tables["stands"].dropna(subset=["rule_id"])["stand_id"]
    dated = tables["irrigation_events"]["stand_id"]
    assert (regime[ruled] != "rainfed").all()
    assert (regime[dated] != "rainfed").all()
    assert set(regime[regime != "rainfed"].index) == set(ruled) | set(dated)
    events = tables["irrigation_events"]
    assert (events["depth_gross_mm"].notna() ^ events["depth_net_mm"].notna()).all()


# --- weather ---


def test_season_rain(filled):
    rain = pd.DataFrame(filled.values["rain_mm"], index=pd.DatetimeIndex(filled.dates)).mean(axis=1)
    assert rain["2031-04-01":"2031-05-31"].sum() == pytest.approx(230.0, abs=25.0)
    assert rain["2031-06-22":"2031-07-16"].sum() < 15.0
    assert rain["2031-07-24":"2031-07-28"].sum() < 3.0
    assert 530.0 < rain.sum() < 680.0
    assert np.nanmax(filled.values["rain_mm"]) < 90.0


def test_gaps_are_where_they_were_put_and_rain_is_covered(basin, filled):
    days = basin[0]["weather"].set_index(["station_id", "date"])
    assert days.loc["RU", "dew_point_c"].isna().sum() == 7
    assert days.loc["VM", "wind_m_s"].isna().sum() == 9
    assert days.loc["DS", ["t_max_c", "t_min_c"]].isna().sum().tolist() == [2, 2]
    assert days.loc["RU", "rain_mm"].isna().sum() == 5
    case = _case(basin[0], basin[1])
    local, findings = weather.to_counties(case, filled)
    assert findings == []
    assert np.isfinite(local.rain_mm).all()
    beside = [set(pd.Index(case.table("counties")["county_id"])[local.station_index == 3])]
    assert len(beside[0]) >= 2  # both ways are shown: a gauge of the county, and a station within 30 km
    gauges = set(case.table("rain_gauges")["county_id"])
    assert beside[0] & gauges
    assert beside[0] - gauges


def test_morning_observer_reports_the_day_before(basin):
    case = _case(basin[0], basin[1])
    record = weather.arrange(case)
    rows = basin[0]["weather"].set_index(["station_id", "date"]).loc["SW"]
    assert str(rows.index[-1].date()) == "2031-10-01"
    place = record.station_ids.index("SW")
    assert record.values["rain_mm"][10, place] == rows.loc["2031-04-12", "rain_mm"]
    assert record.values["t_min_c"][10, place] == rows.loc["2031-04-11", "t_min_c"]


def test_reference_et_is_that_of_a_humid_interior(filled):
    v = filled.values
    day = solar.day_of_year(filled.dates)[:, None]
    eto = reference.eto_fao56(
        v["t_max_c"], v["t_min_c"], v["vapour_pressure_kpa"], v["rs_mj_m2_d"], v["u2_m_s"],
        filled.elevation_m, filled.latitude_deg, day,
    )  # fmt: skip
    frame = pd.DataFrame(eto, index=pd.DatetimeIndex(filled.dates), columns=filled.station_ids)
    assert frame.loc["2031-07"].mean().between(4.5, 7.0).all()
    assert frame.loc["2031-04"].mean().between(2.0, 4.0).all()
    assert frame.loc["2031-09"].mean().between(2.3, 4.5).all()
    assert 8.0 < frame.max(axis=1).max() < 9.8  # hot, dry and windy
    assert frame.loc[EPISODE].stack().between(4.5, 6.5).all()  # humid, weak wind


def test_clear_days_come_near_the_clear_sky_and_none_passes_the_top_of_the_air(filled):
    day = solar.day_of_year(filled.dates)[:, None]
    ra = solar.extraterrestrial_radiation(filled.latitude_deg, day)
    measured = [place for place, name in enumerate(filled.station_ids) if name not in ("SW", "DS")]
    share = (filled.values["rs_mj_m2_d"] / ra)[:, measured]
    assert share.max() < 0.76
    assert np.percentile(share, 95, axis=0) == pytest.approx(0.70, abs=0.03)
    assert share.min() > 0.05


def test_weather_has_memory_and_reach(filled):
    t_max = filled.values["t_max_c"]
    anomaly = t_max - pd.DataFrame(t_max).rolling(31, center=True, min_periods=10).mean().to_numpy()
    lag = np.corrcoef(anomaly[:-1, 0], anomaly[1:, 0])[0, 1]
    assert 0.25 < lag < 0.85
    across = np.corrcoef(anomaly.T)
    assert across.min() > 0.6
    rain = filled.values["rain_mm"]
    good = np.isfinite(rain).all(axis=1)
    alike = np.corrcoef(rain[good].T)
    others = alike[np.triu_indices(6, 1)].mean()
    assert alike[3, 4] > 0.75 > others > 0.3  # two stations 30 km apart, and all


def test_episode_is_humid_with_weak_wind(tables, filled):
    days = tables["weather"][tables["weather"]["date"].isin(EPISODE)]
    assert days["dew_point_morning_c"].dropna().between(21.0, 23.5).all()
    afternoon_f = from_si(days["dew_point_afternoon_c"].dropna(), "dew_point_afternoon_c", "us")
    assert afternoon_f.min() >= 73.5
    assert 77.0 <= afternoon_f.max() <= 79.5  # mid to upper seventies
    inside = np.isin(filled.dates, EPISODE.to_numpy().astype("datetime64[D]"))
    assert filled.values["u2_m_s"][inside].max() < 2.3
    wind = tables["wind"][tables["wind"]["date"].isin(EPISODE)]
    assert wind.loc[wind["day_part"] == "day", "wind_speed_m_s"].max() < 4.0
    front = tables["wind"][tables["wind"]["date"] == "2031-07-29"]
    assert front["wind_speed_m_s"].min() > 7.0
    depth = tables["mixing_depths"][tables["mixing_depths"]["date"].isin(EPISODE)]["mixing_depth_m"]
    assert depth.between(900.0, 1300.0).all()


# --- what the package makes of it ---


@pytest.fixture(scope="module")
def stand_days(basin):
    return run_case(_case(basin[0], basin[1])).stand


def test_irrigated_corn_uses_500_to_700_mm_and_is_never_short(stand_days):
    corn = stand_days["cover_id"].to_numpy() == "corn"
    irrigated = corn & (stand_days["water_regime"].to_numpy() != "rainfed")
    use = stand_days["et_mm"].sel(date=slice("2031-05-01", "2031-09-30")).sum("date").to_numpy()[irrigated]
    assert len(use) == 9
    assert ((use > 500.0) & (use < 700.0)).all(), use
    assert stand_days["ks"].sel(date=slice("2031-06-22", "2031-07-31")).min("date").to_numpy()[irrigated].min() > 0.9


def test_dry_spell_stresses_soybean_on_sand_more_than_on_loess(stand_days):
    spell = stand_days["ks"].sel(date=slice("2031-06-22", "2031-07-20")).min("date").to_numpy()
    soybean = (stand_days["cover_id"].to_numpy() == "soybean") & (stand_days["water_regime"].to_numpy() == "rainfed")
    stand = stand_days["kind"].to_numpy() == "stand"
    on = {
        soil: spell[soybean & stand & (stand_days["soil_id"].to_numpy() == soil)] for soil in ("loamy_sand", "hb_loess")
    }
    assert on["loamy_sand"].max() < 0.5
    assert on["hb_loess"].mean() > 0.75


# --- profiles ---


def _soundings(tables):
    return [group for _, group in tables["profiles"].groupby(["site_id", "time"])]


def test_profiles_are_physical(tables):
    assert len(_soundings(tables)) == 18
    for rows in _soundings(tables):
        z, t, td = (rows[name].to_numpy() for name in ("height_m", "temperature_c", "dew_point_c"))
        p = rows["pressure_kpa"].to_numpy()
        assert 15 <= len(rows) <= 25
        assert z[0] < 10.0
        assert z[-1] > 4800.0
        assert (np.diff(z) > 0.0).all()
        assert (td <= t).all()
        assert (np.diff(td) <= 0.0).all()
        theta = (t + humidity.FREEZING_K) * (p[0] / p) ** humidity.KAPPA
        assert (np.diff(theta) > -0.35).all()  # stable within what a tenth of a degree and a balloon's noise allow
        assert theta[4] - theta[0] > 2.0  # the night's stable layer
        q = humidity.specific_humidity(humidity.saturation_vapour_pressure(td), p)
        middle = ((t + humidity.FREEZING_K) * (1.0 + 0.61 * q))[:-1] * 0.5 + (
            (t + humidity.FREEZING_K) * (1.0 + 0.61 * q)
        )[1:] * 0.5
        rise = humidity.GAS_CONSTANT_DRY * middle / humidity.GRAVITY * np.log(p[:-1] / p[1:])
        assert rise == pytest.approx(np.diff(z), abs=6.0)  # hydrostatic, to a hundredth of a kilopascal
        assert p[0] == pytest.approx(humidity.pressure_from_elevation(rows["elevation_m"].iloc[0]), abs=0.1)


def test_profiles_agree_with_the_stations_beside_them(tables):
    days = tables["weather"].set_index(["station_id", "date"])
    beside = {"west": "QM", "east": "VM"}
    for rows in _soundings(tables):
        date = rows["time"].iloc[0].normalize()
        at = days.loc[(beside[rows["site_id"].iloc[0]], date)]
        assert rows["temperature_c"].iloc[0] == pytest.approx(at["t_min_c"] + 0.5, abs=0.6)
        assert rows["dew_point_c"].iloc[0] == pytest.approx(at["dew_point_morning_c"], abs=0.2)


# --- the county in US units ---


def test_county_numbers_are_round_in_us_units(county):
    days = county[0]["weather"]
    for name, digits in (("t_max_c", 0), ("t_min_c", 0), ("rs_mj_m2_d", 0), ("wind_m_s", 1), ("rain_mm", 2)):
        shown = from_si(days[name].dropna(), name, "us")
        assert shown == pytest.approx(shown.round(digits), abs=1e-9), name
    acres = from_si(county[0]["stands"]["area_km2"], "area_km2", "us")
    assert acres == pytest.approx(acres.round(0), abs=1e-6)
    assert len(county[0]["stands"]) == 6
    share = county[0]["stands"]["area_km2"].sum() / county[0]["counties"]["area_km2"].sum()
    assert 0.70 < share < 0.95
