"""Whether a station's hours are dated as its neighbours' are."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from climarisk.findings import Finding
from climarisk.stations import Station, distance_km

#: Lags tried, hours: four days either way, in the steps of the series compared.
_STEP_H, _FURTHEST_H = 3, 96
#: A lag of a passing front is below this, hours; a misdated file's is above it.
_SMALLEST_H = 12
#: A lag is believed where it lifts the correlation by this much (measured on real networks:
#: well-dated stations gain less than 0.01, misdated ones more than 0.05).
_GAIN = 0.04
#: A lag is believed where the moved series has at least this correlation.
_LEAST_CORRELATION = 0.3
#: Neighbours compared with: within this distance, at least so many, at most so many.
_NEIGHBOUR_KM, _FEWEST, _MOST = 150.0, 2, 10
#: Common hours needed, in steps: a season.
_COMMON_STEPS = 90 * 24 // _STEP_H


@dataclass(frozen=True)
class Misdating:
    """A station whose hours fit its neighbours' only when moved.

    Parameters
    ----------
    lag_h : int
        Hours by which the station runs late; negative: early.
    correlation_as_dated, correlation_moved : float
        Of its temperature anomalies with the median of its neighbours'.
    """

    lag_h: int
    correlation_as_dated: float
    correlation_moved: float


def misdated(
    stations: Sequence[Station], temperatures_c: Sequence[np.ndarray], month_hour: np.ndarray
) -> dict[str, Misdating]:
    """Stations whose dates contradict their neighbours', by id.

    The anomalies from each station's own month x hour means are correlated with the median
    anomaly of its neighbours at lags up to four days.  The worst is found first and no longer
    serves as a neighbour.  Needs two neighbours with a season in common.

    Parameters
    ----------
    stations : sequence of Station
    temperatures_c : sequence of ndarray, each of shape (n_hours,)
        On one grid of consecutive hours.
    month_hour : ndarray of int, shape (n_hours,)
        Cell of each hour, month x 24 + hour, in any one zone.
    """
    anomalies = [_anomaly(t, month_hour)[::_STEP_H] for t in temperatures_c]
    near = [_neighbours(i, stations) for i in range(len(stations))]
    found: dict[int, Misdating] = {}
    while True:
        suspects = {}
        for i in range(len(stations)):
            others = [j for j in near[i] if j not in found][:_MOST]
            if i not in found and len(others) >= _FEWEST:
                suspect = _lag(anomalies[i], [anomalies[j] for j in others])
                if suspect is not None:
                    suspects[i] = suspect
        if not suspects:
            break
        worst = max(
            suspects,
            key=lambda i: suspects[i].correlation_moved - suspects[i].correlation_as_dated,
        )
        found[worst] = suspects[worst]
    return {stations[i].id: m for i, m in sorted(found.items())}


def _anomaly(temperature_c: np.ndarray, month_hour: np.ndarray) -> np.ndarray:
    known = np.isfinite(temperature_c)
    count = np.bincount(month_hour[known], minlength=288)
    total = np.bincount(month_hour[known], temperature_c[known], 288)
    return temperature_c - (total / np.maximum(count, 1))[month_hour]


def _neighbours(i: int, stations: Sequence[Station]) -> list[int]:
    a = stations[i]
    distances = {
        j: distance_km(a.latitude, a.longitude, b.latitude, b.longitude)
        for j, b in enumerate(stations)
        if j != i
    }
    near = [j for j, d in distances.items() if d <= _NEIGHBOUR_KM]
    return sorted(near, key=lambda j: (distances[j], stations[j].id))


def _lag(own: np.ndarray, others: Sequence[np.ndarray]) -> Misdating | None:
    """The lag that fits clearly better than none, or None."""
    stack = np.array(others)
    enough = np.isfinite(stack).sum(axis=0) >= _FEWEST
    reference = np.full(len(own), np.nan)
    reference[enough] = np.nanmedian(stack[:, enough], axis=0)
    steps = range(-_FURTHEST_H // _STEP_H, _FURTHEST_H // _STEP_H + 1)
    fit = {s * _STEP_H: _correlation(own, reference, s) for s in steps}
    as_dated = fit[0]
    best = max(fit, key=lambda lag: fit[lag] if np.isfinite(fit[lag]) else -2.0)
    if not np.isfinite(as_dated) or abs(best) < _SMALLEST_H:
        return None
    if fit[best] - as_dated < _GAIN or fit[best] < _LEAST_CORRELATION:
        return None
    return Misdating(best, as_dated, fit[best])


def _correlation(own: np.ndarray, reference: np.ndarray, steps: int) -> float:
    """Correlation of the series with the reference `steps` earlier."""
    if steps > 0:
        a, b = own[steps:], reference[:-steps]
    elif steps < 0:
        a, b = own[:steps], reference[-steps:]
    else:
        a, b = own, reference
    both = np.isfinite(a) & np.isfinite(b)
    if both.sum() < _COMMON_STEPS:
        return np.nan
    a, b = a[both] - a[both].mean(), b[both] - b[both].mean()
    scale = np.sqrt((a * a).sum() * (b * b).sum())
    return float((a * b).sum() / scale) if scale > 0 else np.nan


def timing_findings(found: dict[str, Misdating]) -> list[Finding]:
    """A rejection for each misdated station."""
    return [
        Finding(
            "reject",
            "station",
            station,
            "timing",
            f"its hours fit its neighbours' best when moved by about {-m.lag_h:+d} h (correlation "
            f"{m.correlation_moved:.2f} instead of {m.correlation_as_dated:.2f}): its dates look "
            "wrong. Nothing is carried from it to other places; check the dates and the time "
            "zone of its archive.",
        )
        for station, m in found.items()
    ]
