"""A run against measurements: pairs, units, groups, the band, and what is refused."""

import numpy as np
import pandas as pd
import pytest

from etflux.compare import compare, measurements_from
from etflux.findings import ProblemsFound
from etflux.humidity import latent_heat_of_vaporization


def of(metrics, group="all", which="", series="measured"):
    found = metrics[(metrics["group"] == group) & (metrics["which"] == which) & (metrics["series"] == series)]
    assert len(found) == 1
    return found.iloc[0]


def test_known_errors_come_out(run, rows):
    found = compare(run, measurements_from(rows))
    row = of(found.metrics)
    assert row["n"] == 120
    assert row["bias"] == pytest.approx(-0.25)
    assert row["rmse"] == pytest.approx(np.sqrt(0.125))
    assert row["sum_measured"] - row["sum_modelled"] == pytest.approx(30.0)
    assert found.pairs["kind"].unique() == ["stand"]


def test_groups_share_out_all_pairs(run, rows):
    metrics = compare(run, measurements_from(rows)).metrics
    for group in ("month", "stage", "season"):
        part = metrics[metrics["group"] == group]
        assert part["n"].sum() == 120, group
        assert (part["bias"] * part["n"]).sum() == pytest.approx(-30.0)
    assert metrics[metrics["group"] == "month"]["which"].tolist() == ["2031-04", "2031-05", "2031-06", "2031-07"]
    assert {"growing", "full cover"} <= set(metrics[metrics["group"] == "stage"]["which"])


def test_units_are_the_registrys(run, rows):
    inches = rows.assign(value=rows["value"] / 25.4, unit="in/day", uncertainty=0.1 / 25.4)
    found = compare(run, measurements_from(inches)).pairs
    assert found["measured"].to_numpy() == pytest.approx(rows["value"].to_numpy())
    assert found["uncertainty"].to_numpy() == pytest.approx(0.1)


def test_latent_heat_is_water_and_water_latent_heat(run, rows):
    """1 mm of water carries its latent heat, so W/m² against mm needs no other number."""
    county = run.county.sel(county_id="99003")
    heat = county["le_county_w_m2"].to_numpy() * 0.0864 / county["et_county_mm"].to_numpy()
    assert heat == pytest.approx(latent_heat_of_vaporization(21.0), rel=0.01)
    watts = rows.assign(value=rows["value"] * heat / 0.0864, unit="W/m²")
    assert compare(run, measurements_from(watts)).pairs["measured"].to_numpy() == pytest.approx(
        rows["value"].to_numpy()
    )
    depth = pd.DataFrame({"place": "99003", "date": county["date"].to_numpy(), "quantity": "le_county_w_m2",
                          "value": county["et_county_mm"].to_numpy(), "unit": "mm"})  # fmt: skip
    assert compare(run, measurements_from(depth)).pairs["difference"].to_numpy() == pytest.approx(0.0, abs=1e-9)


def test_a_share_is_taken_as_it_is(run):
    ks = run.stand["ks"].sel(unit_id="S02-1").to_numpy()
    rows = pd.DataFrame({"place": "S02-1", "date": run.stand["date"].to_numpy(), "quantity": "ks", "value": ks - 0.1,
                         "unit": ""})  # fmt: skip
    found = compare(run, measurements_from(rows))
    assert found.pairs["difference"].to_numpy() == pytest.approx(0.1)
    assert of(found.metrics)["unit"] == ""


def test_temperature_uncertainty_has_no_offset(run):
    rows = pd.DataFrame({"place": "N1", "date": run.station["date"].to_numpy(), "quantity": "t_max_c", "value": 80.0,
                         "unit": "°F", "uncertainty": 1.8})  # fmt: skip
    found = compare(run, measurements_from(rows)).pairs
    assert found["measured"].to_numpy() == pytest.approx(26.6667, abs=1e-3)
    assert found["uncertainty"].to_numpy() == pytest.approx(1.0)
    assert found["kind"].unique() == ["station"]


def test_a_stand_of_three_parts_is_their_area_mean(run):
    parts = run.stand.sel(unit_id=["S01-1.early", "S01-1.middle", "S01-1.late"])["et_mm"]
    rows = pd.DataFrame({"place": "S01-1", "date": run.stand["date"].to_numpy(), "quantity": "et_mm",
                         "value": parts.mean("unit_id").to_numpy(), "unit": "mm/day"})  # fmt: skip
    assert compare(run, measurements_from(rows)).pairs["difference"].to_numpy() == pytest.approx(0.0, abs=1e-12)


def test_two_series_are_kept_apart_and_make_a_band(run, rows):
    low, high = rows.assign(series="raw", value=rows["value"] - 0.4), rows.assign(series="closed")
    found = compare(run, measurements_from(pd.concat([low, high])))
    assert of(found.metrics, series="raw")["bias"] == pytest.approx(0.15)
    assert of(found.metrics, series="closed")["bias"] == pytest.approx(-0.25)
    band = of(found.metrics, series="between the series")
    # every second day the run is the closed series itself; on the others it lies 0.1 below the raw one
    assert band["inside_pct"] == pytest.approx(50.0)
    assert band["rmse_outside"] == pytest.approx(np.sqrt(0.01 / 2.0))
    assert np.isnan(band["rmse"])
    assert len(found.band) == 120


def test_one_series_makes_no_band(run, rows):
    assert len(compare(run, measurements_from(rows)).band) == 0


def test_what_the_run_does_not_have_is_refused_all_at_once(run, rows):
    wrong = pd.concat([rows.assign(place="S02-l"), rows.assign(quantity="rn_mj_m2_d", unit="W/m²"), rows])
    with pytest.raises(ProblemsFound) as problems:
        compare(run, measurements_from(wrong, "field.csv"))
    assert [finding.code for finding in problems.value.findings] == [
        "measured-place-unknown", "measured-quantity-not-computed",
    ]  # fmt: skip
    assert "S02-1" in str(problems.value)
    assert "and 119 more rows" in str(problems.value)


def test_days_outside_the_run(run, rows):
    shifted = rows.assign(date=rows["date"] + np.timedelta64(20, "D"))
    found = compare(run, measurements_from(shifted))
    assert [finding.code for finding in found.findings] == ["measured-day-outside"]
    assert len(found.pairs) == 100
    with pytest.raises(ProblemsFound, match="no measured day"):
        compare(run, measurements_from(rows.assign(date=rows["date"] + np.timedelta64(2000, "D"))))
