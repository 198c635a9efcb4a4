"""What a run is given: the settings and the tables of a case, in SI units, whatever file they came from."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass, field, make_dataclass, replace
from typing import TYPE_CHECKING, Any

from etflux.variables import settings_table

if TYPE_CHECKING:
    import pandas as pd

    class Settings:
        """Generated below from ``tables/settings.toml``; one attribute per row."""

        def __init__(self, **values: Any) -> None: ...
        def __getattr__(self, name: str) -> Any: ...
else:
    Settings = make_dataclass(
        "Settings",
        [(row.name, object, field(default=row.default)) for row in settings_table().values()],
        frozen=True,
        namespace={"__doc__": "Every choice of method; defaults from ``tables/settings.toml``."},
    )


def settings_record(settings: Settings) -> dict[str, Any]:
    """Return the settings as a plain record, for "what was run"."""
    return asdict(settings)  # type: ignore[call-overload]


def with_settings(settings: Settings, **changes: Any) -> Settings:
    """Return a copy with some settings changed; TypeError for a setting that does not exist."""
    return replace(settings, **changes)  # type: ignore[type-var]


# Columns of every table of a case, by registry name. The first tuple must be there; the others may be missing or NaN.
TABLES: Mapping[str, tuple[tuple[str, ...], tuple[str, ...]]] = {
    "stations": (
        ("station_id", "latitude_deg", "longitude_deg", "elevation_m", "wind_height_m"),
        ("name", "utc_offset_h", "observation_hour", "climate", "situation", "weather_file"),
    ),
    "weather": (
        ("station_id", "date", "t_max_c", "t_min_c"),
        (
            "t_mean_c", "rh_max_pct", "rh_min_pct", "rh_mean_pct", "dew_point_c", "vapour_pressure_kpa", "vpd_kpa",
            "rs_mj_m2_d", "sunshine_h", "wind_m_s", "rain_mm", "dew_point_morning_c", "dew_point_afternoon_c",
            "forecast",
        ),
    ),
    "rain_gauges": (("county_id", "date", "rain_mm"), ()),
    "counties": (
        ("county_id", "area_km2", "latitude_deg", "longitude_deg"),
        ("name", "elevation_m", "station_id", "edge"),
    ),
    "rest": (("county_id", "part", "share_pct", "treatment"), ("cover_id", "soil_id")),
    "soils": (
        ("soil_id", "theta_fc", "theta_wp", "rew_mm"),
        ("name", "evaporation_depth_m", "hydrologic_group", "source"),
    ),
    "covers": (("cover_id",), ()),  # the columns of tables/covers.csv
    "stands": (
        ("stand_id", "county_id", "cover_id", "soil_id", "area_km2"),
        (
            "water_regime", "planting_date", "planting_date_early", "planting_date_middle", "planting_date_late",
            "greenup_date", "harvest_date", "hybrid_heat_units", "tillage", "residue_pct", "drained",
            "hydrologic_group", "available_water_mm_m", "restricting_depth_m", "station_id", "rule_id",
        ),
    ),
    "irrigation_events": (("stand_id", "date"), ("depth_gross_mm", "depth_net_mm")),
    "irrigation_rules": (
        ("rule_id",),
        (
            "from_stage", "to_stage", "start_below_pct", "late_depletion_pct", "fill_to_pct", "least_mm", "most_mm",
            "shortest_interval_d", "capacity_mm_d", "rain_room_mm", "efficiency_pct", "season_limit_mm",
        ),
    ),
    "observations": (("stand_id", "date", "observed"), ("observed_value",)),
    "mixing_depths": (("county_id", "date", "mixing_depth_m"), ("hour",)),
    "profiles": (
        ("site_id", "time", "temperature_c"),
        (
            "latitude_deg", "longitude_deg", "elevation_m", "height_m", "pressure_kpa", "dew_point_c", "rh_mean_pct",
        ),
    ),
    "wind": (
        ("county_id", "date"),
        ("day_part", "height_m", "wind_speed_m_s", "wind_from_deg", "u_m_s", "v_m_s"),
    ),
    "background_air": (("date", "background_dew_point_c"), ()),
}  # fmt: skip


@dataclass(frozen=True)
class Case:
    """Everything a run is given.

    Parameters
    ----------
    settings : Settings
        Choices of method.
    tables : mapping of str to DataFrame
        The tables named in :data:`TABLES`, columns by registry name, SI units, ids as text, dates as
        ``datetime64[ns]`` at midnight, times of profiles as UTC ``datetime64[ns]``, blanks as NaN / None / NaT; a
        RangeIndex counts the rows of the input so that a finding can name its cell. An absent table is an empty one.
        "covers" and "soils" are complete: the packaged rows with the user's own rows on top.
    source : mapping
        What the case was read from: path, sha256, template version.
    outlines : mapping
        Outlines of the counties by id (``etflux.outlines``), where any are given: the wind goes over their borders.
    """

    settings: Settings
    tables: Mapping[str, pd.DataFrame]
    source: Mapping[str, Any] = field(default_factory=dict)
    outlines: Mapping[str, Any] = field(default_factory=dict)

    def table(self, name: str) -> pd.DataFrame:
        """One table, or an empty one with its columns."""
        import pandas as pd

        found = self.tables.get(name)
        if found is not None:
            return found
        must, may = TABLES[name]
        return pd.DataFrame(columns=[*must, *may])
