"""FAO-56 (Allen et al. 1998), chapters 7 and 8: Examples 26 and 31 to 38, Tables 19 and 20, equations 71 to 86.

Numbers are the printed ones; tolerance is half the last printed digit unless a comment says why not. The paper's
errata page (University of Idaho, Kimberly) says that day 3 of Example 35 was wrong, that later days and Example 38
inherit it, that exact values should be carried from day to day, and that significant rain with irrigation wets all of
the surface (p. 149). The corrected tables themselves were not at hand.
"""

import csv
from dataclasses import replace
from importlib.resources import files
from types import SimpleNamespace

import numpy as np
import pytest

from etflux.irrigation import Events
from etflux.soilwater import Forcing, Soil, season, start_state
from etflux.soilwater import equations as eq

DIGIT_1, DIGIT_2 = 0.05, 0.005


def rows_of(name):
    return list(csv.DictReader(files("etflux.tables").joinpath(name).read_text(encoding="utf-8").splitlines()))


def soil_of(theta_fc, theta_wp, tew, rew, *, p=0.5, fw=1.0, is_drip=False, profile=2.0):
    one = np.ones(1)
    return Soil(
        available_water_mm_m=1000.0 * (theta_fc - theta_wp) * one,
        theta_wp=theta_wp * one,
        evaporation_depth_m=0.10 * one,
        tew_mm=tew * one,
        rew_mm=rew * one,
        profile_depth_m=profile * one,
        curve_number=50.0 * one,
        residue_share=0.0 * one,
        wetted_fraction=fw * one,
        is_drip=is_drip * one,
        efficiency=one,
        loss_to_air=False * one,
        p_table=p * one,
        open_water=np.zeros(1, bool),
    )


def forcing_of(eto, kcb, kc_max, cover, roots, rain=None):
    eto = np.asarray(eto, float)[:, None]

    def column(values):
        return np.broadcast_to(np.asarray(values, float).reshape(-1, 1), eto.shape)

    return Forcing(
        eto_mm=eto,
        rain_mm=column(0.0 if rain is None else rain),
        t_mean_c=column(20.0),
        kcb=column(kcb),
        kc_max=column(kc_max),
        ground_cover=column(cover),
        root_depth_m=column(roots),
    )


def started(soil, roots, **stores):
    state = start_state(soil, SimpleNamespace(start_water_share=1.0), np.array([roots]))
    return replace(state, **{name: np.array([value]) for name, value in stores.items()})


def test_table_19_soils_lie_in_the_printed_ranges():
    printed = {  # theta_fc, theta_wp, REW, TEW for Ze = 0.10 m, p. 144
        "sand": ((0.07, 0.17), (0.02, 0.07), (2, 7), (6, 12)),
        "loamy_sand": ((0.11, 0.19), (0.03, 0.10), (4, 8), (9, 14)),
        "sandy_loam": ((0.18, 0.28), (0.06, 0.16), (6, 10), (15, 20)),
        "loam": ((0.20, 0.30), (0.07, 0.17), (8, 10), (16, 22)),
        "silt_loam": ((0.22, 0.36), (0.09, 0.21), (8, 11), (18, 25)),
        "silt": ((0.28, 0.36), (0.12, 0.22), (8, 11), (22, 26)),
        "silty_clay_loam": ((0.30, 0.37), (0.17, 0.24), (8, 11), (22, 27)),
        "silty_clay": ((0.30, 0.42), (0.17, 0.29), (8, 12), (22, 28)),
        "clay": ((0.32, 0.40), (0.20, 0.24), (8, 12), (22, 29)),
    }
    rows = rows_of("soils.csv")
    assert [row["soil_id"] for row in rows] == list(printed)
    for row in rows:
        fc, wp, rew, tew = printed[row["soil_id"]]
        assert float(row["theta_fc"]) == pytest.approx(np.mean(fc))
        assert float(row["theta_wp"]) == pytest.approx(np.mean(wp))
        assert float(row["rew_mm"]) == pytest.approx(np.mean(rew))
        total = eq.total_evaporable_water(float(row["theta_fc"]), float(row["theta_wp"]), 0.10)
        assert tew[0] <= total <= tew[1], row["soil_id"]
        assert float(row["rew_mm"]) < total


