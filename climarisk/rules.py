"""The completeness rules, with their thresholds, and what each of them does."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from climarisk.clock import LocalClock
from climarisk.findings import Finding
from climarisk.stations import Station


@dataclass(frozen=True)
class DaysRule:
    """A year counts for a month and hour when enough of the month's days have a value.

    Parameters
    ----------
    share_of_days : float
        0-1.
    """

    share_of_days: float = 0.8
    effect: str = "a year below it does not enter the month x hour cell"
    source: str = "the project's own, after the 80 % of WMO-No. 1203 (from memory)"


@dataclass(frozen=True)
class MonthRule:
    """A month of a year is patchy when too many of its days, or too many in a row, are missing.

    Parameters
    ----------
    missing_days, consecutive_days : int
        From so many on.
    """

    missing_days: int = 11
    consecutive_days: int = 5
    effect: str = "told as a finding of the field"
    source: str = "WMO-No. 1203 (2017), from memory"


@dataclass(frozen=True)
class YearsRule:
    """Figures that need more years than a cell has are marked.

    Parameters
    ----------
    percentiles : int
        Years for any percentile.
    extreme_percentiles : int
        Years for p01, p05, p95 and p99.
    interval, settled_interval : int
        Years for an interval at all, and for one without a mark.
    """

    percentiles: int = 8
    extreme_percentiles: int = 15
    interval: int = 5
    settled_interval: int = 10
    effect: str = "marked beside the figure; an interval below its number of years is empty"
    source: str = "common practice, no source; the intervals from tests/test_interval_coverage.py"


@dataclass(frozen=True)
class ReportingRule:
    """A station that never reports in some hours or months of its record is told.

    Parameters
    ----------
    never, always : float
        Share of days below which an hour counts as not reported, and above which some other
        hour must lie.
    """

    never: float = 0.1
    always: float = 0.8
    effect: str = "told as a finding of the station"
    source: str = "common practice, no source"


DAYS, MONTH, YEARS, REPORTING = DaysRule(), MonthRule(), YearsRule(), ReportingRule()


def rules() -> dict[str, dict[str, Any]]:
    """Every rule with its thresholds, as plain values for ``study.json``."""
    named: dict[str, Any] = {"days": DAYS, "month": MONTH, "years": YEARS, "reporting": REPORTING}
    return {name: asdict(rule) for name, rule in named.items()}


def years_notes(n_years: np.ndarray) -> np.ndarray:
    """What to know of the percentiles of cells with so many counting years; empty without any."""
    few = f"percentiles need {YEARS.percentiles} years"
    tail = f"p01, p05, p95 and p99 need {YEARS.extreme_percentiles} years"
    notes = np.where(n_years < YEARS.extreme_percentiles, tail, "")
    notes = np.where(n_years < YEARS.percentiles, few, notes)
    return np.where(n_years == 0, "", notes).astype(object)


def interval_notes(n_years: np.ndarray) -> np.ndarray:
    """What to know of the interval of cells with so many counting years; empty without any."""
    few = np.where(
        n_years < YEARS.settled_interval, f"fewer than {YEARS.settled_interval} years", ""
    )
    none = f"no interval below {YEARS.interval} years"
    notes = np.where(n_years < YEARS.interval, none, few)
    return np.where(n_years == 0, "", notes).astype(object)


def patchy_months(known: np.ndarray, clock: LocalClock) -> tuple[int, int]:
    """Months of years that are patchy, and months of years with any value.

    Parameters
    ----------
    known : ndarray of bool, shape (n_hours,)
        Hours with a value, inside the hours window.
    clock : LocalClock

    Returns
    -------
    patchy, some : int
    """
    lengths = clock.days_in_month.reshape(-1)
    has_day = np.bincount(clock.day[known & clock.in_period], minlength=int(lengths.sum())) > 0
    patchy = some = 0
    start = 0
    for length in lengths:
        month = has_day[start : start + length]
        start += length
        if not month.any():
            continue
        some += 1
        missing = int((~month).sum())
        patchy += missing >= MONTH.missing_days or _longest_gap(month) >= MONTH.consecutive_days
    return patchy, some


def _longest_gap(month: np.ndarray) -> int:
    edges = np.flatnonzero(np.concatenate(([True], month, [True])))
    return int(np.diff(edges).max()) - 1


def reporting_findings(station: Station, known: np.ndarray, clock: LocalClock) -> list[Finding]:
    """Hours and months in which a station systematically does not report.

    Parameters
    ----------
    station : Station
    known : ndarray of bool, shape (n_hours,)
        Hours with an air temperature.
    clock : LocalClock
        Local standard time at the station.
    """
    known = known & clock.in_period
    if not known.any():
        return []
    days = len(np.unique(clock.day[known]))
    share = np.bincount(clock.hour[known], minlength=24) / days
    closed = share < REPORTING.never
    findings = []
    if closed.any() and share.max() > REPORTING.always:
        steps = f"{_ranges(np.flatnonzero(~closed))} local standard time"
        night = closed[[0, 1, 2, 3]].all() and not closed[9:16].any()
        what = "closed at night: it reports only at" if night else "it reports only at"
        findings.append(
            Finding(
                "note",
                "station",
                station.id,
                "reporting-hours",
                f"{what} {steps}; the other hours have no figures from it.",
            )
        )
    by_month = np.bincount(clock.month[known], minlength=12)
    absent = np.flatnonzero(by_month == 0) + 1
    if len(absent) and clock.n_years > 1:
        findings.append(
            Finding(
                "note",
                "station",
                station.id,
                "reporting-months",
                f"it has no hour in months {_ranges(absent)} of any year.",
            )
        )
    return findings


def _ranges(numbers: Sequence[int] | np.ndarray) -> str:
    """Numbers as ranges: 6-20, 22."""
    parts: list[list[int]] = []
    for number in (int(n) for n in numbers):
        if parts and number == parts[-1][-1] + 1:
            parts[-1].append(number)
        else:
            parts.append([number])
    return ", ".join(str(p[0]) if len(p) == 1 else f"{p[0]}-{p[-1]}" for p in parts)
