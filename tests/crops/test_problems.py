"""What stands.check and canopy.check find, each with its table, row and quantity, and nothing in a sound case."""

import numpy as np
import pytest

from etflux import canopy, stands
from etflux.findings import rules

PLANTED = "2031-05-01"


def corn(stand_id="A", **changes):
    return {"stand_id": stand_id, "county_id": "C1", "cover_id": "corn", "soil_id": "loam", "area_km2": 100.0,
            "planting_date": PLANTED} | changes  # fmt: skip


def grass(stand_id="G", **changes):
    return corn(stand_id, **({"cover_id": "grass_rotated", "planting_date": None} | changes))


def saw(word, date="2031-06-10", value=np.nan, stand_id="A"):
    return {"stand_id": stand_id, "date": date, "observed": word, "observed_value": value}


def found(make, *rows, **tables):
    case = make.case(*rows, **tables)
    return [(f.code, f.table, f.row, f.quantity) for f in stands.check(case) + canopy.check(case)]


def test_a_sound_case_has_no_findings(make):
    rows = [
        corn("A", hybrid_heat_units=1500.0, harvest_date="2031-10-01"),
        corn("B", cover_id="soybean"),
        grass("G", greenup_date="2031-04-05"),
        grass("H", cover_id="hay_cut"),
        corn("T", planting_date=None, planting_date_early="2031-04-20", planting_date_middle="2031-05-01",
             planting_date_late="2031-05-20", hydrologic_group="B/D"),
    ]  # fmt: skip
    observations = [
        saw("emergence", "2031-05-12"), saw("cover 10 %", "2031-06-01"), saw("full cover", "2031-07-05"),
        saw("Late season", "2031-08-20"), saw("maturity", "2031-09-15"), saw("harvest", "2031-10-01"),
        saw("cut", stand_id="H"), saw("canopy cover", value=55.0), saw("leaf area", value=3.0, stand_id="G"),
    ]  # fmt: skip
    rest = [{"county_id": None, "part": "woods", "share_pct": 100.0, "treatment": "cover", "cover_id": "woods"}]
    rules = [{"rule_id": "R", "from_stage": "V8", "to_stage": "maturity"}]
    assert found(make, *rows, observations=observations, rest=rest, irrigation_rules=rules) == []


def test_an_empty_case_has_no_findings(make):
    assert found(make) == []


STANDS = [
    (corn(area_km2=1200.0), ("stands-above-county", "counties", 0, "area_km2")),
    (corn(planting_date=None), ("planting-missing", "stands", 0, "planting_date")),
    (grass(planting_date=PLANTED), ("planting-not-needed", "stands", 0, "planting_date")),
    (corn(harvest_date="2031-04-01"), ("harvest-before-planting", "stands", 0, "harvest_date")),
    (corn(harvest_date=PLANTED), ("harvest-before-planting", "stands", 0, "harvest_date")),
    (corn(greenup_date="2031-04-01"), ("greenup-not-needed", "stands", 0, "greenup_date")),
    (corn(hybrid_heat_units=2150.0), ("hybrid-unusual", "stands", 0, "hybrid_heat_units")),
    (corn(hybrid_heat_units=800.0), ("hybrid-unusual", "stands", 0, "hybrid_heat_units")),
    (corn(cover_id="soybean", hybrid_heat_units=1500.0), ("hybrid-not-needed", "stands", 0, "hybrid_heat_units")),
    (corn(hydrologic_group="E"), ("hydrologic-group-unknown", "stands", 0, "hydrologic_group")),
    (corn(hydrologic_group="B/X"), ("hydrologic-group-unknown", "stands", 0, "hydrologic_group")),
    (grass(cover_id="hay_cut"), ("never-cut", "stands", 0, "cover_id")),
]


@pytest.mark.parametrize(("row", "finding"), STANDS, ids=[f"{case[1][0]}-{k}" for k, case in enumerate(STANDS)])
def test_stands(make, row, finding):
    assert found(make, row) == [finding]


def test_the_row_is_that_of_the_input(make):
    rows = [corn("A"), corn("B"), corn("C", planting_date=None)]
    assert found(make, *rows) == [("planting-missing", "stands", 2, "planting_date")]


@pytest.mark.parametrize(
    ("dates", "finding"),
    [
        (("2031-05-01", None, "2031-05-20"), ("spread-incomplete", "stands", 0, "planting_date_middle")),
        (("2031-05-01", "2031-05-30", "2031-05-20"), ("spread-order", "stands", 0, "planting_date_early")),
        (("2031-05-20", "2031-05-10", "2031-05-01"), ("spread-order", "stands", 0, "planting_date_early")),
    ],
)
def test_planting_spread(make, dates, finding):
    names = ("planting_date_early", "planting_date_middle", "planting_date_late")
    row = corn(planting_date=None) | dict(zip(names, dates, strict=True))
    assert found(make, row) == [finding]