def test_table_20_wetted_fractions():
    printed = {  # p. 149
        "rainfed": (1.0, 1.0),  # precipitation
        "sprinkler": (1.0, 1.0),
        "basin": (1.0, 1.0),
        "border": (1.0, 1.0),
        "furrow every, narrow bed": (0.6, 1.0),
        "furrow every, wide bed": (0.4, 0.6),
        "furrow alternate": (0.3, 0.5),
        "drip": (0.3, 0.4),  # trickle
    }
    rows = rows_of("wetted_fractions.csv")
    assert {row["water_regime"]: (float(row["low"]), float(row["high"])) for row in rows} == printed
    for row in rows:
        assert float(row["low"]) <= float(row["wetted_fraction"]) <= float(row["high"])
        assert (row["is_drip"] == "true") == (row["water_regime"] == "drip")


def test_example_26_irrigation_depth_over_the_wetted_part():
    """P. 120: 12 mm by trickle with fw = 0.4 is 30 mm over the wetted part."""
    soil = soil_of(0.40, 0.10, 40.0, 10.0, fw=0.4)
    before = started(soil, 0.5, de_mm=35.0, de_dry_mm=35.0, dr_mm=50.0, fw=0.4)
    _, after = season(
        soil,
        forcing_of([0.0], 0.0, 1.2, 0.0, 0.5),
        before,
        events=Events(np.array([0]), np.array([0]), np.array([12.0])),
    )
    assert after.de_mm == pytest.approx(35.0 - 30.0)
    assert after.dr_mm == pytest.approx(50.0 - 12.0)


def test_example_31_bare_loam():
    """P. 146: ten days of drying, every printed digit."""
    soil = soil_of(0.25, 0.05, 20.0, 9.0)
    daily, _ = season(soil, forcing_of([4.5] * 10, 0.15, 1.20, 0.0, 1.0), started(soil, 1.0))
    de = daily["de_mm"][:, 0]
    start = np.append(0.0, de[:-1])
    kr = eq.evaporation_reduction(start, 20.0, 9.0)
    assert kr == pytest.approx([1, 1, 0.96, 0.55, 0.31, 0.18, 0.10, 0.06, 0.03, 0.02], abs=DIGIT_2)
    assert daily["ke"][:, 0] == pytest.approx([1.05, 1.05, 1.01, 0.57, 0.33, 0.19, 0.11, 0.06, 0.03, 0.02], abs=DIGIT_2)
    assert daily["evaporation_mm"][:, 0] == pytest.approx(
        [4.73, 4.73, 4.53, 2.59, 1.47, 0.84, 0.48, 0.27, 0.16, 0.09],
        abs=DIGIT_2 + 1e-9,  # 4.725 is printed 4.73
    )
    assert de == pytest.approx([4.73, 9.45, 13.98, 16.57, 18.04, 18.88, 19.36, 19.64, 19.79, 19.88], abs=DIGIT_2 + 1e-9)
    assert daily["et_mm"][:, 0] == pytest.approx([5.4, 5.4, 5.2, 3.3, 2.1, 1.5, 1.2, 0.9, 0.8, 0.8], abs=DIGIT_1)


@pytest.mark.parametrize(
    ("fw", "is_drip", "few", "ke", "kc"),
    [
        (1.0, False, 0.47, 0.40, 1.30),  # Example 32, sprinkler, p. 150
        (0.3, False, 0.30, 0.39, 1.29),  # Example 33, alternate furrows, p. 151
        (0.3, True, 0.19, 0.25, 1.15),  # Example 34, drip, p. 151
    ],
)
def test_examples_32_to_34_cotton_just_irrigated(fw, is_drip, few, ke, kc):
    soil = soil_of(0.30, 0.10, 25.0, 9.0, fw=fw, is_drip=is_drip)
    daily, _ = season(
        soil,
        forcing_of([7.0], 0.9, 1.30, 0.53, 1.0),
        started(soil, 1.0, dr_mm=40.0, de_mm=20.0, de_dry_mm=20.0),
        events=Events(np.array([0]), np.array([0]), np.array([35.0])),
    )
    assert daily["few"][0, 0] == pytest.approx(few, abs=DIGIT_2)
    assert daily["ke"][0, 0] == pytest.approx(ke, abs=DIGIT_2)
    assert daily["et_mm"][0, 0] / 7.0 == pytest.approx(kc, abs=DIGIT_2)


