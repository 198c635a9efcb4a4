"""Figures show what the tables hold: values, hatching and dashes are read back from what was drawn."""

import dataclasses
import importlib.util
import subprocess
import sys
import xml.etree.ElementTree
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from matplotlib.cbook import is_math_text
from matplotlib.colors import to_rgb
from matplotlib.text import Text

from etflux.brief import style
from etflux.brief.figures import FIGURES, QUANTITIES, draw, save
from etflux.brief.quantities import county_values, days_of, shown_of
from etflux.crops import Stage
from etflux.findings import CannotWrite, ProblemsFound
from etflux.outlines import Outline
from etflux.results.summary import region_contribution
from etflux.variables import from_si

_spec = importlib.util.spec_from_file_location(
    "made_up_run", Path(__file__).parents[1] / "results" / "made_up_run.py"
)  # fmt: skip
made_up_run = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(made_up_run)

HOSTILE = '<b>$x^{2}$ & $\\frac{1}$ "\\alpha" \u90e1\n'
LAST = np.datetime64("2031-05-10")


def _square(name, west, south):
    ring = np.array([[west, south], [west + 1, south], [west + 1, south + 1], [west, south + 1], [west, south]], float)
    return Outline(name, f"Outline {name}", ((ring,),))


@pytest.fixture(scope="module")
def run():
    """Six counties over forty days, five of which have the air, with outlines, stations, wind and a morning."""
    made = made_up_run.make(counties=6, days=40)
    ids = made.county["county_id"].to_numpy()
    county = made.county.copy()
    column, row = np.arange(6) % 3, np.arange(6) // 3
    county["longitude_deg"] = ("county_id", -93.5 + column)
    county["latitude_deg"] = ("county_id", 41.5 + row)
    days, there = county.sizes["date"], np.isfinite(county["contribution_c"])
    shape = (days, 6, 3)
    for name, values in (
        ("mixing_depth_m", np.broadcast_to([900.0, 1200.0, 1300.0], shape)),
        ("theta_mixed_c", np.broadcast_to([28.0, 31.0, 32.0], shape)),
        ("humidity_mixed_g_kg", np.broadcast_to([15.0, 16.0, 16.5], shape)),
        ("contribution_g_kg", np.broadcast_to([1.0, 2.0, 2.5], shape)),
    ):
        county[f"hourly_{name}"] = (
            ("date", "county_id", "hour"),
            np.where(there.to_numpy()[..., None], values, np.nan),
        )
    county["wind_east_m_s"] = (("date", "county_id"), np.tile(np.arange(6.0), (days, 1)))
    county["wind_north_m_s"] = (("date", "county_id"), np.full((days, 6), 3.0))
    county["rise_near_ground_c"] = (("date", "county_id"), np.where(there, 1.0, np.nan))
    county["estimate_error_c"] = (("date", "county_id"), np.where(there, 0.5 + 0.0 * there, np.nan))
    county["theta_without_crops_c"], county["depth_without_crops_m"] = 0.0 * there + 33.0, 0.0 * there + 1400.0
    layers = np.arange(30)
    county["profile_date"] = ("profile_date", county["date"].to_numpy()[-1:])
    for name, values in (
        ("height_m", 50.0 + 100.0 * layers), ("theta_c", 24.0 + 0.3 * layers),
        ("humidity_g_kg", 14.0 - 0.2 * layers), ("humidity_without_g_kg", 13.0 - 0.2 * layers),
    ):  # fmt: skip
        county[f"profile_{name}"] = (("profile_date", "county_id", "layer"), np.tile(values, (1, 6, 1)))
    station = made.station.assign_coords(
        latitude_deg=("station_id", [41.2, 42.5, 41.6]), longitude_deg=("station_id", [-93.7, -91.1, np.nan])
    )
    outlines = {str(name): _square(str(name), -94.0 + column[n], 41.0 + row[n]) for n, name in enumerate(ids)}
    return dataclasses.replace(made, county=county, station=station, outlines=outlines)


def _named(figure, gid):
    """Artists of a figure that carry a name, in the order drawn."""
    return [artist for artist in figure.findobj() if artist.get_gid() == gid]


def _words(figure):
    """Every text that is seen, with what was escaped for the drawing taken back."""
    return [
        text.get_text().replace(r"\$", "$").replace("\N{NO-BREAK SPACE}", " ")
        for text in figure.findobj(Text)
        if text.get_visible()
    ]


