"""Stands, thirds and the rest of each county as units, with their parameters resolved."""

import numpy as np
import pandas as pd
import pytest

from etflux import stands

PLANTED = "2031-05-01"
SPREAD = {
    "planting_date_early": "2031-04-20", "planting_date_middle": "2031-05-01", "planting_date_late": "2031-05-20",
}  # fmt: skip


def counties(n=2, area=1000.0):
    return [
        {"county_id": f"C{k + 1}", "area_km2": area, "latitude_deg": 42.0, "longitude_deg": -93.0 - k} for k in range(n)
    ]


def corn(stand_id="A", **changes):
    return {"stand_id": stand_id, "county_id": "C1", "cover_id": "corn", "soil_id": "loam", "area_km2": 100.0,
            "planting_date": PLANTED} | changes  # fmt: skip


def one(make, **changes):
    """The single stand's row."""
    tables = {name: changes.pop(name) for name in ("covers", "soils", "irrigation_rules") if name in changes}
    settings = changes.pop("settings", None)
    units = make.expand(make.case(corn(**changes), settings=settings, **tables))
    return units[units["kind"] == "stand"].iloc[0]


# --- areas ---


def test_areas_sum_to_the_county(make):
    rows = [corn("A", **SPREAD), corn("B", cover_id="soybean", area_km2=250.0), corn("D", county_id="C2", area_km2=7.0)]
    units = make.expand(make.case(*rows, counties=counties()))
    assert units.groupby("county_id")["area_km2"].sum().to_numpy() == pytest.approx(1000.0)
    thirds = units[units["stand_id"] == "A"]
    assert thirds["area_km2"].to_numpy() == pytest.approx(100.0 / 3.0)
    assert thirds["area_km2"].sum() == pytest.approx(100.0)


def test_units_are_sorted_by_county_and_named_once(make):
    rows = [corn("A", county_id="C2"), corn("B", county_id="C1"), corn("C", county_id="C2", **SPREAD)]
    units = make.expand(make.case(*rows, counties=counties(3)))
    assert (np.diff(units["county_index"]) >= 0).all()
    assert units["unit_id"].is_unique
    assert list(units.loc[units["kind"] == "stand", "stand_row"]) == [1, 0, 2, 2, 2]
    assert (units.loc[units["kind"] == "rest", "stand_row"] == -1).all()


@pytest.mark.parametrize("area", [1000.0, 1000.0 - 1e-8])
def test_stands_that_fill_the_county_leave_no_rest(make, area):
    units = make.expand(make.case(corn(area_km2=area)))
    assert list(units["kind"]) == ["stand"]


def test_county_without_stands_is_all_rest(make):
    units = make.expand(make.case(corn(), counties=counties(2)))
    rest = units[units["county_id"] == "C2"]
    assert list(rest["kind"]) == ["rest"]
    assert rest["area_km2"].iloc[0] == 1000.0


def test_no_stands_at_all(make):
    units = make.expand(make.case(counties=counties(2)))
    assert list(units["kind"]) == ["rest", "rest"]
    assert list(units["soil_id"]) == ["loam", "loam"]


# --- the rest ---


def rest_of(make, rest, *rows, n=1, **changes):
    units = make.expand(make.case(*(rows or [corn()]), rest=rest, counties=counties(n), **changes))
    return units[units["kind"] == "rest"]


def part(name, share, treatment="cover", cover=None, soil=None, county="C1"):
    return {"county_id": county, "part": name, "share_pct": share, "treatment": treatment, "cover_id": cover,
            "soil_id": soil}  # fmt: skip


def test_default_rest_is_extensive_grass_tagged_rest(make):
    rest = rest_of(make, [])
    assert rest[["cover_id", "tag", "tag_of_cover", "area_km2"]].to_numpy().tolist() == [
        ["grass_extensive", "rest", "grass", 900.0]
    ]


def test_rest_cover_is_a_setting(make):
    assert list(rest_of(make, [], settings={"rest_cover": "woods"})["cover_id"]) == ["woods"]


def test_parts_take_their_shares_and_the_default_what_is_missing(make):
    rest = rest_of(make, [part("woods", 40.0, cover="woods"), part("water", 10.0, cover="water", soil="sand")])
    found = rest.set_index("cover_id")["area_km2"]
    assert found.to_dict() == pytest.approx({"woods": 360.0, "water": 90.0, "grass_extensive": 450.0})
    assert rest.set_index("cover_id")["soil_id"].to_dict() == {
        "woods": "loam",
        "water": "sand",
        "grass_extensive": "loam",
    }
    assert (rest["tag"] == "rest").all()


def test_rows_without_a_county_serve_those_without_their_own(make):
    rest = rest_of(make, [part("woods", 100.0, cover="woods", county=None), part("grass", 100.0)], n=3)
    assert rest.groupby("county_id")["cover_id"].agg(list).to_dict() == {
        "C1": ["grass_extensive"], "C2": ["woods"], "C3": ["woods"],
    }  # fmt: skip


