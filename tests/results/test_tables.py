"""The tidy tables: columns as listed, values as in the datasets, text that no spreadsheet takes for a formula."""

import numpy as np
import pandas as pd
import pytest

from etflux.findings import Finding
from etflux.results import SCHEMA_VERSION, columns, confidence, summarise, table_names, water_budget
from etflux.results.summary import CONFIDENCE
from etflux.results.tables import column_kind, free_text, guarded, unguarded
from etflux.variables import flag_bits, quantities

# The public names, written out once more by hand: a change of the list must be a decision, never an accident. Within a
# major version a column may only be added, at the end of its table.
LISTED = {
    "counties": "county_id area_km2 latitude_deg longitude_deg",
    "stations": "station_id latitude_deg longitude_deg elevation_m",
    "stands": "unit_id stand_id part kind tag county_id cover_id soil_id water_regime area_km2 stored_start_mm",
    "county_daily": "date county_id eto_mm rain_mm et_stands_mm et_county_mm le_stands_w_m2 le_county_w_m2 "
    "le_daytime_w_m2 le_transpiration_w_m2 le_evaporation_w_m2 water_volume_hm3 represented_pct mixing_depth_m "
    "depth_a0_m humidity_mixed_g_kg theta_mixed_c dew_point_mixed_c dew_point_without_c contribution_c "
    "contribution_g_kg contribution_low_c contribution_high_c lcl_m available_energy_mj_m2_d sensible_heat_mj_m2_d "
    "heat_elsewhere_mj_m2_d flags estimated_share_pct provisional contribution_same_day_c contribution_carried_c "
    "contribution_12_c contribution_18_c contribution_peak_c peak_hour replaced_share profile_distance_km "
    "sprinkler_loss_county_mm rain_mm_source contribution_home_c contribution_other_c contribution_outside_c "
    "break_hour crossing_h le_hour_w_m2 confidence_code effect_of_crops_c dew_point_without_crops_c "
    "depth_without_crops_m theta_without_crops_c effect_of_evaporation_c dew_point_without_evaporation_c "
    "depth_without_evaporation_m "
    "theta_without_evaporation_c rise_observed_c rise_mixing_c rise_same_day_c rise_near_ground_c rise_other_c "
    "estimate_error_c estimate_bias_c wind_east_m_s wind_north_m_s clock_minus_solar_h contribution_p10_c "
    "contribution_p50_c contribution_p90_c cape_mixed_j_kg cin_mixed_j_kg cape_most_j_kg "
    "cin_most_j_kg cape_mixed_without_crops_j_kg cin_mixed_without_crops_j_kg "
    "cape_most_without_crops_j_kg cin_most_without_crops_j_kg",
    "county_hours": "date county_id hour clock_h mixing_depth_m theta_mixed_c dew_point_mixed_c rh_mixed_pct "
    "humidity_mixed_g_kg contribution_c contribution_g_kg",
    "county_tags": "date county_id tag le_by_tag_w_m2",
    "stand_daily": "date unit_id stand_id part kind county_id cover_id eto_mm stage_code days_after_planting kcb ke ks "
    "kc plant_height_m root_depth_m ground_cover few evaporation_mm transpiration_mm et_mm et_potential_mm de_mm dr_mm "
    "ds_mm taw_mm raw_mm water_left_mm water_left_pct rain_stand_mm snow_mm melt_mm irrigation_mm irrigation_gross_mm "
    "sprinkler_loss_mm capillary_rise_mm runoff_mm percolation_mm drainage_mm need_mm days_to_stress closure_error_mm "
    "provisional",
    "station_daily": "date station_id t_max_c t_min_c t_mean_c dew_point_c vapour_pressure_kpa rh_min_pct rs_mj_m2_d "
    "u2_m_s rain_mm rn_mj_m2_d ra_mj_m2_d eto_mm ets_mm etr_mm eto_spread_mm t_max_c_source t_min_c_source "
    "t_mean_c_source dew_point_c_source vapour_pressure_kpa_source rh_min_pct_source rs_mj_m2_d_source u2_m_s_source "
    "rain_mm_source estimated_share_pct provisional",
    "second_opinions": "date station_id method eto_mm",
    "contribution": "date county_id hour cover age_d contribution_c contribution_g_kg home_g_kg",
    "contribution_hours": "date county_id hour hour_kind cover contribution_c contribution_g_kg",
    "ranges": "date county_id varied contribution_low_c contribution_high_c",
    "moistened_by": "date county_id from_county_id contribution_c contribution_g_kg",
    "budget": "balance subject term value unit",
    "names": "kind id name",
    "marks": "unit_id mark date basis",
    "fills": "station_id quantity method first last days",
    "findings": "severity code table row quantity value_text subject detail place rule remedy",
    "methods": "step method source",
}


def test_tables_and_columns_are_the_listed_ones(small):
    assert SCHEMA_VERSION == "1.0"
    assert list(table_names()) == list(LISTED)
    for name, listed in LISTED.items():
        assert columns(name) == tuple(listed.split()), name
        assert tuple(small.table(name).columns) == columns(name), name


def test_every_number_column_is_a_quantity():
    local = {"value", "row", "days", "hour"}
    for name in table_names():
        for column in columns(name):
            if column_kind(column) == "number" and column not in local:
                assert column in quantities(), f"{name}.{column}"
            if column.endswith(("_mm", "_c")):
                assert quantities()[column].unit, column


