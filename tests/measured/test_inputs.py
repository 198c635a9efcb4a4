"""How the inputs of the sites were made, and what that costs where it can be told."""

import numpy as np
import pytest

from etflux import checks, reference, solar
from etflux.compare import bias, rmse
from etflux.findings import has_errors

YEARS = (2002, 2003, 2004, 2005, 2006)


def test_what_mean_temperature_alone_costs(sites):
    """US-Bo1 has the true extremes: the range of eq. 50 turned round, as used at US-Ne1 and US-AR1, against them.

    May to September 1998. The range itself is poor by day; reference ET and net radiation hardly hang on it.
    """
    true, made = sites.bondville_weather(), sites.bondville_weather(mean_only=True)
    summer = true["date"].dt.month.between(5, 9).to_numpy()
    julian = true["date"].dt.dayofyear.to_numpy(float)
    place = (sites.BO1.elevation, sites.BO1.latitude, julian)
    u2 = reference.wind_at_2m(true["wind_m_s"], sites.BO1.wind_height)
    rest = (true["vapour_pressure_kpa"].to_numpy(), true["rs_mj_m2_d"].to_numpy(), u2)
    eto, net, span = {}, {}, {}
    rso = solar.clear_sky_radiation(
        solar.extraterrestrial_radiation(sites.BO1.latitude, julian), sites.BO1.elevation
    )  # fmt: skip
    for name, days in (("true", true), ("made", made)):
        extremes = days["t_max_c"].to_numpy(), days["t_min_c"].to_numpy()
        eto[name] = reference.eto_fao56(*extremes, *rest, *place)[summer]
        net[name] = reference.net_radiation(rest[1], rso, *extremes, rest[0])[summer]
        span[name] = (extremes[0] - extremes[1])[summer]
    assert span["true"].mean() == pytest.approx(10.1, abs=0.1)
    assert bias(span["made"], span["true"]) == pytest.approx(0.7, abs=0.1)
    assert rmse(span["made"], span["true"]) == pytest.approx(4.2, abs=0.1)
    assert abs(bias(eto["made"], eto["true"])) < 0.06
    assert rmse(eto["made"], eto["true"]) < 0.31
    assert rmse(net["made"], net["true"]) < 0.05


@pytest.mark.parametrize("year", YEARS)
def test_irrigation_is_taken_out_of_the_rain_and_nothing_is_added(sites, year):
    """What the gauge caught is rain or irrigation: together as much as before, each irrigation as deep as a turn."""
    case = sites.ne1(year, only="documents")
    weather, events = case.table("weather"), case.table("irrigation_events")
    all_rain = weather[weather["station_id"] == "rain"]["rain_mm"].sum()
    rain = weather[weather["station_id"] == "site"]["rain_mm"]
    assert rain.sum() + events["depth_net_mm"].sum() == pytest.approx(all_rain)
    assert (rain >= 0.0).all()
    turns = events[events["date"].dt.month.isin((7, 8))]["depth_net_mm"]
    assert len(turns) >= 6
    assert 25.0 < turns.median() < 36.0
    record = sites.table("us_ne1_management.csv")
    begun = np.unique(record.loc[(record["group"] == "WATER") & (record["date"] // 10000 == year), "date"])
    assert len(events) >= 0.8 * len(begun)


def test_a_bad_row_of_the_network_is_found_by_the_packages_own_checks(sites):
    """The row of az04 whose mean is above its highest temperature; it is left out, and nothing else is."""
    everything = sites.azmet(sites.azmet_days())
    found = [finding for finding in checks.case_findings(everything) if finding.code == "t-mean-outside"]
    assert [finding.subject for finding in found] == ["station az04, 2023-07-16"]
    assert not [finding for finding in checks.case_findings(sites.azmet()) if finding.code == "t-mean-outside"]


def test_the_cases_have_no_errors(sites):
    for case in (sites.ne1(2004), sites.bo1(), sites.ar1(), sites.azmet()):
        assert not has_errors(checks.case_findings(case))


def test_wind_over_grass_is_itself_over_grass(sites):
    assert sites.wind_over_grass(3.0, 6.0, 0.12) == pytest.approx(3.0)
    assert sites.wind_over_grass(3.0, 6.0, 2.8) > 4.0
