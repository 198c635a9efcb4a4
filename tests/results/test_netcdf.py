"""results.nc: opens with xarray as it is, says what every number means, holds every bit."""

import warnings
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from etflux.results.netcdf import attributes_of, contribution_arrays, write_netcdf
from etflux.results.tables import table_names, udunits
from etflux.variables import flag_bits, quantities, units

# Spelled as the CF conventions and the udunits library know them.
UNITS_ALLOWED = {
    "1", "degC", "mm", "mm day-1", "W m-2", "MJ m-2 day-1", "m s-1", "kPa", "m", "km", "km2", "1e6 m3", "percent",
    "g kg-1", "day", "hour", "degrees_north", "degrees_east",
}  # fmt: skip


@pytest.fixture(scope="module")
def path(small, tmp_path_factory):
    path = tmp_path_factory.mktemp("nc") / "results.nc"
    write_netcdf(small, path)
    return path


def _open(path, group):
    with warnings.catch_warnings():
        warnings.simplefilter("error")  # the way anybody opens it, without options, gives no warning
        return xr.open_dataset(path, group=group, engine="h5netcdf")


@pytest.mark.parametrize("group", ["station", "stand", "county"])
def test_opens_without_options_and_holds_every_bit(small, path, group):
    with _open(path, group) as found:
        xr.testing.assert_equal(found.load(), getattr(small, group))
        for name, variable in found.variables.items():
            if variable.dtype.kind == "f" and name not in {"date"}:
                assert variable.attrs["units"] in UNITS_ALLOWED, name
                assert variable.attrs["long_name"], name


def test_root_says_what_it_is(small, path):
    with _open(path, None) as root:
        assert root.attrs["Conventions"] == "CF-1.11"
        assert root.attrs["run_id"] == small.run_id
        assert root.attrs["input_sha256"] == "ab" * 32
        assert root.attrs["history"].startswith("2031-10-01T06:10:00+00:00 etflux")


def test_temperature_differences_are_marked(path):
    with _open(path, "county") as county:
        for name in ("contribution_c", "contribution_low_c", "contribution_same_day_c"):
            assert county[name].attrs["units_metadata"] == "temperature: difference"
            assert "standard_name" not in county[name].attrs
        assert county["dew_point_mixed_c"].attrs["units_metadata"] == "temperature: on_scale"
        assert county["dew_point_mixed_c"].attrs["standard_name"] == "dew_point_temperature"
        assert county["le_county_w_m2"].attrs["standard_name"] == "surface_upward_latent_heat_flux"


def test_flags_have_masks_and_meanings_of_the_registry(path):
    with _open(path, "county") as county, _open(path, "station") as station:
        for variable, registry in (
            (county["flags"], "air"), (county["provisional"], "provisional"), (station["rs_mj_m2_d_source"], "source"),
        ):  # fmt: skip
            bits = {name: bit for name, bit in flag_bits(registry).items() if bit}
            assert variable.attrs["flag_masks"].tolist() == list(bits.values())
            assert variable.attrs["flag_values"].tolist() == list(bits.values())
            assert variable.attrs["flag_meanings"].split() == list(bits)
            assert variable.attrs["flag_masks"].dtype == variable.dtype
        assert station["rs_mj_m2_d"].attrs["ancillary_variables"] == "rs_mj_m2_d_source"


def test_stage_codes_are_spelled_out(path):
    with _open(path, "stand") as stand:
        attributes = stand["stage_code"].attrs
        assert attributes["flag_values"].tolist() == list(range(8))
        assert len(attributes["flag_meanings"].split()) == 8


def test_ids_are_text_with_their_zeros(make, tmp_path):
    made = make(counties=1, days=3)
    county = made.county.assign_coords(county_id=np.array(["01001"], object))
    from dataclasses import replace

    write_netcdf(replace(made, county=county), tmp_path / "r.nc")
    with _open(tmp_path / "r.nc", "county") as found:
        assert found["county_id"].to_numpy().tolist() == ["01001"]
        assert found["name"].to_numpy().tolist() == ["County 1"]


def test_every_unit_that_a_result_may_have_has_a_spelling():
    from etflux.results import columns

    for table in table_names():
        for column in columns(table):
            if column in quantities() and quantities()[column].unit:
                assert udunits(quantities()[column].unit)
    assert set(map(str, ("°C", "mm/day"))) <= set(units())


def test_attributes_of_second_opinions_and_hours():
    assert attributes_of("eto_hargreaves_mm")["units"] == "mm day-1"
    hourly = attributes_of("hourly_contribution_c")
    assert hourly["units_metadata"] == "temperature: difference"
    assert hourly["long_name"].endswith("by the hour")


def test_contribution_by_cover_and_age_is_in_the_file_as_an_array(small, tmp_path):
    write_netcdf(small, tmp_path / "results.nc")
    with xr.open_dataset(tmp_path / "results.nc", engine="h5netcdf", group="contribution") as found:
        array = found["contribution_by_cover_and_age_c"].load()
    rows = small.table("contribution")
    assert array.attrs["units_metadata"] == "temperature: difference"
    for row in rows.sample(20, random_state=1).itertuples():
        at = array.sel(date=row.date, county_id=row.county_id, cover=row.cover, age_d=row.age_d)
        assert float(at) == pytest.approx(row.contribution_c, rel=1e-12)
    crops = [name for name in array["cover"].to_numpy() if name != "rest"]
    total = array.sel(cover=crops).sum(["cover", "age_d"], skipna=False)
    there = np.isfinite(small.county["contribution_c"])
    np.testing.assert_allclose(total.to_numpy()[there], small.county["contribution_c"].to_numpy()[there], atol=1e-9)
    assert np.isnan(array.to_numpy()[~there.to_numpy()]).all()


def test_origins_of_a_day_without_wind_and_what_was_not_varied_are_missing_not_zero(small):
    dates, ids = small.dates, small.county["county_id"].to_numpy().astype(str)
    ones = np.ones(small.county["contribution_c"].shape)
    county = small.county.assign(contribution_c=(small.county["contribution_c"].dims, ones))
    moistened_by = pd.DataFrame({"date": dates[:1], "county_id": ids[:1], "from_county_id": ids[:1],
                                 "contribution_c": [1.0]})  # fmt: skip
    ranges = pd.DataFrame({"date": dates[:1], "county_id": ids[:1], "varied": ["depth"], "contribution_low_c": [0.5],
                           "contribution_high_c": [1.5]})  # fmt: skip
    found = contribution_arrays(replace(small, county=county, moistened_by=moistened_by, ranges=ranges))
    origin, lowest = found["contribution_by_origin_c"], found["contribution_lowest_c"]
    assert origin.to_numpy()[0, :, 0].tolist() == [1.0, *[0.0] * (len(ids) - 1)]
    assert len(dates) > 1
    assert np.isnan(origin.to_numpy()[1:]).all()
    assert float(lowest[0, 0, 0]) == 0.5
    assert int(np.isfinite(lowest).sum()) == 1
