"""The folder of results: whole or not at all, hashed, closed to 1e-6 mm from its files alone, read back as written."""

import dataclasses
import hashlib
import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from etflux.findings import CannotRead, CannotWrite, Finding
from etflux.outlines import Outline
from etflux.results import default_folder, files, folder_state, read_folder, read_tables, table_names, write_folder
from etflux.results.record import run_identity


@pytest.fixture(scope="module")
def whole(small, tmp_path_factory):
    """A finished folder that no test changes."""
    return write_folder(small, tmp_path_factory.mktemp("whole") / "out", workbook_writer=_workbook)


@pytest.fixture
def quick(monkeypatch):
    """For tests of how files are moved: results.nc, the slow one, is a stand-in."""
    monkeypatch.setattr(files, "write_netcdf", _workbook)


@pytest.fixture
def folder(small, tmp_path, quick):
    """A finished folder to spoil."""
    return write_folder(small, tmp_path / "out", workbook_writer=_workbook)


def _workbook(results, path):
    path.write_text(results.run_id, encoding="utf-8")


def _fails(results, path):
    path.write_text("half", encoding="utf-8")
    raise OSError(28, "No space left on device", str(path))


def _names(folder):
    return sorted(path.name for path in folder.iterdir())


def test_default_folder_is_named_after_the_workbook(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert default_folder("/elsewhere/valley.2031.xlsx") == tmp_path / "valley.2031-etflux"


def test_every_file_is_there_and_hashed(small, whole):
    expected = {f"{name}.csv" for name in table_names()} | {"results.nc", "results.xlsx", "run.json"}
    assert set(_names(whole)) == expected
    record = json.loads((whole / "run.json").read_text(encoding="utf-8"))
    assert set(record["files"]) == expected - {"run.json"}
    for name, row in record["files"].items():
        content = (whole / name).read_bytes()
        assert row == {"sha256": hashlib.sha256(content).hexdigest(), "bytes": len(content)}
    assert record["input"] == {"path": "upper_basin.xlsx", "sha256": "ab" * 32, "etflux_template": 1}
    assert record["run_id"] == small.run_id
    assert record["settings"]["title"] == "Upper Basin, a season"
    assert folder_state(whole) == (True, "")


def test_water_closes_from_the_written_tables_alone(whole):
    found = read_tables(whole, ["stand_daily", "stands"])
    daily = found["stand_daily"].sort_values("date", kind="stable").groupby("unit_id")
    flow = {name: daily[name].sum() for name in (
        "rain_stand_mm", "irrigation_mm", "capillary_rise_mm", "runoff_mm", "drainage_mm", "evaporation_mm",
        "transpiration_mm",
    )}  # fmt: skip
    end = daily[["snow_mm", "dr_mm", "ds_mm"]].last()
    stored = end["snow_mm"] - end["dr_mm"] - end["ds_mm"] - found["stands"].set_index("unit_id")["stored_start_mm"]
    came = flow["rain_stand_mm"] + flow["irrigation_mm"] + flow["capillary_rise_mm"]
    went = flow["runoff_mm"] + flow["drainage_mm"] + flow["evaporation_mm"] + flow["transpiration_mm"]
    assert (came - went - stored).abs().max() < 1e-6
    assert came.min() > 10.0


def test_ten_decimals_close_a_year_in_the_worst_case():
    terms_a_day, days = 7, 366
    assert 0.5 * 10.0**-files.DECIMALS * terms_a_day * days < 1e-6 / 5.0


def test_county_water_use_is_area_times_stands_from_the_written_tables_alone(whole):
    found = read_tables(whole, ["stand_daily", "stands", "counties", "county_daily"])
    rows = found["stand_daily"].merge(found["stands"][["unit_id", "area_km2"]], on="unit_id")
    sums = (rows["et_mm"] * rows["area_km2"]).groupby([rows["date"], rows["county_id"]]).sum()
    area = found["counties"].set_index("county_id")["area_km2"]
    county = found["county_daily"].set_index(["date", "county_id"])["et_county_mm"]
    mean = sums / area.reindex(sums.index.get_level_values("county_id")).to_numpy()
    assert county.to_numpy() == pytest.approx(mean.loc[county.index].to_numpy(), abs=1e-8)


def test_reading_back_gives_the_same_results(small, whole):
    again = read_folder(whole)
    for name in ("station", "stand", "county"):
        xr.testing.assert_equal(getattr(again, name), getattr(small, name))
    for name in ("contribution", "budget", "marks", "fills", "names", "methods"):
        written, read = small.table(name), again.table(name)
        pd.testing.assert_frame_equal(read, written, check_dtype=False)
    assert [finding.record() for finding in again.findings] == [finding.record() for finding in small.findings]
    assert (again.run_id, again.issued, again.version) == (small.run_id, small.issued, small.version)
    assert dict(again.settings) == dict(small.settings)


def test_places_of_stations_are_written_and_read(small, whole):
    written = read_tables(whole, ["stations"])["stations"].set_index("station_id")
    for name in ("latitude_deg", "longitude_deg", "elevation_m"):
        assert written[name].to_dict() == small.station[name].to_series().to_dict()
        assert name in read_folder(whole).station.coords


def test_outlines_are_written_as_geojson_and_read(small, tmp_path):
    ring = np.array([[-95.0, 41.0], [-94.0, 41.0], [-94.0, 42.0], [-95.0, 42.0], [-95.0, 41.0]])
    hole = np.array([[-94.6, 41.4], [-94.6, 41.6], [-94.4, 41.6], [-94.6, 41.4]])
    ids = small.county["county_id"].to_numpy()[:2]
    drawn = {
        ids[0]: Outline(ids[0], "Aldmoor, with a “mark”", ((ring, hole), (ring + 2.0,))),
        ids[1]: Outline(ids[1], "", ((ring + [1.0, 0.0],),)),
    }
    folder = write_folder(dataclasses.replace(small, outlines=drawn), tmp_path / "run")
    text = json.loads((folder / "counties.geojson").read_text(encoding="utf-8"))
    assert text["type"] == "FeatureCollection"
    assert "counties.geojson" in json.loads((folder / "run.json").read_text())["files"]
    again = read_folder(folder).outlines
    assert list(again) == list(drawn)
    assert again[ids[0]].name == drawn[ids[0]].name
    for read, given in zip(again.values(), drawn.values(), strict=True):
        for mine, theirs in zip(read.polygons, given.polygons, strict=True):
            for read_ring, given_ring in zip(mine, theirs, strict=True):
                np.testing.assert_array_equal(read_ring, given_ring)
    assert read_folder(write_folder(small, tmp_path / "without")).outlines == {}
    assert not (tmp_path / "without" / "counties.geojson").exists()


def test_files_beside_the_workbook_make_another_run(small):
    source = dict(small.source)
    plain = run_identity(source, small.settings)
    others = {
        run_identity(source | {key: {"beside.csv": "cd" * 32}}, small.settings)
        for key in ("weather_files", "profile_files", "outlines_file")
    }
    assert plain not in others
    assert run_identity(source | {"weather_files": {}}, small.settings) == plain


def test_a_finding_without_a_row_is_read_back(small, tmp_path):
    """A finding made during the run names a stand and no row; one about a file names neither."""
    found = [
        Finding("check-roots", "stands", subject="stand S1"),
        Finding("value-repeated", "weather", 8, "t_min_c", 14.2),
    ]
    folder = write_folder(dataclasses.replace(small, findings=found), tmp_path / "run")
    again = read_folder(folder).findings
    assert sorted(finding.row is None for finding in again) == [False, True]


def test_ids_keep_their_zeros_and_blanks_stay_blank(make, tmp_path):
    made = make(counties=2, days=8)
    made = dataclasses.replace(made, county=made.county.assign_coords(county_id=np.array(["01001", "NA"], object)))
    table = read_tables(write_folder(made, tmp_path / "out"), ["county_daily"])["county_daily"]
    assert set(table["county_id"]) == {"01001", "NA"}
    assert table["contribution_12_c"].isna().all()
    assert (
        (tmp_path / "out" / "county_daily.csv")
        .read_text(encoding="utf-8")
        .splitlines()[1]
        .startswith("2031-04-01,01001,")
    )


def test_names_that_look_like_formulas_are_text_in_the_file_and_names_when_read(make, tmp_path):
    evil = ['=HYPERLINK("x")', "@here", "+1", "-1", "\tTab", 'two\nlines, and a "quote"']
    names = pd.DataFrame({"kind": "county", "id": [f"C{n}" for n in range(len(evil))], "name": evil})
    out = write_folder(make(counties=1, days=5, names=names), tmp_path / "out")
    text = (out / "names.csv").read_text(encoding="utf-8")
    for start in ("=", "@", "+", "-", "\t"):
        assert f",{start}" not in text
        assert f',"{start}' not in text
    assert read_folder(out).names["name"].tolist() == evil


def test_a_failing_writer_leaves_no_half_output(quick, small, tmp_path):
    with pytest.raises(CannotWrite, match="results.xlsx: No space left"):
        write_folder(small, tmp_path / "out", workbook_writer=_fails)
    assert _names(tmp_path / "out") == []
    assert not folder_state(tmp_path / "out").complete


@pytest.mark.parametrize("error", [KeyboardInterrupt, RuntimeError])
def test_an_interrupted_write_leaves_the_older_run_whole(small, folder, error):
    before = {path.name: path.read_bytes() for path in folder.iterdir()}

    def interrupted(results, path):
        path.write_text("half", encoding="utf-8")
        raise error

    with pytest.raises(error):
        write_folder(small, folder, workbook_writer=interrupted)
    assert {path.name: path.read_bytes() for path in folder.iterdir()} == before
    assert folder_state(folder).complete


def test_a_run_cut_off_while_moving_is_incomplete_and_mends_itself(make, folder, monkeypatch):
    moves = []
    replace = files.os.replace

    def cut_off(source, target):
        moves.append(target)
        if len(moves) == 6:
            raise KeyboardInterrupt
        replace(source, target)

    other = make(counties=3, days=40, seed=7)
    monkeypatch.setattr(files.os, "replace", cut_off)
    monkeypatch.setattr(files.shutil, "rmtree", lambda *arguments, **options: None)  # as when the process is killed
    with pytest.raises(KeyboardInterrupt):
        write_folder(other, folder, workbook_writer=_workbook)
    monkeypatch.undo()
    state = folder_state(folder)
    assert not state.complete
    assert "not the file of this run" in state.reason
    write_folder(other, folder, workbook_writer=_workbook)
    assert folder_state(folder).complete
    assert not list(folder.glob("*.kept-*")), "files of the run that was cut off are known as ours"
    assert json.loads((folder / "run.json").read_text(encoding="utf-8"))["days"] == ["2031-04-01", "2031-05-10"]


def test_a_newer_run_replaces_the_older_one_file_by_file(make, folder):
    newer = make(counties=2, days=12, seed=5)
    write_folder(newer, folder)
    assert folder_state(folder).complete
    assert not (folder / "results.xlsx").exists(), "an unchanged file that this run does not write is cleared"
    assert read_tables(folder, ["stand_daily"])["stand_daily"]["date"].nunique() == 12


def test_what_a_person_changed_or_brought_is_kept(small, folder):
    (folder / "results.xlsx").write_text("with my notes", encoding="utf-8")
    (folder / "notes.txt").write_text("mine", encoding="utf-8")
    assert "results.xlsx is not the file of this run" in folder_state(folder).reason
    write_folder(small, folder, workbook_writer=_workbook)
    assert (folder / "results.kept-1.xlsx").read_text(encoding="utf-8") == "with my notes"
    assert (folder / "notes.txt").read_text(encoding="utf-8") == "mine"
    assert folder_state(folder).complete


def test_a_foreign_file_of_the_same_name_is_refused(quick, small, tmp_path):
    (tmp_path / "county_daily.csv").write_text("somebody else's", encoding="utf-8")
    with pytest.raises(CannotWrite, match="already has county_daily.csv, not written by a run"):
        write_folder(small, tmp_path)
    assert _names(tmp_path) == ["county_daily.csv"]


def test_a_run_json_cannot_point_outside_its_folder(small, folder):
    outside = folder.parent / "precious.txt"
    outside.write_text("precious", encoding="utf-8")
    record = json.loads((folder / "run.json").read_text(encoding="utf-8"))
    record["files"]["../precious.txt"] = {"sha256": files.sha256_of(outside), "bytes": 8}
    (folder / "run.json").write_text(json.dumps(record), encoding="utf-8")
    write_folder(small, folder, workbook_writer=_workbook)
    assert outside.exists()


@pytest.mark.parametrize(
    ("harm", "reason"),
    [
        (lambda folder: (folder / "run.json").unlink(), "no run has been finished here"),
        (lambda folder: (folder / "run.json").write_text("{"), "no run has been finished here"),
        (lambda folder: (folder / "marks.csv").unlink(), "marks.csv is missing"),
        (lambda folder: (folder / "marks.csv").write_text("x"), "marks.csv is not the file of this run"),
    ],
)
def test_an_incomplete_folder_says_why(folder, harm, reason):
    harm(folder)
    assert reason in folder_state(folder).reason
    with pytest.raises(CannotRead, match="no complete results"):
        read_folder(folder)


def test_a_folder_that_cannot_be_made_is_named(small, tmp_path):
    (tmp_path / "file").write_text("x", encoding="utf-8")
    with pytest.raises(CannotWrite, match="file"):
        write_folder(small, tmp_path / "file" / "out")


def test_progress_tells_each_file(quick, small, tmp_path):
    told = []
    write_folder(small, tmp_path / "out", progress=lambda step, share: told.append((step, share)))
    assert told[-1] == ("writing run.json", 1.0)
    assert [share for _, share in told] == sorted(share for _, share in told)


def test_input_is_not_touched_and_its_folders_are_not_told(small, whole):
    text = (whole / "run.json").read_text(encoding="utf-8") + Path(whole / "names.csv").read_text(encoding="utf-8")
    assert "somewhere/" not in text