def test_example_32_limit_of_the_wet_surface():
    """P. 150: few Kc,max = 0.61 does not bind; p. 151: 0.39 does."""
    few = eq.exposed_wetted_fraction(0.53, [1.0, 0.3])
    assert few * 1.30 == pytest.approx([0.61, 0.39], abs=DIGIT_2)
    assert eq.evaporation_coefficient(1.0, 0.9, 1.30, few) == pytest.approx([0.40, 0.39], abs=1e-12)


EXAMPLE_35 = {
    "eto": [4.5, 5.0, 3.9, 4.2, 4.8, 2.7, 5.8, 5.1, 4.7, 5.2],
    "exposed": [0.92, 0.91, 0.91, 0.90, 0.89, 0.89, 0.88, 0.87, 0.87, 0.86],
    "kcb": [0.30, 0.31, 0.32, 0.33, 0.34, 0.36, 0.37, 0.38, 0.39, 0.40],
    "roots": [0.30, 0.31, 0.31, 0.32, 0.32, 0.33, 0.33, 0.34, 0.34, 0.35],
    "rain": [0, 0, 0, 0, 0, 6, 0, 0, 0, 0],
}
FIELD = {"theta_fc": 0.23, "theta_wp": 0.10, "tew": 18.0, "rew": 8.0, "p": 0.6, "fw": 0.8}


KC_MAX_35 = 1.2 + (0.04 * (1.6 - 2) - 0.004 * (35 - 45)) * (0.30 / 3) ** 0.3  # eq. 72, printed 1.21


def example_35(kc_max=KC_MAX_35, **stores):
    soil = soil_of(**FIELD)
    given = EXAMPLE_35
    forcing = forcing_of(
        given["eto"], given["kcb"], kc_max, 1.0 - np.array(given["exposed"]), given["roots"], given["rain"]
    )
    start = started(soil, 0.30, de_mm=18.0, de_dry_mm=18.0, dr_mm=0.6 * 130 * 0.30, **stores)
    return soil, forcing, start


def test_example_35_printed():
    """Pp. 154-155. Days 1 and 2 to the digits; from day 3 on the printed rows contradict each other (Kcb 0.32 + Ke 0.62
    is not the printed 1.04; the errata admit it), so Kc and Ke within 0.08, De within 1 mm, ETc within 0.2 mm/day."""
    soil, forcing, start = example_35()
    daily, _ = season(soil, forcing, start, events=Events(np.array([0]), np.array([0]), np.array([40.0])))
    daily = {name: values[:, 0] for name, values in daily.items()}
    few = [0.80, 0.80, 0.80, 0.80, 0.80, 0.89, 0.88, 0.87, 0.87, 0.86]
    ke = [0.91, 0.90, 0.62, 0.35, 0.18, 0.64, 0.45, 0.17, 0.08, 0.04]
    kc = [1.21, 1.21, 1.04, 0.70, 0.52, 1.00, 0.82, 0.55, 0.47, 0.44]
    etc = [5.5, 6.1, 4.0, 2.9, 2.5, 2.7, 4.7, 2.8, 2.2, 2.3]
    de = [5, 11, 14, 16, 17, 13, 16, 17, 18, 18]
    assert daily["few"] == pytest.approx(few, abs=DIGIT_2)
    assert daily["ke"][:2] == pytest.approx(ke[:2], abs=DIGIT_2)
    assert (daily["et_mm"] / EXAMPLE_35["eto"])[:2] == pytest.approx(kc[:2], abs=DIGIT_2)
    assert daily["et_mm"][:2] == pytest.approx(etc[:2], abs=DIGIT_1)
    assert daily["evaporation_mm"][:2] == pytest.approx([4.1, 4.5], abs=DIGIT_1)
    assert daily["de_mm"][:2] == pytest.approx(de[:2], abs=0.5)
    assert daily["ke"] == pytest.approx(ke, abs=0.08)
    sound = np.arange(10) != 2  # the errata: E and Kc of day 3 are wrong
    assert (daily["et_mm"] / EXAMPLE_35["eto"])[sound] == pytest.approx(np.array(kc)[sound], abs=0.08)
    assert daily["et_mm"][sound] == pytest.approx(np.array(etc)[sound], abs=0.2)
    assert daily["de_mm"] == pytest.approx(de, abs=1.0)
    assert daily["percolation_mm"][0] == pytest.approx(17, abs=0.5)  # Example 38, p. 173; DPe = 32 is of the layer


