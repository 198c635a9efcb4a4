"""The results workbook: numbers as in the tables, in people's units; nothing printed that must not be."""

import dataclasses
import datetime as dt
import zipfile

import numpy as np
import openpyxl
import pandas as pd
import pytest

from etflux.crops import Stage
from etflux.findings import Finding
from etflux.results.summary import values
from etflux.variables import flag_bits, from_si
from etflux.workbook.report import SHEETS, write_report
from etflux.workbook.report_days import choose_window, source_words, stand_columns
from etflux.workbook.report_sheet import clean_text
from etflux.workbook.report_words import CAUTIONS, marked_words, missing_reason, paragraph, remark_letters, shown


def _written(results, tmp_path, **options):
    path = tmp_path / "results.xlsx"
    write_report(results, path, **options)
    return openpyxl.load_workbook(path)


@pytest.fixture(scope="module")
def books(make, tmp_path_factory):
    """The same run for SI and for US readers, with the workbook of each."""
    made = {units: make(counties=3, days=110, units=units) for units in ("si", "us")}
    return {units: (run, _written(run, tmp_path_factory.mktemp(units))) for units, run in made.items()}


def _texts(sheet):
    return [str(cell) for row in sheet.iter_rows(values_only=True) for cell in row if cell is not None]


def _rows(sheet, first="Date"):
    """Table of a sheet by its headings; block names and units stay in the headings."""
    rows = list(sheet.iter_rows(values_only=True))
    start = next(number for number, row in enumerate(rows) if row[0] == first)
    return pd.DataFrame(rows[start + 1 :], columns=rows[start])


@pytest.mark.parametrize("units", ["si", "us"])
def test_sheets_follow_the_readers_questions(books, units):
    assert books[units][1].sheetnames == [*SHEETS, "Chart data"]


@pytest.mark.parametrize(("units", "contribution", "flux", "water", "volume"), [
    ("si", "°C", "W/m²", "mm/day", "10⁶ m³"), ("us", "°F", "W/m²", "in/day", "acre-ft"),
])  # fmt: skip
def test_headlines_equal_the_tables(books, units, contribution, flux, water, volume):
    run, book = books[units]
    table = run.table("county_daily")
    today = table[table["date"] == table["date"].max()].merge(run.table("counties"), on="county_id")
    texts = _texts(book["Brief"])

    def mean(name):
        has = today[name].notna()
        return np.average(today[name][has], weights=today["area_km2"][has])

    for name, unit, digits in (
        ("contribution_c", contribution, 1),
        ("le_county_w_m2", flux, 0),
        ("et_county_mm", water, 2),
    ):
        assert f"{from_si(mean(name), name, units):.{digits}f} {unit}" in texts, name
    total = from_si(today["water_volume_hm3"].sum(), "water_volume_hm3", units)
    assert f"{total:,.{0 if units == 'us' else 2}f} {volume}" in texts


def test_a_contribution_of_2_6_degc_reads_4_7_degf(make, tmp_path):
    made = make(counties=2, days=20, units="us")
    county = made.county.copy(deep=True)
    county["contribution_c"][-1] = 2.6
    county["flags"][:] = 0
    book = _written(dataclasses.replace(made, county=county), tmp_path)
    assert "4.7 °F" in _texts(book["Brief"])
    last = _rows(book["County days"]).query("Date == @dt.datetime(2031, 4, 20)", local_dict={"dt": dt})
    assert last["Crops added (°F)"].tolist() == pytest.approx([4.68, 4.68])
    assert "36.7" not in " ".join(_texts(book["Brief"]))


def test_us_readers_see_no_si_unit_that_has_a_us_one(books):
    book = books["us"][1]
    texts = [text for sheet in book if sheet.title != "What was run" for text in _texts(sheet)]
    texts += [str(cell.value) for cell in book["What was run"]["B"]]  # the sentences beside the values quote sources
    for unit in ("(°C)", "(mm)", "(mm/day)", "(m)", "km²", "10⁶ m³", "MJ/m²", " °C", " mm", " km"):
        assert not [text for text in texts if unit in text], unit


