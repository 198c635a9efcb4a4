"""FAO-56 (Allen et al. 1998), chapters 6, 7 and 9 and Annex 8: crop coefficients, their adjustment, curves and tables.

Examples 27 to 30 and 41 to 43, boxes 14 and 15, figure 36, equation 68, Annex 8; tables 11, 12, 17, 18 and 22 against
the shipped cover table. Tolerance is half the last printed digit unless a comment says why not.
"""

import csv
from importlib.resources import files

import numpy as np
import pytest

from etflux import crops

DIGIT_1, DIGIT_2 = 0.05, 0.005


def dry_bean_curve(day, ini, mid, end, lengths=(25, 25, 30, 20)):
    """Eq. 66 through ends of stages."""
    ends = np.concatenate([[0.0], np.cumsum(lengths)])[:, None]
    values = np.array([ini, ini, mid, mid, end])[:, None]
    return crops.piecewise(np.asarray(day, float)[:, None], ends, values)[:, 0]


# --- climate ---


@pytest.mark.parametrize(("u2", "rh_min", "kc"), [(1.3, 75.0, 1.07), (4.6, 44.0, 1.30)])
def test_example_27_maize_in_two_climates(u2, rh_min, kc):
    """P. 125: Kc,mid of maize, 1.20 and 2 m, at Taipei and Mocha."""
    assert 1.20 + crops.climate_adjustment(u2, rh_min, 2.0) == pytest.approx(kc, abs=DIGIT_2)


@pytest.mark.parametrize(
    ("rh_min", "printed"), [(25.0, (1.25, 1.20, 1.17)), (45.0, (1.20, 1.15, 1.12)), (80.0, (1.10, 1.05, 1.02))]
)
def test_box_14_wheat_by_wind_and_humidity(rh_min, printed):
    """P. 123: wheat, 1.15 and 1 m, at 4, 2 and 1 m/s. RHmin as in figure 32; the box rounds adjustments to 0.05."""
    assert 1.15 + crops.climate_adjustment([4.0, 2.0, 1.0], rh_min, 1.0) == pytest.approx(printed, abs=0.025)


def test_box_15_dry_bean_at_kimberly():
    """P. 130: Kc,mid 1.15 becomes 1.19."""
    assert 1.15 + crops.climate_adjustment(2.2, 30.0, 0.4) == pytest.approx(1.19, abs=DIGIT_2)


def test_equation_68_alfalfa_over_grass():
    """P. 134: 1.2 + adjustment at 0.5 m is 1.24 at Kimberly, the form of eq. 72."""
    assert crops.kc_upper_limit(0.0, 2.2, 30.0, 0.5) == pytest.approx(1.24, abs=DIGIT_2)


def test_example_29_basal_coefficients_of_dry_bean():
    """P. 136: 1.10 becomes 1.14; 0.25 is below 0.45 and stays."""
    assert 1.10 + crops.climate_adjustment(2.2, 30.0, 0.4) == pytest.approx(1.14, abs=DIGIT_2)
    assert crops.ADJUST_FROM == 0.45


def test_limits_of_the_adjustment():
    """P. 123: 1-6 m/s, 20-80 %, 0.1-10 m."""
    assert crops.climate_adjustment(0.2, 95.0, 0.02) == crops.climate_adjustment(1.0, 80.0, 0.1)
    assert crops.climate_adjustment(9.0, 5.0, 14.0) == crops.climate_adjustment(6.0, 20.0, 10.0)


def test_upper_limit_stays_above_kcb():
    """Eq. 72: at least Kcb + 0.05; examples 32 and 35 have 1.30 and 1.21 (pp. 150, 154)."""
    assert crops.kc_upper_limit(1.25, 2.0, 45.0, 2.0) == pytest.approx(1.30)
    assert crops.kc_upper_limit(0.9, 3.0, 20.0, 1.0) == pytest.approx(1.30, abs=DIGIT_2)
    assert crops.kc_upper_limit(0.4, 1.6, 35.0, 0.3) == pytest.approx(1.21, abs=DIGIT_2)


# --- curve ---


def test_figure_36_decades():
    """P. 132: mean Kc of ten decades from the third of May, and ETc with the ETo printed there."""
    kc = dry_bean_curve(np.arange(100) + 0.5, 0.15, 1.19, 0.35).reshape(10, 10).mean(axis=1)
    printed = [0.15, 0.15, 0.20, 0.57, 0.98, 1.19, 1.19, 1.19, 0.98, 0.56]
    assert kc == pytest.approx(printed, abs=DIGIT_2)
    eto = np.array([3.0, 3.4, 4.0, 4.2, 4.5, 5.1, 5.6, 6.0, 5.5, 5.2])
    etc = [0.5, 0.5, 0.8, 2.4, 4.4, 6.1, 6.7, 7.1, 5.4, 2.9]
    assert kc * eto == pytest.approx(etc, abs=DIGIT_1 + 1e-9)  # 0.45 is printed as 0.5