# --- maps ---


@pytest.mark.parametrize(("show", "system"), [("eto_mm", "si"), ("eto_mm", "us"), ("dew_point_mixed_c", "us")])
def test_a_map_holds_the_values_of_the_table(run, show, system):
    figure = draw(run, show, units=system)
    (counties,) = _named(figure, "counties")
    table = run.table("county_daily")
    wanted = table[table["date"] == pd.Timestamp(LAST)][show].to_numpy()
    np.testing.assert_allclose(counties.get_array(), from_si(wanted, show, system), rtol=1e-12)
    shown = {text.get_text() for text in _named(figure, "value")}
    decimals = shown_of(show).decimals(system)
    assert shown == {f"{value:,.{decimals}f}" for value in from_si(wanted, show, system)}


def test_a_county_is_drawn_where_its_outline_is_in_the_colour_of_its_value(run):
    figure = draw(run, "eto_mm")
    (counties,) = _named(figure, "counties")
    for path, outline in zip(counties.get_paths(), run.outlines.values(), strict=True):
        np.testing.assert_array_equal(path.vertices[:5], outline.polygons[0][0])
    counties.update_scalarmappable()
    wanted = counties.cmap(counties.norm(counties.get_array()))
    np.testing.assert_allclose(counties.get_facecolors(), wanted)


def test_rates_are_summed_over_days_and_fluxes_averaged(run):
    first, last = "2031-05-06", "2031-05-10"
    days = run.county.sel(date=slice(first, last))
    rain = draw(run, "rain_mm", first, until=last, units="us")
    np.testing.assert_allclose(_named(rain, "counties")[0].get_array(), days["rain_mm"].sum("date") / 25.4)
    flux = draw(run, "le_county_w_m2", first, until=last)
    np.testing.assert_allclose(_named(flux, "counties")[0].get_array(), days["le_county_w_m2"].mean("date"))
    eto = draw(run, "eto_mm", first, until=last)
    assert "Reference ET (mm)" in _words(eto)
    assert "Reference ET (mm/day)" not in _words(eto)
    assert any("6 to 10 May 2031" in words for words in _words(eto))
    assert any("sum of 5 days" in words for words in _words(eto))
    assert any("mean of 5 days" in words for words in _words(flux))


def test_a_sum_with_a_missing_day_has_no_value_and_a_mean_says_so(run):
    county = run.county.copy(deep=True)
    county["eto_mm"][-2, 1] = np.nan
    county["le_county_w_m2"][-2, 1] = np.nan
    holed = dataclasses.replace(run, county=county)
    days = days_of(holed, "2031-05-08", "2031-05-10")
    values, gaps = county_values(holed, shown_of("eto_mm"), days)
    assert np.isnan(values[1])
    assert np.isfinite(np.delete(values, 1)).all()
    values, gaps = county_values(holed, shown_of("le_county_w_m2"), days)
    assert gaps.tolist() == [False, True, False, False, False, False]
    assert values[1] == pytest.approx(float(county["le_county_w_m2"][[-3, -1], 1].mean()))
    figure = draw(holed, "le_county_w_m2", "2031-05-08", until="2031-05-10")
    (gap,) = _named(figure, "gaps")
    np.testing.assert_array_equal(gap.get_paths()[0].vertices[0], [-93.0, 41.0])
    assert "some days have no value: mean of the others" in " ".join(_words(figure)).replace("\n", " ")


def test_the_right_counties_are_hatched(run):
    """The county in the middle has no value, the last one no stands: under the asked-for share."""
    figure = draw(run, "contribution_c")
    missing, unranked = _named(figure, "missing"), _named(figure, "unranked")
    today = run.county.sel(date=LAST)
    blank = np.isnan(today["contribution_c"].to_numpy())
    low = today["represented_pct"].to_numpy() < run.settings["represented_least_pct"]
    assert blank.sum() == 1
    assert low.tolist() == [False] * 5 + [True]
    corners = np.array([outline.polygons[0][0][0] for outline in run.outlines.values()])
    for drawn, here in ((missing, blank), (unranked, low & ~blank)):
        assert all(shapes.get_hatch() for shapes in drawn)
        for shapes in drawn:  # the large map and both ends of the range
            found = np.array([path.vertices[0] for path in shapes.get_paths()])
            np.testing.assert_array_equal(found, corners[here])
    key = " ".join(_words(figure)).replace("\n", " ")
    assert "under 70 % of the county represented: a range, not ranked" in key
    assert "no value: no valid mixing depth: the mixed air would be saturated" in key