@pytest.mark.parametrize("units", ["si", "us"])
def test_stand_days_are_the_table(books, units):
    run, book = books[units]
    sheet = _rows(book["Stand days"])
    table = run.table("stand_daily")
    table = table[table["kind"] == "stand"]
    assert len(sheet) == len(table)
    depth = "mm" if units == "si" else "in"
    order = ["unit_id", "date"]
    stands = run.stand["unit_id"].to_numpy()
    table = table.assign(place=table["unit_id"].map({name: n for n, name in enumerate(stands)})).sort_values(
        ["place", "date"]
    )
    assert order[1] == "date"
    assert sheet["Date"].tolist() == [day.to_pydatetime() for day in table["date"]]
    for heading, name, tolerance in (
        (f"Roots lack ({depth})", "dr_mm", 1e-3), (f"Crop water use ({depth}/day)", "et_mm", 1e-4),
        (f"Rain and snow ({depth})", "rain_stand_mm", 1e-3),
    ):  # fmt: skip
        assert sheet[heading].astype(float).to_numpy() == pytest.approx(
            from_si(table[name], name, units), abs=tolerance
        )


def test_need_is_never_finer_than_a_twentieth_inch(books):
    for units, step in (("us", 0.05), ("si", 2.0)):
        need = _rows(books[units][1]["Stand days"])[f"Irrigation need ({'in' if units == 'us' else 'mm'})"].dropna()
        assert len(need) > 10
        assert need.max() > 0.0
        assert (need / step).astype(float).to_numpy() == pytest.approx(np.round(need.astype(float) / step), abs=1e-6)
        assert from_si(1.27, "need_mm", units) <= step + 1e-9  # 0.05 in is 1.27 mm


def test_no_stress_before_v6_and_no_need_after_r6(books):
    run, _ = books["si"]
    own = run.stand.isel(unit_id=np.flatnonzero(run.stand["kind"].to_numpy() == "stand"))
    columns, _ = stand_columns(run, own, "si")
    by_name = {column.heading: column.values for column in columns}
    stage = values(own, "stage_code").T.reshape(-1)
    outside = (stage <= Stage.INITIAL) | (stage >= Stage.MATURE)
    assert outside.any()
    assert not outside.all()
    for name in ("Stress coefficient", "Days to stress (days)", "Irrigation need (mm)"):
        assert np.isnan(by_name[name][outside]).all(), name
    inside = by_name["Stress coefficient"][~outside]
    assert np.isfinite(inside).all()
    rainfed = by_name["Water"] == "rainfed"
    assert np.isnan(by_name["Irrigation need (mm)"][rainfed]).all()


def test_estimated_and_provisional_days_are_marked_in_words_and_tint(books):
    run, book = books["si"]
    sheet = _rows(book["County days"])
    table = run.table("county_daily").sort_values(["county_id", "date"])
    marked = (table["provisional"] != 0) | (table["estimated_share_pct"] > 0)
    assert marked.any()
    assert (sheet["Marked"].notna().to_numpy() == marked.to_numpy()).all()
    assert "40 % of the weather estimated" in set(sheet["Marked"])
    cells = book["County days"]
    fills = {cells.cell(row=6 + n, column=4).fill.fgColor.rgb for n in np.flatnonzero(marked.to_numpy())}
    assert fills == {"FFF6F0DC"}
    plain = {cells.cell(row=6 + n, column=4).fill.fill_type for n in np.flatnonzero(~marked.to_numpy())}
    assert plain == {None}


def test_a_missing_contribution_is_blank_with_its_reason_in_words(books):
    run, book = books["si"]
    sheet = _rows(book["County days"])
    missing = sheet["Crops added (°C)"].isna()
    assert missing.any()
    assert sheet["Why there is no number"].notna().to_numpy().tolist() == missing.tolist()
    reasons = set(sheet["Why there is no number"].dropna())
    assert "no valid mixing depth: the mixed air would be saturated" in reasons
    assert "the air was not computed" in reasons
    assert (sheet["Contribution is"][missing] == "no value").all()