def test_example_28_kc_on_four_days():
    """P. 133."""
    assert dry_bean_curve([20, 40, 70, 95], 0.15, 1.19, 0.35) == pytest.approx([0.15, 0.77, 1.19, 0.56], abs=DIGIT_2)


def test_example_30_kcb_in_the_middle_of_each_stage():
    """P. 141; 0.695 on day 90 is printed as 0.70."""
    kcb = dry_bean_curve([12, 37, 65, 90], 0.15, 1.14, 0.25)
    assert kcb == pytest.approx([0.15, 0.63, 1.14, 0.70], abs=DIGIT_2 + 1e-9)


# --- sparse canopies, chapter 9 ---


@pytest.mark.parametrize(
    ("example", "kcb_full", "cover", "effective", "height", "kcb"),
    [
        ("41, p. 190: vegetation as tall as wide", 1.15, 0.30, 0.41, 2.0, 0.75),
        ("42, p. 191: tomato", 1.17, 0.50, 0.66, 0.75, 0.95),
        ("43, p. 192: olives 10 m apart", 1.29, 0.196, 0.20, 5.0, 0.60),
        ("43, p. 192: olives 5 m by 10 m apart", 1.29, 0.39, 0.40, 5.0, 1.04),
    ],
)
def test_examples_41_to_43_basal_coefficient_of_sparse_plants(example, kcb_full, cover, effective, height, kcb):
    """Eq. 98."""
    found = crops.kcb_from_canopy_cover(kcb_full, cover, height, effective_share=effective)
    assert found == pytest.approx(kcb, abs=DIGIT_2), example


def test_full_cover_of_examples_41_and_43():
    """Eqs. 100 and 101: Kcb,full = 1.15 at 1.5 m/s and 55 % (p. 190), 1.29 at 2 m/s and 25 %, 5 m (p. 192)."""
    assert 1.20 + crops.climate_adjustment(1.5, 55.0, 2.0) == pytest.approx(1.15, abs=DIGIT_2)
    assert 1.20 + crops.climate_adjustment(2.0, 25.0, 5.0) == pytest.approx(1.29, abs=DIGIT_2)


def test_equation_97_leaf_area():
    """Pp. 185-186: nothing at leaf area 0 but the bare soil's; nearly full cover at 3 (1 - exp(-2.1) = 0.878)."""
    assert crops.kcb_from_leaf_area(1.15, 0.0) == pytest.approx(0.15)
    assert crops.kcb_from_leaf_area(1.15, 3.0) == pytest.approx(0.15 + 0.8775, abs=DIGIT_2)
    assert crops.kcb_from_leaf_area(1.15, 8.0) == pytest.approx(1.15, abs=DIGIT_2)


# --- Annex 8 ---


def test_annex_8_roots_and_height_follow_kcb():
    """Pp. 274-279, dry bean: Kcb 0.15 to 1.14, roots 0.20 to 0.80 m; by hand half-way at Kcb 0.645."""
    kcb = np.array([0.15, 0.645, 1.14, 0.70])
    share = crops.growth_share(kcb, 0.15, 1.14)
    assert 0.20 + 0.60 * share[:3] == pytest.approx([0.20, 0.50, 0.80])
    assert np.maximum.accumulate(share)[-1] == 1.0  # eq. 8-2: it does not shrink


def test_annex_8_ground_cover_formula():
    """Box 8.1, column S: fc = ((Kcb - Kc,min) / (Kc,max - Kc,min))^(1 + 0.5 h); example 32 has 0.53 (p. 150)."""
    assert crops.ground_cover_from_kcb(0.9, 1.30, 1.0) == pytest.approx(0.53, abs=DIGIT_2)
    assert crops.ground_cover_from_kcb(0.15, 1.2, 0.4) == pytest.approx((0.01 / 1.05) ** 1.2)
    assert crops.ground_cover_from_kcb(1.6, 1.3, 2.0) == 0.99


# --- tables against covers.csv ---


@pytest.fixture(scope="module")
def covers():
    text = files("etflux.tables").joinpath("covers.csv").read_text(encoding="utf-8")
    return {row["cover_id"]: row for row in csv.DictReader(text.splitlines())}


def numbers(row, *names):
    return [float(row[name]) for name in names]


KCB = {  # table 17, pp. 138-140; 0.12, 0.36: 0.30 of table 18 and 0.90 of table 17 on 40 % of the ground
    "corn": (0.15, 1.15, 0.50), "soybean": (0.15, 1.10, 0.30), "grass_extensive": (0.30, 0.70, 0.70),
    "hay_cut": (0.30, 1.15, 1.10), "woods": (0.40, 1.05, 0.60), "conifers": (0.95, 0.95, 0.95),
    "developed": (0.4 * 0.30, 0.4 * 0.90, 0.4 * 0.90), "bare": (0.0, 0.0, 0.0),
    # table 12, p. 114: water and wetland as single coefficients
    "water": (1.05, 1.05, 1.05), "wetland": (0.30, 1.20, 0.30),
}  # fmt: skip


