"""The page in a real browser: what people do changes what is shown, and what is shown is what the tables say."""

import json
import os
import re
import shutil
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from etflux.brief.page import write_page
from etflux.outlines import Outline
from etflux.results import confidence
from etflux.variables import from_si

BROWSER = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
DRIVER = shutil.which("chromedriver")
if not (BROWSER and DRIVER) and "browser" not in os.environ.get("ETFLUX_REQUIRE", ""):
    pytest.skip("no Chromium with its driver here", allow_module_level=True)

pytestmark = pytest.mark.filterwarnings("ignore::ResourceWarning")  # of the driver's own sockets


@pytest.fixture(scope="module")
def run(make):
    made = make(counties=6, days=40)
    outlines = {}
    ids = made.county["county_id"].to_numpy().astype(str)
    for k, identity in enumerate(ids[:5]):  # the last stays a dot
        west, south = -96.0 + 0.5 * (k % 3), 41.0 + 0.5 * (k // 3)
        ring = np.array(
            [[west, south], [west + 0.5, south], [west + 0.5, south + 0.5], [west, south + 0.5], [west, south]]
        )
        outlines[identity] = Outline(identity, identity, ((ring,),))
    return replace(made, outlines=outlines)


@pytest.fixture(scope="module")
def browser():
    from selenium import webdriver
    from selenium.webdriver.chrome.service import Service

    options = webdriver.ChromeOptions()
    options.binary_location = BROWSER
    for argument in ("--headless=new", "--no-sandbox", "--disable-gpu", "--window-size=1300,900"):
        options.add_argument(argument)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    driver = webdriver.Chrome(service=Service(DRIVER), options=options)
    yield driver
    driver.quit()


@pytest.fixture(scope="module")
def opened(browser, run, tmp_path_factory):
    from selenium.webdriver.support.ui import WebDriverWait

    path = tmp_path_factory.mktemp("page") / "brief.html"
    write_page(run, path)
    browser.get(path.as_uri())
    WebDriverWait(browser, 20).until(lambda page: page.execute_script("return document.body.dataset.ready") == "yes")
    return browser


@pytest.fixture
def page(opened):
    """The page as it opened."""
    opened.execute_script(
        "for (const [id, value, kind] of [['units', 'si', 'change'], ['quantity', 'contribution_c', 'change'],"
        "['threshold', '', 'input'], ['filter', '', 'input'], ['sure', '0', 'change'], ['day', arguments[0], 'input']])"
        "{ const e = document.getElementById(id); e.value = value; e.dispatchEvent(new Event(kind)); }"
        "window.scrollTo(0, 0);",
        "39",
    )
    return opened


def put(page, identity, value, kind="change"):
    page.execute_script(
        "const e = document.getElementById(arguments[0]); e.value = arguments[1];"
        "e.dispatchEvent(new Event(arguments[2]));",
        identity, str(value), kind,
    )  # fmt: skip


def text(page, identity):
    return page.execute_script("return document.getElementById(arguments[0]).textContent", identity)


def table(page):
    """Rows of the table, as shown: county, value, change ..."""
    return page.execute_script(
        "return [...document.querySelectorAll('#table tbody tr')].map(r => [...r.cells].map(c => c.textContent))"
    )


def number(shown):
    return float("nan") if shown == "–" else float(shown.replace("−", "-").replace(",", ""))


def of_day(run, name, day):
    names = run.names_by_id("county")
    found = run.county[name].isel(date=day).to_series()
    return {names.get(identity, identity): value for identity, value in found.items()}


def colours(page):
    return page.execute_script("return [...document.querySelectorAll('#shapes > *')].map(s => s.getAttribute('fill'))")


@pytest.mark.parametrize(
    "name", ["contribution_c", "et_county_mm", "le_county_w_m2", "water_left_pct", "dew_point_mixed_c"]
)
@pytest.mark.parametrize("units", ["si", "us"])
def test_values_shown_are_those_of_the_tables(page, run, name, units):
    put(page, "units", units)
    put(page, "quantity", name)
    shown = {row[0]: number(row[1]) for row in table(page)}
    if name == "water_left_pct":
        stand = run.stand.isel(unit_id=np.flatnonzero(run.stand["kind"].to_numpy() == "stand"), date=39)
        frame = pd.DataFrame({key: stand[key].to_numpy() for key in ("county_id", "water_left_pct", "area_km2")})
        frame["wet"] = frame["water_left_pct"] * frame["area_km2"]
        sums = frame.groupby("county_id")[["wet", "area_km2"]].sum()
        means, names = (sums["wet"] / sums["area_km2"]).to_dict(), run.names_by_id("county")
        expected = {
            names.get(county, county): means.get(county, np.nan) for county in run.county["county_id"].to_numpy()
        }
        places = 0
    else:
        from etflux.variables import quantity

        expected = {county: float(from_si(value, name, units)) for county, value in of_day(run, name, 39).items()}
        places = quantity(name).decimals_in(units)
    assert set(shown) == set(expected)
    for county, value in expected.items():
        assert shown[county] == pytest.approx(value, abs=0.5 * 10.0**-places + 0.06 * 10.0**-places, nan_ok=True), (
            county
        )


def test_slider_and_buttons_change_the_day(page, run):
    before = (text(page, "map-title"), table(page), colours(page))
    put(page, "day", 36, "input")
    after = (text(page, "map-title"), table(page), colours(page))
    assert all(a != b for a, b in zip(after, before, strict=True))
    page.find_element("id", "after").click()
    assert text(page, "day-text") == pd.Timestamp(run.dates[37]).strftime("%-d %B %Y")
    page.find_element("id", "before").click()
    assert table(page) == after[1]


def test_counties_without_a_value_or_with_a_range_only_are_hatched(page, run):
    codes = confidence(
        *(run.county[name].isel(date=39).to_numpy() for name in ("flags", "provisional", "contribution_c"))
    )
    hatched = page.execute_script(
        "return [...document.querySelectorAll('#unranked > *')].map(s => s.style.display !== 'none')"
    )
    assert 0 < sum(hatched) < 6
    assert hatched == (codes <= 1).tolist()
    put(page, "quantity", "eto_mm")
    assert not any(
        page.execute_script(
            "return [...document.querySelectorAll('#unranked > *')].map(s => s.style.display !== 'none')"
        )
    )


def test_chooser_changes_map_table_and_scale(page):
    before = (text(page, "map-title"), colours(page), table(page))
    put(page, "quantity", "et_county_mm")
    assert text(page, "map-title") != before[0]
    assert colours(page) != before[1]
    assert table(page) != before[2]
    assert "mm" in page.execute_script("return document.querySelector('#table thead').textContent")


def test_unit_switch_converts_a_difference_by_nine_fifths(page):
    si = {row[0]: number(row[1]) for row in table(page)}
    put(page, "units", "us")
    us = {row[0]: number(row[1]) for row in table(page)}
    there = [name for name, value in si.items() if np.isfinite(value)]
    assert there
    assert all(us[name] == pytest.approx(1.8 * si[name], abs=0.15) for name in there)
    assert "°F" in text(page, "headline")
    assert "ft" in text(page, "depth-text")


def test_threshold_counts_and_marks_the_counties_past_it(page, run):
    values = of_day(run, "contribution_c", 39)
    limit = float(np.round(np.nanmedian(list(values.values())), 1))
    put(page, "threshold", limit, "input")
    expected = sum(value >= limit - 1e-9 for value in values.values() if np.isfinite(value))
    assert text(page, "past").startswith(f"{expected} of 6 counties")
    assert page.execute_script("return document.querySelectorAll('#shapes .past').length") == expected
    put(page, "quantity", "eto_mm")  # a mark of another quantity would mean something else
    assert text(page, "past") == ""


def test_change_since_the_day_before(page, run):
    today, before = of_day(run, "contribution_c", 39), of_day(run, "contribution_c", 38)
    for row in table(page):
        difference = today[row[0]] - before[row[0]]
        if np.isfinite(difference) and abs(difference) > 0.06:
            assert number(row[2].replace("+", "")) == pytest.approx(difference, abs=0.06)
            assert row[2][0] == ("+" if difference > 0 else "−")


def test_table_sorts_and_filters(page):
    button = "document.querySelector('#table th button[data-key=\"{}\"]').click()"
    page.execute_script(button.format("name"))
    names = [row[0] for row in table(page)]
    assert names == sorted(names)
    page.execute_script(button.format("name"))
    assert [row[0] for row in table(page)] == sorted(names, reverse=True)
    sort = page.execute_script("return document.querySelector('#table th').getAttribute('aria-sort')")
    assert sort == "descending"
    put(page, "filter", names[2][:4].lower(), "input")
    assert all(names[2][:4].lower() in row[0].lower() for row in table(page))
    assert text(page, "caption").startswith(f"{len(table(page))} of 6")
    put(page, "filter", "", "input")
    put(page, "sure", 4)
    assert all(row[5] == "good" for row in table(page))


def test_click_and_keyboard_choose_a_county(page, run):
    from selenium.webdriver.common.keys import Keys

    ids = run.county["county_id"].to_numpy().astype(str)
    names = run.names_by_id("county")
    for identity, act in ((ids[1], "click"), (ids[3], "key"), (ids[5], "click")):
        shape = page.find_element("css selector", f'#shapes [data-id="{identity}"]')
        if act == "click":
            shape.click()
        else:
            shape.send_keys(Keys.ENTER)
        assert text(page, "county-title").startswith(names.get(identity, identity))
        stands = run.stand["stand_id"].to_numpy()[
            (run.stand["county_id"].to_numpy().astype(str) == identity) & (run.stand["kind"].to_numpy() == "stand")
        ]
        listed = page.execute_script("return [...document.getElementById('stand').options].map(o => o.textContent)")
        assert len(listed) == len(stands)
        assert all(str(stand) in option for stand, option in zip(stands, listed, strict=True))


def test_hover_says_value_range_and_how_sure(page, run):
    from selenium.webdriver.common.action_chains import ActionChains

    identity = run.county["county_id"].to_numpy().astype(str)[1]
    shape = page.find_element("css selector", f'#shapes [data-id="{identity}"]')
    ActionChains(page).move_to_element(shape).perform()
    tip = page.find_element("id", "tip")
    assert tip.is_displayed()
    assert run.names_by_id("county").get(identity, identity) in tip.text
    assert "how sure" in tip.text
    assert "since the day before" in tip.text


def chart(page, name):
    return page.execute_script(
        "for (const d of Bokeh.documents) { const m = d.get_model_by_name(arguments[0] + '-data');"
        "if (m) return Object.fromEntries(Object.entries(m.data).map(([k, v]) => [k, [...v]])); }",
        name,
    )


def test_charts_carry_the_numbers_of_the_county_and_day(page, run):
    ids = run.county["county_id"].to_numpy().astype(str)
    page.find_element("css selector", f'#shapes [data-id="{ids[0]}"]').click()
    rows = run.table("contribution")
    crops = [str(tag) for tag in pd.unique(rows["cover"]) if tag != "rest"]
    last = rows[(rows["county_id"] == ids[0]) & (rows["date"] == pd.Timestamp(run.dates[39]))]
    cover = chart(page, "cover")
    for place, crop in enumerate(crops):
        expected = last.loc[last["cover"] == crop, "contribution_c"].sum()
        assert cover[f"part{place}"][-1] == pytest.approx(expected, abs=0.002)
    stand = run.stand.isel(unit_id=np.flatnonzero(run.stand["county_id"].to_numpy().astype(str) == ids[0])[0])
    water = chart(page, "water")
    np.testing.assert_allclose(water["held"], stand["water_left_mm"], atol=0.051)
    np.testing.assert_allclose(water["stress"], stand["taw_mm"] - stand["raw_mm"], atol=0.051)
    put(page, "units", "us")
    np.testing.assert_allclose(chart(page, "water")["held"], stand["water_left_mm"] / 25.4, atol=0.003)


def test_another_stand_changes_the_season(page, run):
    before = chart(page, "water")["held"]
    options = page.execute_script("return [...document.getElementById('stand').options].map(o => o.value)")
    assert len(options) > 1
    put(page, "stand", options[1])
    assert chart(page, "water")["held"] != before


def test_readable_on_a_phone(page):
    page.execute_cdp_cmd(
        "Emulation.setDeviceMetricsOverride", {"width": 390, "height": 844, "deviceScaleFactor": 2, "mobile": True}
    )
    try:
        wide = page.execute_script("return document.documentElement.scrollWidth")
        smallest = page.execute_script(
            "return Math.min(...[...document.querySelectorAll('p, li, td, label')].filter(e => e.offsetParent)"
            ".map(e => parseFloat(getComputedStyle(e).fontSize)))"
        )
    finally:
        page.execute_cdp_cmd("Emulation.clearDeviceMetricsOverride", {})
    assert wide <= 390
    assert smallest >= 12.0


def test_prints_on_two_pages_at_most(page):
    import base64

    document = base64.b64decode(page.execute_cdp_cmd("Page.printToPDF", {"printBackground": True})["data"])
    assert 1 <= len(re.findall(rb"/Type\s*/Page[^s]", document)) <= 2


def test_axe_finds_no_serious_fault(page):
    from importlib.resources import files

    source = next(path for path in files("axe_core_python").rglob("axe.min.js"))
    page.execute_script(source.read_text(encoding="utf-8"))
    found = page.execute_async_script("const done = arguments[0]; axe.run(document).then(r => done(r.violations))")
    serious = [
        (fault["id"], fault["nodes"][0]["html"][:120]) for fault in found if fault["impact"] in {"serious", "critical"}
    ]
    assert serious == []


def test_no_request_leaves_the_page_and_no_error_is_logged(page):
    """Last in the file: after everything that the other tests have done."""
    requests = [
        json.loads(entry["message"])["message"]["params"]["request"]["url"]
        for entry in page.get_log("performance")
        if json.loads(entry["message"])["message"]["method"] == "Network.requestWillBeSent"
    ]
    assert [url for url in requests if not url.startswith(("file://", "data:", "blob:"))] == []
    assert sum(url.startswith("file://") for url in requests) == 1
    assert [entry for entry in page.get_log("browser") if entry["level"] == "SEVERE"] == []
