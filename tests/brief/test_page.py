"""The page as a file: its numbers are the tables', it asks for nothing, and names are never markup."""

import base64
import json
import re
import time
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from etflux.brief.page import page_text, write_page
from etflux.outlines import Outline
from etflux.results.rests import rests_on

HOSTILE = '</script><script>alert("x")</script> & \u2028 "quoted"'


def numbers_of(text):
    return json.loads(re.search(r'<script type="application/json" id="data">(.*?)</script>', text, re.S).group(1))


def unpacked(packed):
    kind, missing = ("<i2", -(2**15)) if packed["bits"] == 16 else ("<i4", -(2**31))
    whole = np.frombuffer(base64.b64decode(packed["b"]), dtype=kind).reshape(packed["shape"])
    return np.where(whole == missing, np.nan, whole * packed["step"])


@pytest.fixture(scope="module")
def run(make):
    return make(counties=6, days=40)


@pytest.fixture(scope="module")
def page(run):
    return page_text(run)


def test_numbers_are_the_tables_to_a_tenth_of_the_last_digit_shown(run, page):
    found = numbers_of(page)
    table = run.table("county_daily")
    for name in ("contribution_c", "et_county_mm", "le_county_w_m2", "dew_point_mixed_c"):
        packed = found["values"][name]
        listed = table[name].to_numpy(float).reshape(packed["shape"])
        np.testing.assert_allclose(unpacked(packed), listed, atol=0.5 * packed["step"] + 1e-9)
        row = next(row for row in found["quantities"] if row["name"] == name)
        assert packed["step"] <= 0.1 * 10.0 ** -row["decimals"]["si"] * 1.0001
        assert packed["step"] * abs(row["to"]["us"][0]) <= 0.1 * 10.0 ** -row["decimals"]["us"] * 1.0001


def test_a_difference_is_converted_without_the_32(page):
    rows = {row["name"]: row for row in numbers_of(page)["quantities"]}
    assert rows["contribution_c"]["to"]["us"] == pytest.approx([1.8, 0.0])
    assert rows["dew_point_mixed_c"]["to"]["us"] == pytest.approx([1.8, 32.0])


def test_parts_add_up_to_the_contribution(run, page):
    found = numbers_of(page)
    total = unpacked(found["values"]["contribution_c"])
    for name in ("byCover", "byAge"):
        parts = unpacked(found[name]).sum(axis=2)
        there = np.isfinite(total)
        assert np.isfinite(parts[there]).all()
        np.testing.assert_allclose(parts[there], total[there], atol=0.02)


def test_stands_are_those_of_the_table(run, page):
    found = numbers_of(page)["stands"]
    daily = run.table("stand_daily")
    for place, stand in enumerate(found["list"][:5]):
        rows = daily[daily["unit_id"] == stand["id"]]
        np.testing.assert_allclose(
            unpacked(found["values"]["water_left_mm"])[:, place], rows["water_left_mm"], atol=0.051
        )
        stress = rows["taw_mm"].to_numpy() - rows["raw_mm"].to_numpy()
        np.testing.assert_allclose(unpacked(found["values"]["stress_mm"])[:, place], stress, atol=0.051)


def test_area_means_of_stands_by_county(run, page):
    found = numbers_of(page)
    stand = run.stand
    own = stand["kind"].to_numpy() == "stand"
    county = found["counties"][0]["id"]
    here = own & (stand["county_id"].to_numpy().astype(str) == county)
    area = stand["area_km2"].to_numpy()[here]
    expected = (stand["water_left_pct"].to_numpy()[:, here] * area).sum(axis=1) / area.sum()
    packed = found["values"]["water_left_pct"]
    np.testing.assert_allclose(unpacked(packed)[:, 0], expected, atol=0.5 * packed["step"] + 1e-9)


def test_it_asks_for_nothing_and_forbids_it(page):
    assert "default-src 'none'" in page
    assert "connect-src" not in page  # none by default
    ours = re.sub(r"<script>.*?</script>", "", page, flags=re.S)
    assert not re.findall(r"(?:src|href)=\"(?!data:)[^\"]*\"", ours)
    assert "@import" not in ours
    assert "url(http" not in ours


def test_names_are_never_markup(run):
    names = run.names.copy()
    county = names["kind"] == "county"
    names.loc[county, "name"] = HOSTILE
    cover = names["kind"] == "cover"
    names.loc[cover, "name"] = HOSTILE
    hostile = replace(run, names=names, settings={**run.settings, "title": HOSTILE})
    text = page_text(hostile)
    assert "<script>alert" not in text
    assert "\u2028" not in text
    assert numbers_of(text)["counties"][0]["name"] == HOSTILE
    assert f"<h1>{HOSTILE.replace('&', '&amp;').replace('<', '&lt;').replace('>', '&gt;')}".split('"')[0] in text


def test_it_says_what_the_day_rests_on_and_the_cautions(run, page):
    for part in rests_on(run, run.dates[-1]):
        assert part.text in page
    for words in ("not a warning product", "local water law", "effect of the crops", "not the error of the method"):
        assert words in page


def test_outlines_become_shapes_and_counties_without_one_dots(run):
    first = run.county["county_id"].to_numpy().astype(str)[0]
    ring = np.array([[-95.0, 41.0], [-94.5, 41.0], [-94.5, 41.5], [-95.0, 41.5], [-95.0, 41.0]])
    drawn = replace(run, outlines={first: Outline(first, "First", ((ring,),))})
    counties = numbers_of(page_text(drawn))["counties"]
    assert counties[0]["path"].startswith("M")
    assert counties[0]["path"].count("L") == 4
    assert counties[1]["path"] == ""
    assert counties[1]["r"] > 0.0


def test_a_long_run_over_many_counties_stays_small(make, tmp_path):
    """100 counties and 180 days: under 10 MB, what is left out is said."""
    large = make(counties=100, days=180)
    start = time.perf_counter()
    write_page(large, tmp_path / "page.html")
    print(f"{time.perf_counter() - start:.1f} s")
    assert (tmp_path / "page.html").stat().st_size < 10e6


def test_a_run_without_air_has_a_page(make):
    bare = make(counties=2, days=12)
    county = bare.county.drop_vars([name for name in bare.county if str(name).startswith(("contribution", "hourly"))])
    blank = pd.DataFrame(columns=bare.contribution.columns)
    found = numbers_of(page_text(replace(bare, county=county, contribution=blank)))
    assert "contribution_c" not in found["values"]
    assert found["sources"] == []


def test_a_country_keeps_the_days_that_fit_and_says_so(make):
    """800 counties and 120 days would be over 20 MB: the last days stay, and the day asked for is among them."""
    large = make(counties=800, days=120)
    for day, last in ((None, large.dates[-1]), (large.dates[60], large.dates[-1])):
        found = numbers_of(page_text(large, day))
        kept = len(found["dates"])
        assert kept < 120
        assert found["daysLeftOut"] == 120 - kept
        wanted = large.dates[-1] if day is None else day
        assert found["dates"][found["day"]] == str(wanted)
        packed = found["values"]["et_county_mm"]
        listed = large.county["et_county_mm"].sel(date=wanted).to_numpy()
        np.testing.assert_allclose(unpacked(packed)[found["day"]], listed, atol=0.5 * packed["step"] + 1e-9)
        assert len(page_text(large, day)) < 12e6
        assert str(last) >= found["dates"][-1]