def test_reference_et_needs_no_rank(run):
    assert not _named(draw(run, "eto_mm"), "unranked")


def test_the_share_that_ranks_is_the_runs_own(run):
    lenient = dataclasses.replace(run, settings={**run.settings, "represented_least_pct": 0.0})
    assert not _named(draw(lenient, "contribution_c"), "unranked")


def test_the_total_comes_with_both_ends_of_its_range(run):
    figure = draw(run, "contribution_c", units="us")
    drawn = [shapes.get_array() for shapes in _named(figure, "counties")]
    today = run.county.sel(date=LAST)
    for values, name in zip(drawn, ("contribution_c", "contribution_low_c", "contribution_high_c"), strict=True):
        wanted = today[name].to_numpy() * 1.8  # a difference: no 32
        np.testing.assert_allclose(values, wanted[np.isfinite(wanted)])
    assert len(_named(draw(run, "contribution_carried_c"), "counties")) == 1


def test_counties_without_an_outline_are_dots_of_their_area(run):
    bare = dataclasses.replace(run, outlines={})
    (counties,) = _named(draw(bare, "eto_mm"), "counties")
    size = [np.ptp(path.vertices[:, 1]) / 2.0 * 111.195 for path in counties.get_paths()]  # km in a degree
    np.testing.assert_allclose(np.pi * np.square(size), 0.49 * run.county["area_km2"], rtol=1e-3)
    places = [path.vertices.mean(axis=0) for path in counties.get_paths()]
    np.testing.assert_allclose(np.array(places)[:, 1], run.county["latitude_deg"], atol=0.02)
    some = dataclasses.replace(run, outlines=dict(list(run.outlines.items())[:4]))
    assert [len(shapes.get_paths()) for shapes in _named(draw(some, "eto_mm"), "counties")] == [4, 2]


def test_a_county_over_the_date_line_stays_in_one_piece(run):
    """Squares at 179 to 180 and -180 to -179 degrees are neighbours."""
    ids = run.county["county_id"].to_numpy().astype(str)
    outlines = {name: _square(name, -180.0 if n % 2 else 179.0, 51.0) for n, name in enumerate(ids)}
    county = run.county.assign_coords(longitude_deg=("county_id", [-179.5 if n % 2 else 179.5 for n in range(6)]))
    figure = draw(dataclasses.replace(run, county=county, outlines=outlines), "eto_mm")
    west, east = figure.axes[0].get_xlim()
    assert east - west == pytest.approx(2.0, rel=0.05)


def test_a_county_that_is_nowhere_is_said_to_be(run):
    county = run.county.assign_coords(longitude_deg=("county_id", [np.nan, *[-93.0] * 5]))
    figure = draw(dataclasses.replace(run, county=county, outlines={}), "eto_mm")
    assert len(_named(figure, "counties")[0].get_paths()) == 5
    assert "neither outline nor place: 1 of 6 counties" in "\n".join(_words(figure))
    nowhere = run.county.assign_coords(longitude_deg=("county_id", [np.nan] * 6))
    assert not _named(draw(dataclasses.replace(run, county=nowhere, outlines={}), "eto_mm"), "counties")


def test_hatching_shows_on_dark_counties_too(run):
    county = run.county.copy(deep=True)
    for values, stripes in (([1.0, 1.5, 2.0, 2.5, 3.0, 5.0], 1.0), ([5.0, 4.0, 3.0, 2.5, 2.0, 1.0], 0.2)):
        county["contribution_carried_c"][-1] = values
        (unranked,) = _named(draw(dataclasses.replace(run, county=county), "contribution_carried_c"), "unranked")
        assert style.luminance(unranked.get_edgecolor()[0]) == pytest.approx(stripes, abs=0.1)


def test_a_county_can_be_pointed_out(run):
    (shape,) = _named(draw(run, "eto_mm", county="99003"), "pointed out")
    np.testing.assert_array_equal(shape.get_paths()[0].vertices[0], [-93.0, 41.0])


