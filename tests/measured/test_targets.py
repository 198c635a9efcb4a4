"""How well the runs agree with what was measured, with the options that are kept (sites.py, "kept").

Named in advance for all years of US-Ne1: LE_CORR for the mid-season, because turbulent fluxes miss part of the
available energy (Twine et al. 2000, Agric. For. Meteorol. 103:279). Figures are those reached, rounded up to the next
0.02; where a target is missed the comment beside the figure names it.
"""

import numpy as np
import pytest

from etflux.compare import bias, r_squared, rmse

YEARS = (2002, 2003, 2004, 2005, 2006)
MID = {"first": (7, 10), "last": (8, 25)}
SUMMER = {"first": (5, 1), "last": (9, 30)}


def test_how_long_all_sites_take_is_on_record(kept, record_property):
    """Asked: under 60 s. 22 to 40 s on two shared cores; no test asserts a time."""
    record_property("seconds", round(kept["seconds"], 1))
    assert len(kept) == len(YEARS) + 4


def test_reference_et_of_the_arizona_network(kept):
    pairs = kept["azmet"].comparison.pairs
    assert pairs["place"].nunique() == 15
    assert len(pairs) == 15 * 56 - 1 - 2  # one day is not in the file; two rows are bad
    assert rmse(pairs["modelled"], pairs["measured"]) <= 0.035
    assert pairs["difference"].abs().max() <= 0.06
    assert abs(bias(pairs["modelled"], pairs["measured"])) < 0.005


@pytest.mark.parametrize("site", ["ne1", "bo1"])
def test_net_radiation(kept, within, site):
    """FAO-56 eqs. 38 to 40 for the reference surface against the net radiometer over the crop. [MJ m-2 d-1]"""
    names = [name for name in kept if name.startswith(site)]
    rows = [within(kept[name].comparison.pairs, "site", "rn_mj_m2_d", **SUMMER) for name in names]
    modelled, measured = (np.concatenate([part[name] for part in rows]) for name in ("modelled", "measured"))
    assert rmse(modelled, measured) <= 1.2
    assert abs(bias(modelled, measured)) <= 0.6


def test_net_radiation_of_dry_grass_is_missed(kept, within):
    """US-AR1. Target: RMSE 1.2, bias within 0.6; missed by far. Of 4.6 MJ/m²/day, 1.4 are the sky's own radiation
    (measured LW_IN_F against what eq. 39 implies), 1.8 a surface warmer than the air (H times the reference resistance
    208/u2), the rest albedo and a radiometer against which the site's own LE + H are 7 % too large."""
    rows = within(kept["ar1"].comparison.pairs, "site", "rn_mj_m2_d", **SUMMER)
    assert rmse(rows["modelled"], rows["measured"]) == pytest.approx(4.78, abs=0.05)
    assert bias(rows["modelled"], rows["measured"]) == pytest.approx(4.58, abs=0.05)
    assert r_squared(rows["modelled"], rows["measured"]) > 0.8  # the course by day is followed


# r², RMSE against LE_CORR from 10 July to 25 August; targets 0.8 and 0.9. 2002: RMSE missed (wind, see below).
MID_SEASON = {2002: (0.94, 1.12), 2003: (0.84, 0.56), 2004: (0.86, 0.66), 2005: (0.92, 0.88), 2006: (0.94, 0.90)}


@pytest.mark.parametrize("year", YEARS)
def test_maize_in_mid_season(kept, within, year):
    rows = within(kept[f"ne1_{year}"].comparison.pairs, "kept", series="LE_CORR", **MID)
    assert len(rows) == 47
    least, most = MID_SEASON[year]
    assert least >= 0.8
    assert r_squared(rows["modelled"], rows["measured"]) >= least
    assert rmse(rows["modelled"], rows["measured"]) <= most


