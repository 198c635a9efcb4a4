"""Corn heat units and stages as university extension services print them; where each was seen stands at its row.

Method in all of them: (Tmax + Tmin)/2 - 50 °F with temperatures kept between 50 and 86 °F.
"""

import csv
from importlib.resources import files

import numpy as np
import pytest

from etflux.marks import ANNUAL_MARKS, V8_SHARE, heat_units

F_PER_C = 1.8


def of_fahrenheit(high, low):
    return heat_units((np.asarray(high) - 32.0) / F_PER_C, (np.asarray(low) - 32.0) / F_PER_C) * F_PER_C


@pytest.mark.parametrize(
    ("high", "low", "units"),
    [
        (87, 63, 24.5),  # OSU Extension, "Corn growing degree days", June 2023 (as printed by ocj.com)
        (90, 65, 25.5),  # "Calculating growing degree days", 2018 (wausharaargus.com)
        (72, 46, 11.0),  # the same
        (63, 42, 6.5),  # the same
        (90, 55, 20.5),  # farmprogress.com prints 17.5, a misprint: (86 + 55)/2 - 50
    ],
)
def test_worked_days(high, low, units):
    assert of_fahrenheit(high, low) == pytest.approx(units, abs=0.05)


def test_sum_of_three_days():
    """43 (wausharaargus.com, 2018)."""
    assert of_fahrenheit([90, 72, 63], [65, 46, 42]).sum() == pytest.approx(43.0, abs=0.05)


def test_limits_are_10_and_30_c():
    """50 and 86 °F; a cold day has none, and no day more than 20 °C-days."""
    assert heat_units(9.0, -3.0) == 0.0
    assert heat_units(41.0, 33.0) == 20.0


@pytest.fixture(scope="module")
def table():
    text = files("etflux.tables").joinpath("heat_units.csv").read_text(encoding="utf-8")
    rows = [row for row in csv.DictReader(text.splitlines()) if row["cover_id"] == "corn"]
    return {row["mark"]: float(row["heat_units_f"]) for row in rows}


def test_stages_of_a_2700_hybrid(table):
    """V6 475 and VT 1135 (University of Delaware, Weekly Crop Update); V8 600 (UW Madison, corn-dev and W027, 1996);
    emergence 100-120 (OSU); begin dent at 1920 of 2400 (HPRCC corn table, mid group); black layer 2700 for a 113-day
    hybrid (AmeriFlux US-Ne1 management record)."""
    assert table["cover10"] == 475.0
    assert table["v8"] == 600.0
    assert table["full_cover"] == 1135.0
    assert 100.0 <= table["emergence"] <= 120.0
    assert table["late"] / table["maturity"] == pytest.approx(1920.0 / 2400.0)
    assert table["maturity"] == 2700.0
    assert list(table) == list(ANNUAL_MARKS)
    assert list(table.values()) == sorted(table.values())


def test_begin_dent_is_at_four_fifths_in_all_maturity_groups():
    """HPRCC corn table: 1694.5 of 2061.7, 1920 of 2400, 2209.9 of 2834.9; so 0.80 holds to 0.03."""
    for dent, black_layer in ((1694.5, 2061.7), (1920.0, 2400.0), (2209.9, 2834.9)):
        assert dent / black_layer == pytest.approx(0.80, abs=0.025)


def test_v8_between_v6_and_tassel():
    """600 between 475 and 1135."""
    assert pytest.approx((600 - 475) / (1135 - 475)) == V8_SHARE