def test_stations_and_wind_are_where_they_are(run):
    figure = draw(run, "eto_mm", units="us")
    (stations,) = _named(figure, "stations")
    np.testing.assert_array_equal(stations.get_xydata(), [[-93.7, 41.2], [-91.1, 42.5]])
    (wind,) = _named(figure, "wind")
    np.testing.assert_allclose(wind.U, np.arange(6.0))
    np.testing.assert_allclose(wind.V, 3.0)
    fastest = from_si(np.hypot(5.0, 3.0), "wind_east_m_s", "us").item()
    assert f"wind by day; the longest arrow is {fastest:.1f} kt" in " ".join(_words(figure)).replace("\n", " ")


def test_no_label_covers_a_station(run):
    station = run.station.assign_coords(
        latitude_deg=("station_id", [41.5, 41.52, 42.45]), longitude_deg=("station_id", [-93.5, -92.5, -91.5])
    )
    figure = draw(dataclasses.replace(run, station=station), "eto_mm")
    renderer = figure.canvas.get_renderer()
    axes = figure.axes[0]
    places = axes.transData.transform(np.column_stack([station["longitude_deg"], station["latitude_deg"]]))
    boxes = [text.get_window_extent(renderer) for text in _named(figure, "value") + _named(figure, "name")]
    assert boxes
    assert not any(box.contains(*place) for box in boxes for place in places)


def test_water_use_by_cover_is_a_map_each_and_one_alone(run):
    figure = draw(run, "et_mm")
    titles = [axes.get_title(loc="left") for axes in figure.axes[:4]]
    assert sorted(titles) == ["corn", "grass", "rest", "soybean"]
    stand = run.stand.sel(date=LAST)
    corn = (stand["tag"] == "corn").to_numpy()
    area, et = stand["area_km2"].to_numpy()[corn], stand["et_mm"].to_numpy()[corn]
    of = stand["county_id"].to_numpy()[corn]
    wanted = [np.average(et[of == name], weights=area[of == name]) for name in np.unique(of)]
    (alone,) = _named(draw(run, "et_mm", cover="corn"), "counties")
    np.testing.assert_allclose(alone.get_array(), wanted)
    np.testing.assert_allclose(_named(figure, "counties")[titles.index("corn")].get_array(), wanted)


def test_stress_is_shown_only_between_ten_percent_cover_and_maturity(run):
    stand = run.stand.copy(deep=True)
    stand["stage_code"][:] = int(Stage.INITIAL)
    early = dataclasses.replace(run, stand=stand)
    assert not _named(draw(early, "ks"), "counties")
    assert _named(draw(early, "ks"), "missing")
    assert not np.isfinite(_named(draw(early, "season"), "stress begins")[0].get_ydata()).any()


def test_a_given_scale_is_kept_and_days_can_be_compared(run):
    for day in ("2031-05-01", "2031-05-09"):
        (counties,) = _named(draw(run, "eto_mm", day, scale=(0.0, 12.0)), "counties")
        assert (counties.norm.boundaries[0], counties.norm.boundaries[-1]) == (0.0, 12.0)


def test_steps_are_no_finer_than_what_is_printed(run):
    county = run.county.copy(deep=True)
    county["contribution_carried_c"][-1] = np.linspace(0.201, 0.249, 6)
    (counties,) = _named(draw(dataclasses.replace(run, county=county), "contribution_carried_c"), "counties")
    assert np.diff(counties.norm.boundaries).min() >= 0.0999


# --- a season ---


def _irrigated(run):
    units = run.stand["unit_id"].to_numpy()
    return str(units[(run.stand["irrigation_mm"].sum("date") > 0.0).to_numpy()][0])


@pytest.fixture(scope="module")
def season():
    made = made_up_run.make(counties=3, days=170)
    return dataclasses.replace(made, stand=made.stand.assign(raw_mm=0.4 * made.stand["taw_mm"]))


@pytest.mark.parametrize("system", ["si", "us"])
def test_the_dashed_line_is_what_is_held_where_stress_begins(season, system):
    unit = season.stand.sel(unit_id=_irrigated(season))
    figure = draw(season, "season", stand=_irrigated(season), units=system)
    (dashed,) = _named(figure, "stress begins")
    grows = (unit["stage_code"] > Stage.INITIAL) & (unit["stage_code"] < Stage.MATURE)
    begins = from_si((unit["taw_mm"] - unit["raw_mm"]).where(grows), "taw_mm", system)
    np.testing.assert_allclose(dashed.get_ydata(), begins)
    assert dashed.is_dashed()
    assert 0 < int(grows.sum()) < len(grows)
    (held,) = _named(figure, "water held")
    edge = held.get_paths()[0].vertices
    wanted = from_si(np.maximum(unit["taw_mm"] - unit["dr_mm"], 0.0), "dr_mm", system)
    n = len(wanted)
    np.testing.assert_allclose(edge[1 : n + 1, 1], 0.0)  # filled from zero
    np.testing.assert_allclose(edge[n + 2 : 2 * n + 2, 1][::-1], wanted)
    assert held.axes.get_ylim()[0] == 0.0
    assert f"Water held ({'mm' if system == 'si' else 'in'})" in _words(figure)