@pytest.mark.parametrize("cover", KCB)
def test_table_17_basal_coefficients(cover, covers):
    assert numbers(covers[cover], "kcb_ini", "kcb_mid", "kcb_end") == pytest.approx(KCB[cover])


def test_table_17_ranges_and_notes(covers):
    """Rotated grazing 0.80-1.00 and rye grass hay 0.85/1.00/0.95 (p. 139), after killing frost 0.30-0.40 (table 18,
    p. 141); maize dried in the field 0.15 (note 12, p. 138); deciduous trees after leaf drop 0.15 (note 19, p. 140)."""
    rotated, hay = covers["grass_rotated"], covers["hay_averaged"]
    assert numbers(rotated, "kcb_ini", "kcb_end") == [0.30, 0.80]
    assert 0.80 <= float(rotated["kcb_mid"]) <= 1.00
    assert numbers(hay, "kcb_mid", "kcb_end") == [1.00, 0.95]
    assert 0.30 <= float(hay["kcb_ini"]) <= 0.40
    assert float(covers["corn"]["kcb_end_dry"]) == 0.15
    assert float(covers["woods"]["kcb_dormant"]) == 0.15
    for cover in ("grass_rotated", "grass_extensive", "hay_averaged", "hay_cut"):
        assert 0.30 <= float(covers[cover]["kcb_dormant"]) <= 0.40


HEIGHT = {  # table 12, pp. 111-114
    "corn": (2.0, 2.0), "soybean": (0.5, 1.0), "grass_rotated": (0.15, 0.30), "grass_extensive": (0.10, 0.10),
    "hay_averaged": (0.3, 0.3), "hay_cut": (0.7, 0.7), "woods": (4.0, 5.0), "conifers": (10.0, 10.0),
    "wetland": (2.0, 2.0), "developed": (0.10, 0.10),
}  # fmt: skip


@pytest.mark.parametrize("cover", HEIGHT)
def test_table_12_heights(cover, covers):
    low, high = HEIGHT[cover]
    assert low <= float(covers[cover]["height_max_m"]) <= high


LENGTHS = {  # table 11, pp. 105-108
    "corn": (25, 40, 45, 30), "soybean": (20, 35, 60, 25), "woods": (20, 10, 130, 30), "wetland": (10, 30, 80, 20),
    "grass_rotated": (10, 20), "grass_extensive": (10, 20), "hay_averaged": (10, 20), "hay_cut": (10, 30),
    "developed": (10, 20),
}  # fmt: skip


@pytest.mark.parametrize("cover", LENGTHS)
def test_table_11_stage_lengths(cover, covers):
    names = ("len_ini_d", "len_dev_d", "len_mid_d", "len_late_d")[: len(LENGTHS[cover])]
    assert numbers(covers[cover], *names) == list(LENGTHS[cover])


def test_table_11_totals(covers):
    """Printed totals: maize 140 (p. 106), soybean 140 (p. 105), walnuts 190, wetland 140 (p. 108)."""
    for cover, total in (("corn", 140), ("soybean", 140), ("woods", 190), ("wetland", 140)):
        assert sum(LENGTHS[cover]) == total


ROOTS = {  # table 22, pp. 164-165: range of Zr, p
    "corn": (1.0, 1.7, 0.55), "soybean": (0.6, 1.3, 0.50), "grass_rotated": (0.5, 1.5, 0.60),
    "grass_extensive": (0.5, 1.5, 0.60), "hay_averaged": (0.6, 1.0, 0.60), "hay_cut": (1.0, 2.0, 0.55),
    "woods": (1.7, 2.4, 0.50), "conifers": (1.0, 1.5, 0.70),
}  # fmt: skip


@pytest.mark.parametrize("cover", ROOTS)
def test_table_22_roots_and_depletion(cover, covers):
    """Note 1, p. 163: the larger values are for rainfed conditions; irrigated the middle of the lower half."""
    low, high, p = ROOTS[cover]
    rainfed, irrigated, share = numbers(
        covers[cover], "root_max_rainfed_m", "root_max_irrigated_m", "depletion_fraction"
    )
    assert rainfed == high
    assert irrigated == pytest.approx(low + (high - low) / 4.0, abs=DIGIT_2 + 1e-9)
    assert share == p


def test_table_22_turf_of_towns(covers):
    """Cool season turf 0.5-1.0 m, p 0.40 (p. 165)."""
    assert 0.5 <= float(covers["developed"]["root_max_rainfed_m"]) <= 1.0
    assert float(covers["developed"]["depletion_fraction"]) == 0.40


def test_every_cover_names_its_sources(covers):
    for row in covers.values():
        assert "FAO-56" in row["source"]
        assert "(p. " in row["source"]
