"""The IGRA v2 text format: every column, special value and time; no text makes the reader fail.

Columns from NOAA NCEI, "Format Description of IGRA 2 Sounding Data Files"; the sounding is invented.
"""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from etflux import igra

DAY = np.datetime64("2031-07-24")
#        1-12         14-23      25 28   33   38       47       56      64
FILE = """\
#ZZM00099999 2031 07 24 12 1107    5 made-up  made-up   415678  -912345
21     0  97500B  250B  180B  940    10   350    21
10   105  92500A  705A  215A-9999    63    10    85
20   330  85000  1420   155   412 -8888   180   102
30   400  -9999  1500 -9999 -9999 -9999   190   110
22 -9999  20000B12200B -561B-9999 -9999 -9999 -9999
"""


def read(text, first=DAY, last=DAY):
    return igra.read(text.splitlines(), first, last)


def test_every_column_is_read():
    found = read(FILE)
    assert not found.faults
    (balloon,) = found.soundings
    assert (balloon.site_id, balloon.line, str(balloon.time)) == ("ZZM00099999", 1, "2031-07-24T11:07")
    assert (balloon.latitude_deg, balloon.longitude_deg) == (41.5678, -91.2345)
    nan = np.nan
    expected = {
        "lines": [2, 3, 4, 5, 6], "surface": [True, False, False, False, False],
        "pressure_kpa": [97.5, 92.5, 85.0, nan, 20.0], "height_m": [250.0, 705.0, 1420.0, 1500.0, 12200.0],
        "temperature_c": [18.0, 21.5, 15.5, nan, -56.1], "rh_pct": [94.0, nan, 41.2, nan, nan],
        "dew_point_c": [17.0, 15.2, nan, nan, nan], "wind_from_deg": [350.0, 10.0, 180.0, 190.0, nan],
        "wind_speed_m_s": [2.1, 8.5, 10.2, 11.0, nan],
    }  # fmt: skip
    for name, values in expected.items():
        np.testing.assert_allclose(getattr(balloon, name), values, err_msg=name)


def test_line_of_the_format_description_has_the_columns_that_it_says():
    lines = FILE.splitlines()
    assert [lines[0][start - 1 : end].strip() for start, end in igra.HEADER.values()] == [
        "2031", "07", "24", "12", "1107", "5", "415678", "-912345",
    ]  # fmt: skip
    assert [lines[1][start - 1 : end].strip() for start, end in igra.LEVEL.values()] == [
        "0", "97500", "250", "180", "940", "10", "350", "21",
    ]  # fmt: skip


@pytest.mark.parametrize(
    ("hour", "release", "time"),
    [
        (12, 1107, "2031-07-24T11:07"), (0, 2318, "2031-07-23T23:18"), (23, 5, "2031-07-25T00:05"),
        (12, 1199, "2031-07-24T11:30"), (99, 1107, "2031-07-24T11:07"), (12, 9999, "2031-07-24T12:00"),
        (99, 9999, "None"),
    ],
)  # fmt: skip
def test_release_time_goes_before_the_nominal_hour(hour, release, time):
    assert str(igra.release_time(DAY, hour, release)) == time


def test_a_day_on_either_side_is_read_and_the_others_only_counted():
    texts = [FILE.replace("2031 07 24", day)
             for day in ("2031 07 22", "2031 07 23", "2031 07 25", "2031 07 26")]  # fmt: skip
    texts[0] = texts[0].replace("215A", "2x5A")  # of no concern
    found = read("".join(texts))
    assert [str(each.time)[:10] for each in found.soundings] == ["2031-07-23", "2031-07-25"]
    assert (found.headers, found.elsewhen, found.faults) == (4, 2, [])


def test_an_unknown_flag_takes_its_value_out_and_no_other():
    found = read(FILE.replace("705A", "705Q"))
    assert [(fault.line, fault.kind, fault.detail) for fault in found.faults] == [(3, "flag", "height: 'Q'")]
    (balloon,) = found.soundings
    assert np.isnan(balloon.height_m[1])
    assert balloon.temperature_c[1] == 21.5


@settings(max_examples=300, deadline=None)
@given(st.integers(0, len(FILE) - 1), st.text(max_size=6))
def test_no_change_of_a_file_makes_the_reader_fail(place, words):
    found = read(FILE[:place] + words + FILE[place + len(words) :])
    for balloon in found.soundings:
        assert len(balloon.lines) == len(balloon.pressure_kpa)


@settings(max_examples=200, deadline=None)
@given(st.text(alphabet="#0123456789 -AB\n", max_size=400))
def test_no_text_makes_the_reader_fail(text):
    assert read(text).soundings == []