def test_a_season_shows_the_tables_coefficients_water_and_stages(season):
    stand = _irrigated(season)
    unit = season.stand.sel(unit_id=stand)
    figure = draw(season, "season", stand=stand)
    for name in ("kcb", "ke"):
        np.testing.assert_allclose(_named(figure, name)[0].get_ydata(), unit[name])
    grows = (unit["stage_code"] > Stage.INITIAL) & (unit["stage_code"] < Stage.MATURE)
    np.testing.assert_allclose(_named(figure, "ks")[0].get_ydata(), unit["ks"].where(grows))
    for gid, name in (("rain", "rain_stand_mm"), ("irrigation", "irrigation_mm")):
        np.testing.assert_allclose([bar.get_height() for bar in _named(figure, gid)], unit[name])
    assert unit["irrigation_mm"].sum() > 0.0
    changes = int((np.diff(unit["stage_code"]) != 0).sum())
    assert len(_named(figure, "stage")) == 3 * (changes + 1)
    assert {"start", "growing", "full cover"} <= {text.get_text() for text in _named(figure, "stage name")}


def test_a_stand_in_thirds_shows_the_middle_one_and_says_so(season):
    stand = str(season.stand["stand_id"].to_numpy()[(season.stand["part"] == "late").to_numpy()][0])
    figure = draw(season, "season", stand=stand)
    assert any("middle third by planting date" in words for words in _words(figure))


# --- the air ---


@pytest.mark.parametrize("county", [None, "99003"])
def test_the_episode_stacks_to_the_tables_contribution(run, county):
    figure = draw(run, "episode", county=county, units="us")
    days = run.dates[-5:]
    if county is None:
        wanted = region_contribution(run, days).sum(axis=1).to_numpy()
    else:
        wanted = run.county["contribution_c"].sel(date=days, county_id=county).to_numpy()
    for axes in figure.axes:
        heights = np.sum([[bar.get_height() for bar in bars] for bars in axes.containers], axis=0)
        np.testing.assert_allclose(heights, 1.8 * wanted)
    rows = run.contribution[run.contribution["cover"].isin(["corn"]) & (run.contribution["county_id"] == "99003")]
    if county:
        corn = figure.axes[0].containers[0]
        assert corn.get_label() == "corn"
        np.testing.assert_allclose(
            [bar.get_height() for bar in corn], 1.8 * rows.groupby("date")["contribution_c"].sum().to_numpy()
        )


def test_a_day_of_an_episode_without_a_value_is_hatched_and_not_zero(run):
    county = str(run.county["county_id"].to_numpy()[3])
    assert np.isnan(run.county["contribution_c"].sel(date=LAST, county_id=county))
    figure = draw(run, "episode", county=county)
    missing = _named(figure, "missing")
    assert len(missing) == 2
    assert all(patch.get_hatch() for patch in missing)
    assert missing[0].get_x() == pytest.approx(4 - 0.36)
    assert _words(figure).count("no value") == 2


@pytest.mark.parametrize("system", ["si", "us"])
def test_air_by_height_is_on_straight_axes_with_and_without_crops(run, system):
    figure = draw(run, "profile", county="99001", units=system)
    theta, humidity = figure.axes
    for axes in (theta, humidity):
        assert axes.get_xscale() == axes.get_yscale() == "linear"
    assert f"Height above the ground ({'m' if system == 'si' else 'ft'})" in _words(figure)
    for hour, q, added, depth in ((12, 15.0, 1.0, 900.0), (15, 16.0, 2.0, 1200.0), (18, 16.5, 2.5, 1300.0)):
        (mixed,) = [line for line in _named(figure, f"mixed {hour}") if line.axes is humidity]
        np.testing.assert_allclose(mixed.get_xdata(), q)
        np.testing.assert_allclose(mixed.get_ydata(), [0.0, from_si(depth, "height_m", system)])
        (without,) = _named(figure, f"without {hour}")
        np.testing.assert_allclose(without.get_xdata(), q - added)
        assert without.is_dashed()
    (world,) = _named(figure, "world 15")
    np.testing.assert_allclose(world.get_xdata(), 33.0 if system == "si" else 91.4)
    morning = _named(figure, "morning")[0]
    layers = run.air_profiles[run.air_profiles["county_id"] == "99001"]
    np.testing.assert_allclose(morning.get_xdata(), from_si(layers["theta_c"], "theta_mixed_c", system))
    np.testing.assert_allclose(morning.get_ydata(), from_si(layers["height_m"], "height_m", system))