def test_county_below_the_share_shows_a_range_and_no_rank(books):
    run, book = books["si"]
    bare = run.county["county_id"].to_numpy()[-1]
    rows = [row for row in book["Brief"].iter_rows(values_only=True) if row[0] == "County 3"]
    assert len(rows) == 1
    low, high = (
        float(run.county[name].sel(county_id=bare).to_numpy()[-1])
        for name in ("contribution_low_c", "contribution_high_c")
    )
    assert rows[0][6] == f"{low:.1f} to {high:.1f}"
    assert rows[0][9] == "a range only"
    assert rows[0][3] == "none", "no stands in this county"


def test_brief_lists_the_least_certain_county_first(make, tmp_path):
    made = make(counties=12, days=20)
    book = _written(made, tmp_path)
    column = [row[9] for row in book["Brief"].iter_rows(min_row=10, max_row=21, values_only=True)]
    order = ["no value", "a range only", "low", "fair", "good"]
    ranks = [order.index(text) for text in column]
    assert ranks == sorted(ranks)
    assert {0, 1, 4} <= set(ranks)


def test_brief_is_one_landscape_page_with_cautions_and_identity(books):
    for units, paper in (("si", "9"), ("us", "1")):
        run, book = books[units]
        brief = book["Brief"]
        assert (brief.page_setup.fitToWidth or 1, brief.page_setup.fitToHeight or 1) == (1, 1)
        assert brief.sheet_properties.pageSetUpPr.fitToPage
        assert brief.page_setup.orientation == "landscape"
        assert str(brief.page_setup.paperSize) == paper
        text = " ".join(_texts(brief))
        for caution in CAUTIONS:
            assert caution in text
        for part in (run.run_id, "2031-10-01 06:10 UTC", "upper_basin.xlsx", "sha256 abababababab"):
            assert part in text
        assert run.run_id in brief.oddFooter.left.text
        assert len(brief._charts) == 2


def test_one_county_puts_its_stands_on_the_brief(make, tmp_path):
    book = _written(make(counties=1, days=120, units="us"), tmp_path)
    rows = list(book["Brief"].iter_rows(values_only=True))
    start = next(number for number, row in enumerate(rows) if row[0] == "Stand")
    listed = [row[0] for row in rows[start + 1 :] if row[0] and str(row[0]).startswith("S01")]
    assert len(listed) == 6
    assert "S01-1, early" in listed


def _without_stands(run):
    rest = np.flatnonzero(run.stand["kind"].to_numpy() == "rest")
    return dataclasses.replace(run, stand=run.stand.isel(unit_id=rest))


@pytest.mark.parametrize("spoil", [
    lambda run: run,
    _without_stands,
    lambda run: dataclasses.replace(run, county=run.county.drop_vars(["contribution_c", "flags", "le_by_tag_w_m2"])),
    lambda run: dataclasses.replace(run, findings=[], fills=run.fills.iloc[:0], marks=run.marks.iloc[:0],
                                    budget=run.budget.iloc[:0], methods=run.methods.iloc[:0],
                                    names=run.names.iloc[:0]),
], ids=["no air", "no stands", "variables left out", "empty tables"])  # fmt: skip
def test_every_sheet_is_written_whatever_is_missing(make, tmp_path, spoil):
    book = _written(spoil(make(counties=2, days=12, air=False)), tmp_path)
    assert book.sheetnames == [*SHEETS, "Chart data"]
    assert "There is no number for the dew point" in " ".join(_texts(book["Brief"]))