def test_a_table_holds_the_dataset_row_by_row(small):
    table = small.table("stand_daily").set_index(["date", "unit_id"])
    stand = small.stand
    for day, unit in ((0, 0), (7, 3), (39, stand.sizes["unit_id"] - 1)):
        row = table.loc[(stand["date"].to_numpy()[day], stand["unit_id"].to_numpy()[unit])]
        assert row["dr_mm"] == stand["dr_mm"].to_numpy()[day, unit]
        assert row["county_id"] == stand["county_id"].to_numpy()[unit]
    tags = small.table("county_tags").set_index(["date", "county_id", "tag"])["le_by_tag_w_m2"]
    expected = small.county["le_by_tag_w_m2"].to_series()
    assert tags.loc[expected.index].to_numpy() == pytest.approx(expected.to_numpy())


def test_what_a_run_has_not_is_blank_not_zero(small):
    bare = small.county.drop_vars(["contribution_c", "flags"])
    from dataclasses import replace

    table = replace(small, county=bare).table("county_daily")
    assert table["contribution_c"].isna().all()
    assert (table["flags"] == 0).all()


def test_blocks_are_the_table_in_pieces(small):
    pieces = list(small.blocks("stand_daily", rows=100))
    assert len(pieces) > 3
    pd.testing.assert_frame_equal(pd.concat(pieces, ignore_index=True), small.table("stand_daily"))


def test_names_table_spells_out_every_bit(small):
    names = small.table("names")
    air = names[names["kind"] == "bit of flags"].set_index("id")["name"]
    assert set(map(int, air.index)) == set(flag_bits("air").values())
    assert "standard profile" in air[str(flag_bits("air")["standard_profile"])]


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1", "@SUM(A1)", "\tx", "\rx", "=cmd|' /C calc'!A0", "'=x", "''+x"])
def test_text_that_could_be_a_formula_gets_an_apostrophe_and_loses_it_again(text):
    assert guarded(text) == "'" + text
    assert unguarded(guarded(text)) == text


@pytest.mark.parametrize("text", ["Corn (grain)", "", "'quoted'", "a=b", None, 3.5])
def test_other_text_stays_as_it_is(text):
    assert guarded(text) == text
    assert unguarded(text) == text


def test_free_text_columns_are_those_that_people_fill():
    ids = {"county_id", "station_id", "unit_id", "stand_id", "cover_id", "soil_id", "id", "date"}
    assert not free_text() & ids
    assert "name" in free_text()


def test_findings_table_has_errors_first(make):
    made = make(counties=1, days=5, findings=[
        Finding("value-repeated", "weather", 8, "t_min_c", 14.2),
        Finding("t-max-below-t-min", "weather", 3, "t_max_c", -2.0, "station N1"),
    ])  # fmt: skip
    table = made.table("findings")
    assert table["severity"].tolist() == ["error", "warning"]
    assert table["row"].tolist() == [3, 8]
    assert table["remedy"].str.endswith(".").all()


def test_confidence_is_the_worst_word_that_a_county_earns():
    bits = flag_bits("air")
    flags = [bits["saturated"], bits["represented_low"] | bits["cumulus"], bits["cumulus"] | bits["forecast"],
             bits["forecast"], 0, 0, 0]  # fmt: skip
    km = [10.0, 10.0, 10.0, 10.0, 10.0, 200.0, 10.0]
    found = confidence(flags, [0, 0, 0, 0, 1, 0, 0], [np.nan, 2.0, 2.0, 2.0, 2.0, 2.0, 2.0], km)
    assert [CONFIDENCE[code] for code in found] == ["no value", "a range only", "low", "fair", "fair", "fair", "good"]


def test_summary_is_recomputed_from_the_tables(small):
    day = small.dates[-1]
    numbers = summarise(small, day)
    table = small.table("county_daily")
    today = table[table["date"] == pd.Timestamp(day)].merge(small.table("counties"), on="county_id")
    weight = today["area_km2"] / today["area_km2"].sum()
    assert numbers["le_county_w_m2"] == pytest.approx((today["le_county_w_m2"] * weight).sum())
    assert numbers["water_volume_hm3"] == pytest.approx(today["water_volume_hm3"].sum())
    valued = today.dropna(subset=["contribution_c"])
    expected = np.average(valued["contribution_c"], weights=valued["area_km2"])
    assert numbers["contribution_c"] == pytest.approx(expected)
    assert sum(row["contribution_c"] for row in numbers["covers"] if row["tag"] != "rest") == pytest.approx(expected)
    assert numbers["marked"]["confidence"]["no value"] == 1


def test_summary_without_air_has_no_contribution(make):
    numbers = make(counties=2, days=10, air=False).summary()
    assert np.isnan(numbers["contribution_c"])
    assert numbers["contribution"]["counties"] == 0
    assert np.isfinite(numbers["le_county_w_m2"])


def test_a_day_outside_the_run_is_named(small):
    with pytest.raises(ValueError, match="2032-01-01 is not a day of this run: 2031-04-01 to 2031-05-10"):
        small.summary("2032-01-01")


def test_water_budget_closes_and_stops_with_the_season(small):
    budget = water_budget(small.stand)
    closure = budget[budget["term"] == "closure_error_mm"]["value"]
    assert len(closure) == small.stand.sizes["unit_id"]
    assert closure.abs().max() < 1e-9
    stopped = small.stand.copy(deep=True)
    for name in ("dr_mm", "ds_mm", "snow_mm", "rain_stand_mm", "evaporation_mm"):
        stopped[name][20:, 0] = np.nan
    again = water_budget(stopped)
    assert again[again["term"] == "closure_error_mm"]["value"].abs().max() < 1e-9