def test_a_day_without_air_says_so(run):
    assert any("no air by height" in words for words in _words(draw(run, "profile", "2031-04-10")))


def test_the_estimate_is_held_against_the_observation(run):
    figure = draw(run, "dew_point", "2031-05-06", until="2031-05-10", units="us")
    (square, difference) = figure.axes
    (points,) = [line for line in _named(figure, "all") if line.axes is square]
    days = run.county.sel(date=slice("2031-05-06", "2031-05-10"))
    estimate = (days["dew_point_mixed_c"] + 1.0).to_numpy()
    there = np.isfinite(days["estimate_error_c"].to_numpy())
    np.testing.assert_allclose(points.get_xdata(), from_si(estimate[there] - 0.5, "dew_point_c", "us"))
    np.testing.assert_allclose(points.get_ydata(), from_si(estimate[there], "dew_point_c", "us"))
    assert square.get_xlim() == square.get_ylim()
    (errors,) = [line for line in _named(figure, "all") if line.axes is difference]
    np.testing.assert_allclose(errors.get_ydata(), 0.9)  # 0.5 K of difference
    assert any("mean error +0.9 °F" in words.replace("\n", " ") for words in _words(figure))


@pytest.mark.parametrize("system", ["si", "us"])
def test_counties_by_volume_are_sorted_and_sum_to_the_table(run, system):
    figure = draw(run, "volume", units=system)
    volume = run.county["water_volume_hm3"].sel(date=LAST).to_numpy()
    order = np.argsort(-volume)
    parts = figure.axes[0].containers
    totals = np.sum([[bar.get_width() for bar in bars] for bars in parts], axis=0)
    np.testing.assert_allclose(totals, from_si(volume[order], "water_volume_hm3", system))
    names = run.names_by_id("county")
    ids = run.county["county_id"].to_numpy()
    assert [text.get_text() for text in _named(figure, "name")] == [names[ids[number]] for number in order]


# --- everything ---


@pytest.mark.parametrize("show", list(QUANTITIES))
def test_everything_listed_can_be_drawn(run, show):
    figure = draw(run, show, size="page")
    assert "Planning estimate, not a warning product" in "\n".join(_words(figure))
    assert QUANTITIES[show].figure in FIGURES
    assert any(axes.get_visible() for axes in figure.axes)


@pytest.mark.parametrize("show", ["contribution_c", "eto_mm", "season", "episode", "profile", "dew_point", "volume"])
@pytest.mark.parametrize("size", ["slide", "page"])
def test_nothing_is_cut_off_or_too_small_to_read(run, show, size):
    figure = draw(run, show, size=size)
    renderer = figure.canvas.get_renderer()
    figure.draw(renderer)
    box = figure.get_tightbbox(renderer)  # of all that is seen, in inches
    wide, high = figure.get_size_inches()
    assert min(box.x0, box.y0) > 0.0
    assert box.x1 < wide
    assert box.y1 < high
    least = 9.0 if size == "slide" else 5.5  # points
    seen = [text for text in figure.findobj(Text) if text.get_visible() and text.get_text().strip()]
    assert min(text.get_fontsize() for text in seen) >= least


@pytest.mark.parametrize("show", ["contribution_c", "volume", "episode", "season", "profile", "dew_point"])
def test_hostile_names_are_words_and_nothing_else(run, show, tmp_path):
    names = run.names.copy()
    names["name"] = HOSTILE
    hostile = dataclasses.replace(run, names=names, settings={**run.settings, "title": HOSTILE})
    figure = draw(hostile, show, county=None if show == "season" else "99001")
    assert not any(is_math_text(text.get_text()) for text in figure.findobj(Text))
    path = save(figure, tmp_path / "figure.svg")  # mathematics would raise here: a half fraction is none
    root = xml.etree.ElementTree.parse(path).getroot()
    assert root.tag.endswith("svg")
    assert "<b>$x^{2}$" in "\n".join(_words(figure))