def test_example_35_carried_exactly():
    """The same days with exact values carried on, as the errata ask; numbers are our own recomputation, with the part
    left dry wetted like the rest (the example does not follow it)."""
    soil, forcing, start = example_35()
    event = Events(np.array([0]), np.array([0]), np.array([40.0]))

    def days(first, last):
        return Forcing(**{k: v[first:last] if np.ndim(v) else v for k, v in vars(forcing).items()})

    until_rain, state = season(soil, days(0, 5), start, events=event)
    since_rain, _ = season(soil, days(5, 10), replace(state, de_dry_mm=state.de_mm))
    daily = {name: np.concatenate([until_rain[name], since_rain[name]])[:, 0] for name in until_rain}
    assert daily["ke"] == pytest.approx([0.91, 0.90, 0.65, 0.36, 0.19, 0.60, 0.44, 0.19, 0.10, 0.05], abs=DIGIT_2)
    assert daily["de_mm"] == pytest.approx([5.1, 10.8, 13.9, 15.8, 17.0, 12.8, 15.7, 16.8, 17.3, 17.7], abs=DIGIT_1)
    kc = daily["et_mm"] / EXAMPLE_35["eto"]
    assert kc == pytest.approx([1.21, 1.21, 0.97, 0.69, 0.53, 0.96, 0.81, 0.57, 0.49, 0.45], abs=DIGIT_2)
    assert daily["et_mm"] == pytest.approx([5.5, 6.1, 3.8, 2.9, 2.6, 2.6, 4.7, 2.9, 2.3, 2.4], abs=DIGIT_1)


def test_example_36_taw_and_raw():
    """P. 166: onion, tomato, maize on loamy sand, silt, silty clay."""
    roots, p = np.array([[0.4], [0.8], [1.2]]), np.array([[0.30], [0.40], [0.55]])
    taw = eq.total_available_water([0.15, 0.32, 0.35], [0.06, 0.15, 0.23], roots)
    assert taw == pytest.approx(np.array([[36, 68, 48], [72, 136, 96], [108, 204, 144]]), abs=0.5)
    assert p * taw == pytest.approx(np.array([[11, 20, 14], [29, 54, 38], [59, 112, 79]]), abs=0.5)


def as_single_coefficient(eto, kc, roots, rain=None):
    """Kc all in Kcb: with Kc,max = Kcb nothing evaporates apart."""
    return forcing_of(eto, kc, kc, 0.99, roots, rain)


def test_example_37_stress():
    """P. 168: tomato drying out; p = 0.40 at ETc = 6 mm/day is 0.44 in the table of the example's own crop."""
    soil = soil_of(0.32, 0.12, 26.0, 9.0, p=0.44)
    daily, _ = season(soil, as_single_coefficient([5.0] * 10, 1.2, 0.8), started(soil, 0.8, dr_mm=55.0))
    assert daily["taw_mm"][:, 0] == pytest.approx(160, abs=0.5)
    assert daily["raw_mm"][:, 0] == pytest.approx(64, abs=0.5)
    assert daily["ks"][:, 0] == pytest.approx([1, 1, 0.97, 0.91, 0.85, 0.80, 0.75, 0.70, 0.66, 0.62], abs=DIGIT_2)
    assert daily["et_mm"][:, 0] == pytest.approx([6.0, 6.0, 5.8, 5.4, 5.1, 4.8, 4.5, 4.2, 3.9, 3.7], abs=DIGIT_1)
    assert daily["dr_mm"][:, 0] == pytest.approx(
        [61.0, 67.0, 72.8, 78.3, 83.4, 88.2, 92.6, 96.9, 100.8, 104.5], abs=DIGIT_1
    )


