"""Allen et al. (1998), FAO Irrigation and Drainage Paper 56: defaults of the settings; and every table's own sources.

A default that is not the published value says so in its source; a value without a document says "common practice, no
source", "from memory" or "design choice of this project".
"""

import csv
import re
from importlib.resources import files

import pytest

from etflux import crops, reference
from etflux.soilwater import equations
from etflux.variables import settings_table

PUBLISHED = {
    "krs_interior": 0.16, "krs_coast": 0.19,  # eq. 50, p. 60
    "tdew_below_tmin_humid_c": 0.0,  # eq. 48, p. 58
    "tdew_below_tmin_arid_c": 2.0,  # p. 58: 2 to 3 °C
    "default_u2_m_s": 2.0,  # p. 63
    "grass_freeze_c": -4.0,  # table 11 note 4, p. 107
    "regrowth_days": 20,  # table 11, alfalfa, other cuttings, p. 107: development
    "albedo_stands": 0.23,  # eq. 38, p. 51
    "ground_heat_bare": 0.1,  # eq. 45, p. 55
    "texture_water": "fao56",  # table 19, p. 144
    "surface_root_uptake": False,  # p. 153: may be ignored
}  # fmt: skip
KNOWN = re.compile(
    r"FAO-56|ASCE|TR-55|USDA|NRCS|NEH|UW Madison|OSU|University|HPRCC|NDSU|AmeriFlux|Brouwer|Saxton|NOAA|MetPy|pyet|"
    r"Tennekes|US Standard Atmosphere|extension tables|Between 10|Between full|"
    r"common practice, no source|[Ff]rom memory|design choice of this project"
)
TABLES = ("covers.csv", "soils.csv", "curve_numbers.csv", "wetted_fractions.csv", "heat_units.csv")


@pytest.mark.parametrize("name", PUBLISHED)
def test_settings_start_at_the_published_value(name):
    assert settings_table()[name].default == PUBLISHED[name]
    assert "FAO-56" in settings_table()[name].source


def test_constants_of_the_water_balance():
    """Residue: ch. 11 (5 % for every 10 %); Kc,min: p. 149 (0.15-0.20); 0.45: p. 136; 0.2 ETo: p. 153."""
    assert equations.RESIDUE_EFFECT == 0.5
    assert crops.KC_MIN == 0.15
    assert crops.ADJUST_FROM == 0.45
    assert equations.SMALL_RAIN_SHARE == 0.2
    assert (equations.LEAST_P, equations.MOST_P) == (0.1, 0.8)  # p. 162
    assert reference.ALBEDO == 0.23
    assert reference.LEAST_WIND_M_S == 0.5  # p. 63


def test_every_setting_says_where_its_default_comes_from():
    for row in settings_table().values():
        assert KNOWN.search(row.source), f"{row.name}: {row.source}"


@pytest.mark.parametrize("table", TABLES)
def test_every_row_of_a_table_says_where_it_comes_from(table):
    text = files("etflux.tables").joinpath(table).read_text(encoding="utf-8")
    for row in csv.DictReader(text.splitlines()):
        assert KNOWN.search(row["source"]), f"{table}: {row}"