@pytest.mark.parametrize("name", style.PALETTES)
def test_palettes_darken_steadily_and_keep_apart_in_grey(name):
    colours = style.sequential(name)(np.linspace(0.0, 1.0, 64))
    light = np.array([style.luminance(colour) for colour in colours])
    assert (np.diff(light) < 0.0).all()
    # CIE 1976 lightness of seven steps: 6 is told apart side by side (common practice, no source)
    steps = np.array([style.luminance(c) for c in style.sequential(name)(np.linspace(0.0, 1.0, 7))])
    lightness = 116.0 * np.cbrt(np.maximum(steps, 0.00886)) - 16.0
    assert np.diff(lightness).max() < -6.0


@pytest.mark.parametrize("name", style.PALETTES)
def test_palettes_keep_their_order_for_people_without_red_or_green_cones(name):
    """Projections of linear RGB from Viénot, Brettel & Mollon (1999), Color Res. Appl. 24, 243-252; from memory."""
    rgb = np.array([to_rgb(colour[:3]) for colour in style.sequential(name)(np.linspace(0.0, 1.0, 32))])
    linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    for red_and_green in ((0.11238, 0.88762, 0.0), (0.29275, 0.70725, 0.0)):
        alike = linear @ red_and_green
        seen = np.column_stack([alike, alike, linear[:, 2]])
        assert (np.diff(seen @ (0.2126, 0.7152, 0.0722)) < 0.0).all()


def test_text_on_a_county_can_be_read(run):
    """Contrast of 3 to 1 or more, the least of large text (WCAG 2.1, success criterion 1.4.3)."""
    for name in style.PALETTES:
        for colour in style.sequential(name)(np.linspace(0.0, 1.0, 40)):
            low, high = sorted([style.luminance(colour), style.luminance(style.ink_on(colour))])
            assert (high + 0.05) / (low + 0.05) >= 3.0


# --- files ---


@pytest.mark.parametrize(("size", "dots"), [("slide", (1920, 1080)), ("page", (1400, None))])
def test_sizes_of_png(run, size, dots, tmp_path):
    path = save(draw(run, "eto_mm", size=size), tmp_path / "map.png")
    head = path.read_bytes()[:24]
    assert head[:8] == b"\x89PNG\r\n\x1a\n"
    wide, high = int.from_bytes(head[16:20], "big"), int.from_bytes(head[20:24], "big")
    assert wide == dots[0]
    assert dots[1] is None or high == dots[1]
    assert high < 1.5 * wide  # fits an upright page


def test_sizes_of_svg(run, tmp_path):
    for size, wide in (("slide", 960.0), ("page", 504.0)):  # points
        path = save(draw(run, "eto_mm", size=size), tmp_path / f"{size}.svg")
        root = xml.etree.ElementTree.parse(path).getroot()
        assert float(root.get("width").removesuffix("pt")) == pytest.approx(wide, abs=0.5)
        assert "Reference ET, 10 May 2031" in path.read_text(encoding="utf-8")  # its title, for who cannot see it


def test_a_file_is_written_whole_or_not_at_all(run, tmp_path, monkeypatch):
    figure = draw(run, "eto_mm")
    path = tmp_path / "map.png"
    path.write_bytes(b"before")
    monkeypatch.setattr(figure, "savefig", lambda *args, **kwargs: (_ for _ in ()).throw(OSError(28, "no room")))
    with pytest.raises(CannotWrite, match="no room"):
        save(figure, path)
    assert path.read_bytes() == b"before"
    assert [file.name for file in tmp_path.iterdir()] == ["map.png"]


def test_only_svg_and_png_are_written(run, tmp_path):
    with pytest.raises(CannotWrite, match=r"\.svg or \.png"):
        save(draw(run, "eto_mm"), tmp_path / "map.pdf")
    with pytest.raises(CannotWrite, match="nowhere"):
        save(draw(run, "eto_mm"), tmp_path / "nowhere" / "map.png")


def test_nothing_global_is_touched():
    """Neither pyplot nor matplotlib's settings; importing the figures does not even load matplotlib."""
    code = f"""
import sys
sys.path.insert(0, {str(Path(made_up_run.__file__).parent)!r})
import etflux.brief.figures, etflux.brief.maps, etflux.brief.season, etflux.brief.episode, etflux.brief.air
assert "matplotlib" not in sys.modules
import made_up_run, matplotlib
before = matplotlib.rcParams.copy()
made = made_up_run.make(counties=3, days=40)
for show in ("contribution_c", "season", "episode", "volume"):
    etflux.brief.figures.draw(made, show)
assert dict.__eq__(matplotlib.rcParams, before)
assert "matplotlib.pyplot" not in sys.modules
"""
    subprocess.run([sys.executable, "-c", code], check=True)