def test_no_text_becomes_a_formula_or_a_link(make, tmp_path):
    evil = '=HYPERLINK("http://example.org","x")'
    names = pd.DataFrame(
        {
            "kind": ["county", "cover", "station"],
            "id": ["99001", "corn", "N1"],
            "name": [evil, "+1+1", "http://example.org"],
        }
    )
    made = make(
        counties=2, days=12, names=names, findings=[Finding("value-repeated", "weather", 1, "t_min_c", evil, "=1+1")]
    )
    made = dataclasses.replace(
        made, settings={**made.settings, "title": "=1+1"}, source={"path": "=evil.xlsx", "sha256": "00"},
        methods=pd.DataFrame([("@a", "-b", "\x07bell")], columns=["step", "method", "source"]),
    )  # fmt: skip
    book = _written(made, tmp_path)
    found = [cell for sheet in book for row in sheet.iter_rows() for cell in row if cell.value is not None]
    assert not [cell.coordinate for cell in found if cell.data_type == "f" or cell.hyperlink]
    assert evil in {cell.value for cell in found}
    with zipfile.ZipFile(tmp_path / "results.xlsx") as content:
        inside = [content.read(name) for name in content.namelist() if name.startswith("xl/worksheets/sheet")]
    assert not any(b"<f>" in text or b"<hyperlink" in text for text in inside)


def test_too_many_rows_become_a_named_window(make, tmp_path):
    made = make(counties=3, days=30)
    made = dataclasses.replace(made, settings={**made.settings, "stand_rows_limit": 50})
    book = _written(made, tmp_path, on="2031-04-20")
    sheet = _rows(book["Stand days"])
    assert len(sheet) <= 50
    assert sheet["Date"].max() == dt.datetime(2031, 4, 20)
    assert "the whole season is in stand_daily.csv" in book["Stand days"]["A2"].value


def test_windows_end_at_the_day_and_never_pass_the_limit():
    for n_days, n_ids, limit, day in ((100, 10, 200, 60), (100, 10, 200, 3), (5, 500, 100, 2), (10, 0, 100, 9)):
        window = choose_window(n_days, n_ids, limit, day)
        days = range(n_days)[window.days]
        assert day in days
        assert len(days) * len(range(n_ids)[window.ids]) <= limit


def test_a_failure_leaves_no_file(make, tmp_path, monkeypatch):
    from etflux.workbook import report

    monkeypatch.setattr(report.report_tables, "closure", lambda *arguments: 1 / 0)
    with pytest.raises(ZeroDivisionError):
        write_report(make(counties=1, days=5), tmp_path / "r.xlsx")
    assert list(tmp_path.iterdir()) == []


def test_a_file_that_cannot_be_made_is_an_os_error(make, tmp_path):
    with pytest.raises(OSError, match="nowhere"):
        write_report(make(counties=1, days=5), tmp_path / "nowhere" / "r.xlsx")


def test_closure_names_terms_and_leaves_nothing_over(books):
    run, book = books["si"]
    sheet = book["Closure"]
    rows = list(sheet.iter_rows(values_only=True))
    start = next(number for number, row in enumerate(rows) if row[0] == "For" and "Rain and snow (mm)" in row)
    water = pd.DataFrame(rows[start + 1 :], columns=rows[start]).dropna(subset=["For"])
    assert len(water) == run.stand.sizes["unit_id"]
    assert water["Closure (mm)"].astype(float).abs().max() < 1e-9
    assert water["Rain and snow (mm)"].astype(float).tolist() == pytest.approx(
        [float(run.stand["rain_stand_mm"][:, 0].sum())] * len(water)
    )


def test_a_mark_of_every_year_is_shown_for_the_year_of_the_record(make, tmp_path):
    made = make(counties=1, days=60)
    years = pd.DataFrame(
        [("S01-2", "greenup", pd.Timestamp(f"{year}-04-05"), "freezes") for year in (2030, 2031, 2032)]
    )
    years.columns = made.marks.columns
    book = _written(dataclasses.replace(made, marks=pd.concat([made.marks, years], ignore_index=True)), tmp_path)
    sheet = _rows(book["Growth stages"], first="County").set_index("Stand")
    assert sheet.loc["S01-2", "Green-up"] == dt.datetime(2031, 4, 5)
    assert sheet.loc["S01-2", "Planting"] == dt.datetime(2031, 4, 19)
    assert sheet.loc["S01-2", "Dates from"] == "heat units; freezes"


