"""The rules of the house: imports go one way, start-up stays light, registries agree with each other."""

import ast
import subprocess
import sys
from dataclasses import fields
from pathlib import Path

import pytest

import etflux
from etflux import variables
from etflux.case import TABLES, Settings

PACKAGE = Path(etflux.__file__).parent

# A module may import from rooms named before its own, never from later ones.
ROOMS = [
    "__init__", "variables", "findings", "humidity", "solar", "reference", "case", "outlines", "weather",
    "irrigation", "soilwater", "stands", "marks", "crops", "canopy", "counties",
    "column", "profiles", "igra", "wind", "cells", "airmass", "convection", "air_checks", "checks", "methods",
    "results", "assemble", "run", "workbook", "brief", "compare", "job", "cli",
]  # fmt: skip


def _imports(path: Path) -> set[str]:
    found = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.ImportFrom) and node.module and node.module.split(".")[0] == "etflux":
            tail = node.module.split(".")[1:]
            found |= {tail[0]} if tail else {alias.name for alias in node.names}
        elif isinstance(node, ast.Import):
            found |= {alias.name.split(".")[1] for alias in node.names if alias.name.startswith("etflux.")}
    return found


def _room(path: Path) -> str:
    return path.relative_to(PACKAGE).parts[0].removesuffix(".py")


@pytest.mark.parametrize("path", sorted(PACKAGE.rglob("*.py")), ids=lambda path: str(path.relative_to(PACKAGE)))
def test_imports_go_one_way(path):
    room = _room(path)
    if room == "tables" or path == PACKAGE / "__init__.py":
        return
    assert room in ROOMS, f"{room} has no place in the order of rooms"
    later = set(ROOMS[ROOMS.index(room) + 1 :])
    assert not _imports(path) & later


@pytest.mark.parametrize("statement", ["import etflux", "import etflux.cli"])
def test_startup_loads_no_heavy_library(statement):
    code = (
        f"import sys; {statement}; print(sorted({{'pandas', 'xarray', 'openpyxl', 'matplotlib'}} & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_every_unit_of_the_registry_is_known():
    for row in variables.quantities().values():
        for unit in {row.unit, row.us_unit} - {""}:
            assert unit in variables.units(), row.name
        if row.unit and row.us_unit:
            assert variables.units()[row.unit].dimension == variables.units()[row.us_unit].dimension, row.name


def test_every_case_column_is_a_quantity():
    for table, (must, may) in TABLES.items():
        if table not in {"covers", "soils"}:
            assert set(must) | set(may) <= set(variables.quantities()), table


def test_settings_come_from_the_table():
    assert [row.name for row in fields(Settings)] == list(variables.settings_table())
    for row in variables.settings_table().values():
        assert getattr(Settings(), row.name) == row.default
        assert row.source, row.name
        if row.type == "choice":
            assert row.default in row.choices
        if row.low is not None:
            assert row.low <= row.default <= row.high, row.name


def test_public_names_resolve():
    for name in etflux.__all__:
        assert getattr(etflux, name) is not None


def test_units_convert_there_and_back():
    known = variables.units()
    for symbol, unit in known.items():
        for other_symbol, other in known.items():
            if unit.dimension == other.dimension:
                there = variables.convert([1.0, 37.5], symbol, other_symbol)
                assert variables.convert(there, other_symbol, symbol) == pytest.approx([1.0, 37.5])


@pytest.mark.parametrize(
    ("value", "unit", "name", "expected"),
    [
        (86.0, "°F", "t_max_c", 30.0),
        (500.0, "langley/day", "rs_mj_m2_d", 20.92),  # 1 langley = 41.84 kJ m-2
        (250.0, "W/m²", "rs_mj_m2_d", 21.6),
        (1.0, "in", "rain_mm", 25.4),
        (1.0, "in/ft", "available_water_mm_m", 1000.0 / 12.0),
        (100.0, "acres", "area_km2", 0.40468564224),
        (29.92, "inHg", "vapour_pressure_kpa", 101.32),
        (100.0, "miles/day", "wind_m_s", 1.8626667),
        (1013.25, "hPa", "pressure_kpa", 101.325),
        (2700.0, "°F-days", "hybrid_heat_units", 1500.0),
    ],
)
def test_units_people_write(value, unit, name, expected):
    assert variables.to_si(value, name, unit).item() == pytest.approx(expected, rel=1e-4)


def test_differences_keep_out_the_offset():
    assert variables.from_si(2.6, "contribution_c", "us").item() == pytest.approx(4.68)


def test_unknown_unit_lists_the_known_ones():
    with pytest.raises(ValueError, match="furlong.*known are"):
        variables.convert(1.0, "furlong", "m")
    with pytest.raises(ValueError, match="temperature.*length"):
        variables.convert(1.0, "°C", "m")


def test_packaged_tables_are_found_from_an_empty_folder(tmp_path):
    code = "from importlib.resources import files; print(*sorted(p.name for p in files('etflux.tables').iterdir()))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=tmp_path)
    assert {
        "covers.csv", "curve_numbers.csv", "findings.toml", "flags.toml", "heat_units.csv", "result_columns.toml",
        "settings.toml", "soils.csv", "units.toml", "variables.toml", "wetted_fractions.csv",
    } <= set(done.stdout.split())  # fmt: skip
