"""The chain, in order: weather, reference ET, stands, crops, soil water, counties, air.

This is the only module that knows the order. Read :func:`run_case` from top to bottom and you have seen the whole job;
what it calls is a science module's own function or a small assembly step of ``assemble``.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

from etflux import airmass, assemble, checks, convection, stands, weather
from etflux.findings import Finding, ProblemsFound, has_errors

if TYPE_CHECKING:
    from etflux.case import Case
    from etflux.results import Results

Progress = Callable[[str, float], None]


def run_case(case: Case, findings: Sequence[Finding] | None = None, progress: Progress | None = None) -> Results:
    """Compute a case: crop water use by stand, latent flux and dew-point contribution by county.

    Parameters
    ----------
    case : Case
        Settings and tables, SI units.
    findings : sequence of Finding, optional
        What the checks said, if they were asked already; else they are asked here.
    progress : callable, optional
        Called with the step's name and the share of the work that is done.

    Returns
    -------
    Results
        Datasets by station, stand and county, the contribution by cover and age, budgets, findings.

    Raises
    ------
    ProblemsFound
        If the case has errors; the exception has all of them.
    """
    tell = progress or (lambda step, share: None)
    found = checks.case_findings(case) if findings is None else list(findings)
    if has_errors(found):
        raise ProblemsFound(found)

    tell("weather", 0.05)
    record, _ = weather.fill(weather.arrange(case), case.settings)
    local, _ = weather.to_counties(case, record)

    tell("reference ET", 0.1)
    station = assemble.station_daily(record, case.settings)

    tell("crops and soil water", 0.2)
    units = stands.expand(case, local, record.station_ids)
    stand, marks, grown = assemble.stand_daily(case, record, local, station, units, tell)

    tell("counties", 0.6)
    county, water, moved = assemble.county_daily(case, record, local, station, units, stand)

    tell("air above the counties", 0.65)
    given = assemble.air_inputs(case, record, local, county, water, moved)
    air = airmass.season(given, case.settings, lambda share: tell("air above the counties", 0.65 + 0.3 * share))
    if case.settings.air_cape:
        air = convection.with_energy(
            given, air, case.settings, lambda share: tell("convective energy", 0.95 + 0.03 * share)
        )

    tell("results", 0.98)
    county = assemble.with_air(county, air)
    return assemble.results(case, record, station, stand, county, air, marks, [*found, *grown])