def test_stations_say_what_was_filled_and_which_checks_spoke(books):
    _, book = books["si"]
    text = " ".join(_texts(book["Stations"]))
    assert "ratio to clear sky of the neighbour N1" in text
    assert "drift by more than 5 %" in text
    assert "Hargreaves (mm)" in text
    days = _rows(book["Station days"])
    assert days["Not measured here"].notna().sum() == 4
    assert set(days["Not measured here"].dropna()) == {"solar radiation: from a neighbour station"}


def test_settings_that_were_changed_come_first(books):
    _, book = books["us"]
    rows = list(book["What was run"].iter_rows(values_only=True))
    start = next(number for number, row in enumerate(rows) if row[0] == "Setting")
    listed = [row[:2] for row in rows[start + 1 :] if row[0]]
    changed = [value.endswith("(changed)") for _, value in listed]
    assert changed == sorted(changed, reverse=True)
    assert sum(changed) == 2
    assert dict(listed)["Killing frost"] == "28.04 °F"


def test_shown_rounds_large_sums_and_dashes_what_is_missing():
    assert shown("water_volume_hm3", 22.4396, "us") == "18,190 acre-ft"
    assert shown("area_km2", 12000.0, "us", decimals=0) == "2,965,000 acres"
    assert shown("contribution_c", float("nan"), "us") == "–"


def test_words_of_marks_and_reasons():
    forecast, weather = flag_bits("provisional")["forecast"], flag_bits("provisional")["weather"]
    assert marked_words([0.0, 20.0, 40.0], [0, 0, weather | forecast]).tolist() == [
        "", "20 % of the weather estimated", "40 % of the weather estimated; forecast weather",
    ]  # fmt: skip
    short = flag_bits("air")["energy_short"]
    assert missing_reason([short, short, 0], [np.nan, 1.0, np.nan]).tolist() == [
        "evaporation above the available energy", "", "the air was not computed",
    ]  # fmt: skip


def test_letters_and_legend_agree():
    bits = flag_bits("air")
    letters, legend = remark_letters(np.array([bits["cumulus"] | bits["heavy_rain"], 0]), np.array([0, 8]))
    assert letters == ["a, b", "c"]
    assert [line[:2] for line in legend] == ["a:", "b:", "c:"]
    assert "clouds" in legend[0]
    assert "forecast" in legend[2]


def test_paragraph_reads_as_sentences(make):
    run = make(counties=3, days=60, units="us")
    text = paragraph(run, run.summary(), "us")
    assert text.startswith("On 30 May 2031 the ground of the region (3 counties, 370,700 acres) gave ")
    assert "nan" not in text
    assert "  " not in text
    assert text.endswith(".")
    assert "°C" not in text


def test_station_words_list_every_value_that_was_not_measured(small):
    station = small.station.copy(deep=True)
    station["t_max_c_source"][0, 0] = flag_bits("source")["neighbour"] | flag_bits("source")["forecast"]
    assert source_words(station)[0] == "highest temperature: from a neighbour station, forecast"


@pytest.mark.parametrize(
    ("text", "expected"), [("a\x00b\x1f", "ab"), (None, ""), (float("nan"), ""), ("x" * 40000, "x" * 32000)]
)
def test_text_that_a_workbook_cannot_hold_is_mended(text, expected):
    assert clean_text(text) == expected


def test_other_worlds_that_were_not_run_say_so(make, tmp_path):
    """A sheet of blanks would leave its reader wondering."""
    made = make(counties=2, days=12)
    quiet = dataclasses.replace(made, settings={**made.settings, "air_worlds": False})
    for run, words in ((quiet, "turned off in the settings"), (made, "without a number")):
        lines = [cell.value for cell in _written(run, tmp_path)["Other worlds"]["A"] if cell.value]
        assert words in lines[-1]
        assert any("effect of the crops" in line for line in lines)