def test_planting_date_beside_a_spread(make):
    row = corn(planting_date_early=PLANTED, planting_date_middle="2031-05-10", planting_date_late="2031-05-20")
    assert found(make, row) == [("planting-twice", "stands", 0, "planting_date")]


def test_harvest_between_the_plantings_of_a_spread(make):
    row = corn(planting_date=None, planting_date_early=PLANTED, planting_date_middle="2031-05-10",
               planting_date_late="2031-05-20", harvest_date="2031-05-15")  # fmt: skip
    assert found(make, row) == [("harvest-before-planting", "stands", 0, "harvest_date")]


OBSERVATIONS = [
    ([saw("tasselling")], [("stage-unknown", "observations", 0, "observed")]),
    ([saw("cut", stand_id="G")], [("cut-on-averaged", "observations", 0, "observed")]),
    ([saw("cut")], [("observation-without-use", "observations", 0, "observed")]),
    ([saw("emergence", stand_id="G")], [("observation-without-use", "observations", 0, "observed")]),
    ([saw("replant", stand_id="G")], [("observation-without-use", "observations", 0, "observed")]),
    ([saw("leaf area")], [("observation-without-value", "observations", 0, "observed_value")]),
    ([saw("canopy cover", value=0.6)], [("canopy-cover-fraction", "observations", 0, "observed_value")]),
    ([saw("emergence", "2031-04-20")], [("observation-order", "observations", 0, "date")]),
    (
        [saw("full cover", "2031-06-01"), saw("emergence", "2031-06-10")],
        [("observation-order", "observations", 1, "date")],
    ),
    (
        [saw("maturity", "2031-09-20"), saw("harvest", "2031-09-10")],
        [("observation-order", "observations", 0, "date")],
    ),
    (
        [saw("emergence", "2031-05-10"), saw("emergence", "2031-05-12")],
        [("observation-order", "observations", 1, "date")],
    ),
    ([saw("emergence", "2031-05-10"), saw("replant", "2031-06-01"), saw("emergence", "2031-06-10")], []),
]


@pytest.mark.parametrize(("rows", "findings"), OBSERVATIONS)
def test_observations(make, rows, findings):
    assert found(make, corn("A"), grass("G"), observations=rows) == findings


def test_unknown_words_are_answered_with_the_nearest(make):
    case = make.case(corn(), observations=[saw("full covr")], irrigation_rules=[{"rule_id": "R", "from_stage": "V7"}])
    details = {finding.table: finding.detail for finding in canopy.check(case)}
    assert details["observations"] == "nearest is 'full cover'"
    assert details["irrigation_rules"] in ("nearest is 'V6'", "nearest is 'V8'")


def test_rest(make):
    rest = [
        {"county_id": "C1", "part": "woods", "share_pct": 70.0, "treatment": "cover", "cover_id": "woods"},
        {"county_id": "C1", "part": "grass", "share_pct": 40.0, "treatment": "cover", "cover_id": None},
    ]
    assert found(make, corn(), rest=rest) == [("rest-above-100", "rest", 1, "share_pct")]
    alike = [{"county_id": "C1", "part": "grass", "share_pct": 40.0, "treatment": "like the stands"}]
    assert found(make, rest=alike) == [("rest-without-stands", "rest", 0, "treatment")]


def test_covers_whose_words_lead_nowhere(make):
    row = stands.packaged("covers").set_index("cover_id").loc["corn"].to_dict()
    own = [row | {"cover_id": "sorghum", "tag": "sorghum"}, row | {"cover_id": "silage", "curve_number_class": "rows"}]
    assert found(make, covers=own) == [
        ("heat-units-unknown", "covers", 0, "marks"), ("runoff-class-unknown", "covers", 1, "curve_number_class"),
    ]  # fmt: skip


def test_packaged_covers_pass_their_own_checks(make):
    assert found(make, covers=stands.packaged("covers").to_dict("records")) == []


def test_every_finding_reads_as_a_sentence(make):
    rows = [corn("A", area_km2=2000.0, hybrid_heat_units=2150.0), grass("G", planting_date=PLANTED)]
    case = make.case(*rows, observations=[saw("cut", stand_id="G"), saw("canopy cover", value=0.4)])
    for finding in stands.check(case) + canopy.check(case):
        assert finding.code in rules()
        assert finding.sentence().count(":") >= 1
        assert finding.subject