@pytest.mark.parametrize("year", YEARS)
def test_maize_in_mid_season_with_the_wind_of_grass(kept, within, year):
    """The anemometer stands over the maize, 3 m above it; carried to grass (ASCE-EWRI app. B) every year meets the
    target. Not the rule here, because the height of the sensor is not on record."""
    rows = within(kept[f"ne1_{year}"].comparison.pairs, "kept_wind", series="LE_CORR", **MID)
    assert r_squared(rows["modelled"], rows["measured"]) >= 0.8
    assert rmse(rows["modelled"], rows["measured"]) <= 0.9


# May to September: RMSE against LE_F_MDS (target 1.1; 2006 missed), RMSE outside the band (target 0.7; 2002, 2005 and
# 2006 missed), monthly means inside it (target 4 of 5; missed in every year, by 0.04 to 0.98 mm/day).
SEASON = {
    2002: (1.10, 0.74, 3), 2003: (0.96, 0.60, 2), 2004: (0.76, 0.54, 3), 2005: (1.08, 0.80, 2), 2006: (1.18, 0.88, 3),
}  # fmt: skip


@pytest.mark.parametrize("year", YEARS)
def test_maize_from_may_to_september(kept, within, year):
    found = kept[f"ne1_{year}"].comparison
    rows = within(found.pairs, "kept", series="LE_F_MDS", **SUMMER)
    band = within(found.band, "kept", **SUMMER)
    most, outside, inside = SEASON[year]
    assert len(band) == 153
    assert rmse(rows["modelled"], rows["measured"]) <= most
    assert np.sqrt(np.mean(band["outside"] ** 2)) <= outside
    months = band.groupby("month")[["low", "high", "modelled"]].mean()
    assert ((months["modelled"] >= months["low"]) & (months["modelled"] <= months["high"])).sum() == inside
    total = band[["low", "high", "modelled"]].sum()
    assert 0.95 * total["low"] <= total["modelled"] <= 1.05 * total["high"]


def test_soybean(kept, within):
    """US-Bo1, days with 40 half-hours or more. Targets: RMSE 1.0, bias within 0.4, August within 0.5 mm/day."""
    pairs = kept["bo1"].comparison.pairs
    for days, least in ((SUMMER, 120), ({}, 250)):
        rows = within(pairs, "kept", **days)
        assert len(rows) >= least
        assert rmse(rows["modelled"], rows["measured"]) <= 0.84  # target 1.0
        assert abs(bias(rows["modelled"], rows["measured"])) <= 0.16  # target 0.4
    august = within(pairs, "kept", first=(8, 1), last=(8, 31))
    assert abs(bias(august["modelled"], august["measured"])) <= 0.3  # target 0.5


@pytest.mark.parametrize("series", ["LE_F_MDS", "LE_CORR"])
def test_grass_and_its_drought(kept, within, series):
    """US-AR1. Target: RMSE 1.0, 2011's drought tracked: a year's sum under half of 2010's, each month within 0.6."""
    pairs = kept["ar1"].comparison.pairs
    rows = within(pairs, "kept", series=series)
    assert len(rows) == 730
    assert rmse(rows["modelled"], rows["measured"]) <= 0.80  # target 1.0
    years = {year: within(pairs, "kept", series=series, year=year) for year in (2010, 2011)}
    assert rmse(years[2011]["modelled"], years[2011]["measured"]) <= 0.46
    ratio = {name: years[2011][name].sum() / years[2010][name].sum() for name in ("modelled", "measured")}
    assert ratio["modelled"] < 0.5
    assert ratio["modelled"] == pytest.approx(ratio["measured"], abs=0.06)
    months = years[2011].groupby("month")[["modelled", "measured"]].mean()
    assert (months["modelled"] - months["measured"]).abs().max() < 0.6


def test_the_balance_of_every_run_closes(kept):
    for name, found in kept.items():
        if name not in ("seconds", "azmet"):
            assert np.abs(found.results.stand["closure_error_mm"].to_numpy()).max() < 1e-6, name