def test_no_water_has_no_unit_but_keeps_its_area(make):
    """The county's mean is over all of its area; 270 km² of it give nothing."""
    rest = rest_of(make, [part("developed", 30.0, "no water"), part("woods", 70.0, cover="woods")])
    assert rest["area_km2"].sum() == pytest.approx(630.0)


def test_like_the_stands_copies_their_mix(make):
    rows = [corn("A", area_km2=300.0), corn("B", cover_id="soybean", area_km2=100.0)]
    rest = rest_of(make, [part("grass", 100.0, "like the stands")], *rows)
    found = rest.set_index("cover_id")["area_km2"].to_dict()
    assert found == pytest.approx({"corn": 450.0, "soybean": 150.0})
    assert (rest["tag"] == "rest").all()
    assert set(rest["tag_of_cover"]) == {"corn", "soybean"}
    assert rest["planting_date"].notna().all()


def test_like_the_stands_copies_the_thirds(make):
    rest = rest_of(make, [part("grass", 100.0, "like the stands")], corn(**SPREAD))
    assert list(rest["part"]) == ["early", "middle", "late"]
    assert rest["area_km2"].to_numpy() == pytest.approx(300.0)


def test_like_the_stands_without_stands_takes_the_default(make):
    rest = rest_of(make, [part("grass", 100.0, "like the stands", county=None)], n=2)
    assert list(rest.loc[rest["county_id"] == "C2", "cover_id"]) == ["grass_extensive"]


def test_a_part_named_twice_keeps_both_covers(make):
    rest = rest_of(make, [part("grass", 50.0, cover="grass_rotated"), part("grass", 50.0, cover="hay_averaged")])
    assert rest["unit_id"].is_unique
    assert len(rest) == 2


def test_rest_takes_the_soil_with_the_largest_stand_area(make):
    rows = [corn("A", soil_id="clay", area_km2=60.0), corn("B", soil_id="sand", area_km2=40.0),
            corn("D", soil_id="sand", area_km2=30.0)]  # fmt: skip
    assert list(rest_of(make, [], *rows)["soil_id"]) == ["sand"]


# --- parameters ---


def test_every_packaged_cover_on_every_packaged_soil_is_complete(make):
    rows = [
        corn(f"{cover}-{soil}", cover_id=cover, soil_id=soil, area_km2=1.0)
        for cover in stands.packaged("covers")["cover_id"]
        for soil in stands.packaged("soils")["soil_id"]
    ]
    units = make.expand(make.case(*rows))
    assert len(units) == len(rows) + 1
    needed = ["theta_fc", "theta_wp", "rew_mm", "tew_mm", "evaporation_depth_m", "available_water_mm_m", "curve_number",
              "residue_share", "root_min_m", "root_max_m", "fw_method", "efficiency", "depletion_fraction",
              "height_max_m", "kcb_mid", "station_index", "latitude_deg"]  # fmt: skip
    assert units[needed].astype(float).notna().all(axis=None)
    assert (units["tew_mm"] > units["rew_mm"]).all()
    assert (units["root_max_m"] >= units["root_min_m"]).all()
    assert units["curve_number"].between(25.0, 95.0).all()


def test_total_evaporable_water_is_the_stand_s_own(make):
    """FAO-56 eq. 73: 1000 (0.30 - 0.5 x 0.16) 0.12."""
    soil = [{"soil_id": "ours", "theta_fc": 0.30, "theta_wp": 0.16, "rew_mm": 9.0, "evaporation_depth_m": 0.12}]
    assert one(make, soil_id="ours", soils=soil)["tew_mm"] == pytest.approx(26.4)


def test_survey_wins_over_texture(make):
    by_texture, by_survey = one(make), one(make, available_water_mm_m=180.0)
    assert (by_texture["available_water_mm_m"], by_texture["available_water_source"]) == (
        pytest.approx(130.0),
        "texture",
    )
    assert (by_survey["available_water_mm_m"], by_survey["available_water_source"]) == (180.0, "survey")


@pytest.mark.parametrize(
    ("group", "drained", "letter", "number"),
    [
        ("B", None, "B", 78.0), ("B/D", True, "B", 78.0), ("B/D", False, "D", 89.0), ("B/D", None, "D", 89.0),
        ("c/d", True, "C", 85.0), ("A", True, "A", 67.0),
    ],
)  # fmt: skip
def test_dual_groups_by_drainage(make, group, drained, letter, number):
    """Row crops in straight rows, good condition: 67, 78, 85, 89 (TR-55, 1986, Table 2-2b, as quoted)."""
    row = one(make, hydrologic_group=group, drained=drained)
    assert (row["hydrologic_letter"], row["curve_number"]) == (letter, number)


def test_hydrologic_group_of_the_soil_serves_where_the_stand_has_none(make):
    assert one(make, soil_id="sand")["hydrologic_letter"] == "A"
    assert one(make, soil_id="sand", hydrologic_group="C")["hydrologic_letter"] == "C"