# --- what is asked for wrongly ---


@pytest.mark.parametrize(
    ("asked", "words"),
    [
        ({"show": "eto"}, "eto: is nothing that a figure can show.*nearest known is 'eto_mm'"),
        ({"show": "eto_mm", "on": "2032-05-01"}, "2032-05-01: is not a day of these results.*2031-04-01 to 2031-05-10"),
        ({"show": "eto_mm", "on": "soon"}, "soon: is not a day"),
        ({"show": "eto_mm", "on": "2031-05-02", "until": "2031-05-01"}, "must not be before the first day"),
        ({"show": "season", "stand": "S1-2"}, "S1-2: is not an id.*nearest known is 'S01-2'"),
        ({"show": "episode", "county": "99002"}, "99002: is not an id.*nearest known is '9900"),
        ({"show": "profile", "county": "99002"}, "99002: is not an id"),
        ({"show": "dew_point", "county": "99002"}, "99002: is not an id"),
        ({"show": "volume", "county": "99002"}, "99002: is not an id"),
        ({"show": "eto_mm", "county": "99002"}, "99002: is not an id"),
        ({"show": "et_mm", "cover": "korn"}, "korn: is not an id.*nearest known is 'corn'"),
        ({"show": "le_by_tag_w_m2", "cover": "korn"}, "korn: is not an id.*nearest known is 'corn'"),
        ({"show": "rain_mm", "cover": "corn"}, "cannot be shown for one cover"),
    ],
)
def test_wrong_questions_are_answered_with_the_nearest_right_one(run, asked, words):
    with pytest.raises(ProblemsFound, match=words):
        draw(run, **asked)


def test_wrong_sizes_and_units(run):
    with pytest.raises(ValueError, match="A4"):
        draw(run, "eto_mm", size="A4")
    with pytest.raises(ValueError, match="imperial"):
        draw(run, "eto_mm", units="imperial")


def test_units_follow_the_runs_setting(run):
    american = dataclasses.replace(run, settings={**run.settings, "units": "us"})
    assert "Reference ET (in)" in _words(draw(american, "eto_mm"))
    assert "Reference ET (mm)" in _words(draw(american, "eto_mm", units="si"))


# --- the command ---


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    from etflux.results import write_folder

    place = tmp_path_factory.mktemp("results") / "basin-etflux"
    write_folder(made_up_run.make(counties=3, days=40), place)
    return place


def _command(*arguments):
    from etflux.cli import main

    with pytest.raises(SystemExit) as left:
        main(["draw", *map(str, arguments)])
    return left.value.code


def test_the_command_draws_a_file(folder, tmp_path, monkeypatch, capsys):
    path = tmp_path / "map.svg"
    assert _command(folder, "--show", "rain_mm", "--on", "2031-05-01", "--until", "2031-05-03", "--units", "us",
                    "--size", "page", "-o", path) == 0  # fmt: skip
    assert xml.etree.ElementTree.parse(path).getroot().get("width") == "504pt"
    monkeypatch.chdir(tmp_path)
    assert _command(folder, "--show", "season", "--stand", "S01-2", "--on", "2031-05-01") == 0
    assert (tmp_path / "season-2031-05-01.png").is_file()
    assert "season-2031-05-01.png" in capsys.readouterr().out


def test_the_command_lists_what_it_can_draw(folder, capsys):
    assert _command(folder, "--list") == 0
    listed = capsys.readouterr().out
    assert all(name in listed for name in QUANTITIES)


def test_the_command_answers_wrong_questions(folder, tmp_path, capsys):
    assert _command(folder, "--show", "eto") == 1
    assert "the nearest known is 'eto_mm'" in capsys.readouterr().err
    assert _command(folder, "--show", "eto_mm", "-o", tmp_path / "map.bmp") == 3
    assert _command(tmp_path, "--show", "eto_mm") == 3
    assert _command(folder, "--show", "eto_mm", "--size", "poster") == 2
    assert _command(folder) == 2
    assert list(tmp_path.iterdir()) == []