def test_example_38_balance_with_the_printed_coefficients():
    """Pp. 172-173: depletion and percolation from the printed Kc (1.21 is Kc,max); whole millimetres. The irrigation of
    day 10 "refills the root zone": what is depleted, printed 27."""
    soil = soil_of(**FIELD)
    kc = [KC_MAX_35, KC_MAX_35, 1.04, 0.70, 0.52, 1.00, 0.82, 0.55, 0.47, KC_MAX_35]
    forcing = as_single_coefficient(EXAMPLE_35["eto"], kc, EXAMPLE_35["roots"], EXAMPLE_35["rain"])
    days = np.array([0, 9])

    def run(refill):
        events = Events(days, np.array([0, 0]), np.array([40.0, refill]))
        daily, _ = season(soil, forcing, started(soil, 0.30, dr_mm=0.6 * 130 * 0.30), events=events)
        return {name: values[:, 0] for name, values in daily.items()}

    refill = run(0.0)["dr_mm"][8]
    daily = run(refill)
    assert refill == pytest.approx(27, abs=0.5)
    raw = 0.6 * daily["taw_mm"]
    # Zr is printed to 0.01 m only, which is 0.4 mm of RAW
    assert raw == pytest.approx([23, 24, 24, 25, 25, 26, 26, 26, 27, 27], abs=0.5 + 0.4)
    assert daily["ks"] == pytest.approx(np.ones(10))
    assert daily["et_mm"] == pytest.approx([5.5, 6.1, 4.0, 2.9, 2.5, 2.7, 4.7, 2.8, 2.2, 6.3], abs=0.06)  # 4.056: 4.0
    assert daily["percolation_mm"] == pytest.approx([17, 0, 0, 0, 0, 0, 0, 0, 0, 0], abs=0.5)
    # half a millimetre, and what the rounding of the printed Kc (0.005 ETo a day) has added up to
    off = np.abs(daily["dr_mm"] - [5, 12, 16, 18, 21, 18, 22, 25, 27, 6])
    assert (off <= 0.5 + np.cumsum(0.005 * np.array(EXAMPLE_35["eto"]))).all()


def test_example_38_with_own_evaporation():
    """The example's depletions inherit the error of Example 35 (errata): within 1 mm."""
    soil, forcing, start = example_35()
    events = Events(np.array([0, 9]), np.array([0, 0]), np.array([40.0, 27.0]))
    daily, _ = season(soil, forcing, start, events=events)
    assert daily["dr_mm"][:, 0] == pytest.approx([5, 12, 16, 18, 21, 18, 22, 25, 27, 6], abs=1.0)
    assert daily["ks"][:, 0] == pytest.approx(np.ones(10))
    assert daily["ke"][9, 0] == pytest.approx(0.81, abs=DIGIT_2)


@pytest.mark.parametrize(
    ("rain", "gross", "fw"),
    [
        (0.0, 0.0, 0.5),  # neither: yesterday's
        (2.9, 0.0, 0.5),  # no significant rain
        (3.0, 0.0, 1.0),  # significant rain, "> 3 to 4 mm"
        (2.0, 20.0, 0.4),  # irrigation with insignificant rain: the system's
        (5.0, 20.0, 1.0),  # errata of p. 149: irrigation with significant rain
    ],
)
def test_wetted_fraction_rules_of_page_149(rain, gross, fw):
    soil = soil_of(0.30, 0.10, 25.0, 9.0, fw=0.4)
    before = started(soil, 1.0, dr_mm=40.0, de_mm=20.0, de_dry_mm=20.0, fw=0.5)
    _, after = season(
        soil,
        forcing_of([5.0], 0.3, 1.2, 0.2, 1.0, [rain]),
        before,
        events=Events(np.array([0]), np.array([0]), np.array([gross])),
    )
    assert after.fw == pytest.approx(fw)


def test_small_rain_wets_the_root_zone_but_not_the_drying_layer():
    """P. 153: rain under about 0.2 ETo evaporates at once and is ignored in the evaporation layer."""
    soil = soil_of(0.30, 0.10, 25.0, 9.0)
    before = started(soil, 1.0, dr_mm=40.0, de_mm=25.0, de_dry_mm=25.0)
    for rain, de in ((0.9, 25.0), (1.1, 23.9)):
        daily, after = season(soil, forcing_of([5.0], 0.0, 1.2, 0.0, 1.0, [rain]), before)
        assert after.de_mm - daily["evaporation_mm"][0] / after.few == pytest.approx(de)
        assert after.dr_mm - daily["et_mm"][0] == pytest.approx(40.0 - rain)


def test_depletion_fraction_of_page_162():
    """Figure 41: p from Table 22 less 0.04 per mm/day above 5, between 0.1 and 0.8."""
    assert eq.depletion_fraction(0.55, [5.0, 10.0, 0.0]) == pytest.approx([0.55, 0.35, 0.75])
    assert eq.depletion_fraction([0.2, 0.7], [9.0, 0.0]) == pytest.approx([0.1, 0.8])
