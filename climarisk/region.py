"""The stations around a study on its hours, and how far air carried from them is from the truth."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from climarisk.clock import hour_grid, local_clock
from climarisk.findings import Finding
from climarisk.progress import Progress, quiet
from climarisk.reporting import temperature_finding
from climarisk.rules import reporting_findings
from climarisk.study import Study
from climarisk.timing import Misdating, misdated, timing_findings
from climarisk.transfer import StationAir, candidates, on_grid, utc_month
from climarisk.transfer_error import HiddenStation, TransferError, far_off, learn_error
from climarisk.verify import as_field, errors, hide
from climarisk.weather import Weather

#: Stations hidden to learn the transfer error, at most.
MOST_HIDDEN = 30


@dataclass(frozen=True)
class Region:
    """What every field of a study draws on.

    Parameters
    ----------
    grid : ndarray of int64, shape (n_hours,)
        The study's hours, UTC, counted from 1970.
    stations : tuple of StationAir
        On those hours; those found wrong serve no other place.
    error : TransferError
        Of air carried from them.
    findings : tuple of Finding
    """

    grid: np.ndarray
    stations: tuple[StationAir, ...]
    error: TransferError
    findings: tuple[Finding, ...] = ()


def region_of(study: Study, weather: Weather, progress: Progress = quiet) -> Region:
    """The stations of a study on its hours, and the error learned by hiding them.

    Parameters
    ----------
    study : Study
    weather : Weather
    progress : callable
    """
    grid = hour_grid(study.first_year, study.last_year)
    stations, wrong = stations_on_grid(weather, grid)
    error, stations, off = _learned_error(study, stations, grid, progress)
    findings = [*_record_findings(study, stations, wrong, grid), *off]
    return Region(grid, tuple(stations), error, tuple(findings))


def stations_on_grid(
    weather: Weather, grid: np.ndarray
) -> tuple[list[StationAir], dict[str, Misdating]]:
    """Stations on the study's hours, those whose dates look wrong marked.

    Parameters
    ----------
    weather : Weather
    grid : ndarray of int64, shape (n_hours,)

    Returns
    -------
    stations : list of StationAir
    wrong : dict of str to Misdating
        By station id.
    """
    airs = [
        on_grid(s.station, s.hours, grid, s.elevation_trusted, s.derived) for s in weather.stations
    ]
    wrong = misdated(
        [a.station for a in airs],
        [a.temperature_c for a in airs],
        utc_month(grid) * 24 + grid % 24,
    )
    return [replace(a, serves_others=a.station.id not in wrong) for a in airs], wrong


def _record_findings(
    study: Study, stations: Sequence[StationAir], wrong: dict[str, Misdating], grid: np.ndarray
) -> list[Finding]:
    """What there is to say of the stations' dates and of the hours they never report."""
    findings = timing_findings(wrong)
    for air in stations:
        clock = local_clock(as_field(air), grid, study.first_year, study.last_year)
        findings += reporting_findings(air.station, np.isfinite(air.temperature_c), clock)
    return findings


def serving(study: Study, stations: Sequence[StationAir]) -> set[str]:
    """Ids of the trusted stations that air is carried from to the study's fields."""
    found: set[str] = set()
    for field in study.fields:
        chosen = candidates(field, stations, study.radius_km)
        if not (field.stations and all(c.on_spot for c in chosen)):
            found |= {c.air.station.id for c in chosen if c.air.serves_others}
    return found


def _learned_error(
    study: Study, stations: list[StationAir], grid: np.ndarray, progress: Progress
) -> tuple[TransferError, list[StationAir], list[Finding]]:
    """The error of carried air, learned by hiding the stations that air is carried from.

    A station that is far off what the others say of it is taken out, the worst first, and the
    others are hidden anew without it.
    """
    findings: list[Finding] = []
    while True:
        wanted = serving(study, stations)
        places = [i for i, a in enumerate(stations) if a.station.id in wanted][:MOST_HIDDEN]
        shown: dict[int, HiddenStation] = {}
        for done, i in enumerate(places):
            progress("hiding stations", done, len(places))
            hidden = hide(i, stations, grid, study.first_year, study.last_year, study.radius_km)
            if hidden is not None:
                shown[i] = errors(hidden)
        if places:
            progress("hiding stations", len(places), len(places))
        wrong = far_off(shown)
        if wrong is None:
            return learn_error(list(shown.values())), stations, findings
        bias = float(np.nanmean(shown[wrong].error_k))
        findings.append(temperature_finding(stations[wrong].station, bias))
        stations = [
            replace(a, serves_others=False) if i == wrong else a for i, a in enumerate(stations)
        ]