@pytest.mark.parametrize(
    ("changes", "share", "source"),
    [
        ({}, 0.0, "none"),
        ({"tillage": "conventional"}, 0.10, "by tillage"),
        ({"tillage": "reduced"}, 0.30, "by tillage"),
        ({"tillage": "no-till"}, 0.60, "by tillage"),
        ({"tillage": "no-till", "residue_pct": 72.0}, 0.72, "entered"),
        ({"tillage": "no-till", "cover_id": "grass_rotated"}, 0.0, "none"),
        ({"tillage": "no-till", "settings": {"residue_no_till_pct": 80.0}}, 0.80, "by tillage"),
    ],
)
def test_residue(make, changes, share, source):
    row = one(make, **changes)
    assert (row["residue_share"], row["residue_source"]) == (pytest.approx(share), source)


@pytest.mark.parametrize(
    ("changes", "least", "most"),
    [
        ({}, 0.30, 1.7),
        ({"water_regime": "sprinkler"}, 0.30, 1.18),
        ({"restricting_depth_m": 0.9}, 0.30, 0.9),
        ({"restricting_depth_m": 0.2}, 0.2, 0.2),
        ({"settings": {"row_crop_root_min": "fao56"}}, 0.15, 1.7),
        ({"cover_id": "hay_cut", "settings": {"row_crop_root_min": "fao56"}}, 0.60, 2.0),
    ],
)
def test_root_depths(make, changes, least, most):
    """FAO-56 Table 22 (pp. 164-165): upper end rainfed, middle of the lower half irrigated."""
    row = one(make, **changes)
    assert (row["root_min_m"], row["root_max_m"]) == (pytest.approx(least), pytest.approx(most))


def test_method_of_irrigation(make):
    drip = one(make, water_regime="drip", rule_id="R", irrigation_rules=[{"rule_id": "R", "efficiency_pct": 93.0}])
    assert (drip["fw_method"], drip["is_drip"], drip["irrigated"], drip["efficiency"]) == (0.35, True, True, 0.93)
    usual = one(make, water_regime="sprinkler")
    assert (usual["fw_method"], usual["is_drip"], usual["efficiency"]) == (1.0, False, 0.75)
    rainfed = one(make)
    assert (rainfed["fw_method"], rainfed["irrigated"], rainfed["efficiency"]) == (1.0, False, 1.0)


def test_a_stand_may_name_its_station(make):
    record = make.record(latitude=[42.0, 43.0])
    units = make.expand(make.case(corn("A", station_id="S1"), corn("B")), record)
    assert list(units["station_index"]) == [1, 0, 0]


def test_own_cover_is_just_a_row(make):
    row = stands.packaged("covers").set_index("cover_id").loc["corn"].to_dict()
    found = one(make, cover_id="silage", covers=[row | {"cover_id": "silage", "kcb_end": 1.0}])
    assert (found["kcb_end"], found["tag"], found["habit"]) == (1.0, "corn", "annual")


def test_own_row_of_a_packaged_id_replaces_it(make):
    row = stands.packaged("covers").set_index("cover_id").loc["corn"].to_dict()
    found = one(make, covers=[row | {"cover_id": "corn", "kcb_mid": 1.05}])
    assert found["kcb_mid"] == 1.05
    assert stands.complete(make.case(), "covers").loc["corn", "kcb_mid"] == 1.15


def test_the_case_is_left_alone(make):
    case = make.case(corn(**SPREAD), rest=[part("woods", 40.0, cover="woods")])
    before = {name: case.table(name).copy() for name in ("stands", "rest", "counties")}
    make.expand(case)
    for name, table in before.items():
        pd.testing.assert_frame_equal(case.table(name), table)


def test_many_counties_in_little_time(make):
    """3,000 counties with four parts of rest each take well under the time of a run: no loop over counties."""
    import time

    shares = [part(name, 20.0, cover=name, county=None) for name in ("woods", "water", "wetland", "developed")]
    rows = [corn(f"S{k}", county_id=f"C{k + 1}") for k in range(3000)]
    case = make.case(*rows, counties=counties(3000), rest=shares)
    start = time.perf_counter()
    units = make.expand(case, make.record(days=3))
    assert len(units) == 3000 * 6
    assert time.perf_counter() - start < 10.0  # 0.5 s on the machine of the first run


def test_available_water_by_texture_is_a_choice_for_the_packages_own_soils(make):
    """Saxton and Rawls (2006) for the package's classes; a survey's number and a soil of one's own stay."""
    own = {"soil_id": "loam", "theta_fc": 0.30, "theta_wp": 0.10, "rew_mm": 8.0}
    rows = [
        make.stand("A", soil_id="silt_loam", planting_date="2031-05-01"),
        make.stand("B", soil_id="silt_loam", planting_date="2031-05-01", available_water_mm_m=170.0),
        make.stand("C", soil_id="loam", planting_date="2031-05-01"),
    ]
    found = {}
    for choice in ("fao56", "saxton-rawls"):
        units = make.expand(make.case(*rows, settings={"texture_water": choice}, soils=[own]))
        found[choice] = units[units["kind"] == "stand"].set_index("stand_id")["available_water_mm_m"].to_dict()
    assert found["fao56"] == pytest.approx({"A": 140.0, "B": 170.0, "C": 200.0})
    assert found["saxton-rawls"] == pytest.approx({"A": 195.4, "B": 170.0, "C": 200.0}, abs=0.1)
