"""Scores of one hidden station by group of hours, and their means over stations."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import pandas as pd

from climarisk.atmosphere import (
    LAPSE_K_PER_M,
    density_altitude_ft,
    dew_point_c,
    isa_pressure_hpa,
)
from climarisk.climatology import segment_quantiles
from climarisk.transfer import StationAir, candidates
from climarisk.transfer_error import HiddenStation, TransferError, half_day
from climarisk.verify import Hidden, as_field

#: Edges of the classes of the height that the air was carried over, m.
HEIGHT_EDGES_M = (100, 300, 500)
#: A month x hour cell needs this many common hours for its percentiles to be compared.
CELL_HOURS = 20
#: The limit where none is given: each station's own percentile of density altitude, as a share.
LIMIT_SHARE = 0.9
#: The central interval whose coverage is counted.
INTERVAL = (0.1, 0.9)

_HALVES = ("night", "day")
#: Every group that errors are told for: kind and name, in the order of the tables.
GROUPS: tuple[tuple[str, str], ...] = (
    ("all", "all"),
    *(("month", f"{m:02d}") for m in range(1, 13)),
    *(("half-day", half) for half in _HALVES),
    *(("height", f"{a}-{b} m") for a, b in pairwise((0, *HEIGHT_EDGES_M))),
    ("height", f"{HEIGHT_EDGES_M[-1]}+ m"),
    *(("month and half-day", f"{m:02d} {half}") for m in range(1, 13) for half in _HALVES),
)
MEASURES = (
    "n_hours",
    "bias_k",
    "mae_k",
    "rmse_k",
    "n_hours_ft",
    "bias_ft",
    "mae_ft",
    "rmse_ft",
    "limit_ft",
    "hit_rate",
    "false_alarm_rate",
    "mae_fixed_k",
    "skill_fixed",
    "mae_nearest_k",
    "skill_nearest",
    "dew_point_bias_k",
    "dew_point_mae_k",
    "coverage_80",
    "n_cells",
    *(
        f"cell_{what}{of}"
        for of in ("", "_central")
        for what in ("median_mae_k", "p90_mae_k", "p90_bias_k")
    ),
)


@dataclass(frozen=True)
class Shown:
    """One hidden station with its errors.

    Parameters
    ----------
    hidden : Hidden
    error : HiddenStation
        Its ``error_k`` is observed minus estimated; the scores are the other way round.
    """

    hidden: Hidden
    error: HiddenStation

    @property
    def id(self) -> str:
        """The station's identifier."""
        return self.hidden.air.station.id

    @property
    def known(self) -> np.ndarray:
        """Places of the hours in which it is both measured and estimated."""
        return np.flatnonzero(np.isfinite(self.error.error_k))


def _group_codes(shown: Shown, known: np.ndarray) -> np.ndarray:
    """Row of `GROUPS` of each hour, one for each kind, shape (5, n_hours)."""
    clock = shown.hidden.clock
    month, half = clock.month[known], half_day(clock.hour[known])
    height = np.digitize(shown.error.carried_m[known], HEIGHT_EDGES_M)
    within = [np.zeros_like(month), month, half, height, month * len(_HALVES) + half]
    kinds = [kind for kind, _ in GROUPS]
    first = [kinds.index(kind) for kind in dict.fromkeys(kinds)]
    return np.array([start + codes for start, codes in zip(first, within, strict=True)])


def _count(values: np.ndarray, codes: np.ndarray) -> np.ndarray:
    """Sum of the values of each group, NaN ones left out; shape (n_groups,)."""
    filled = np.where(np.isfinite(values), values, 0.0)
    return np.sum([np.bincount(c, filled, len(GROUPS)) for c in codes], axis=0)


def _mean(values: np.ndarray, codes: np.ndarray) -> np.ndarray:
    """Mean of the known values of each group; NaN for a group without any."""
    n = _count(np.isfinite(values).astype(float), codes)
    return _count(values, codes) / np.where(n > 0, n, np.nan)


def measures_of(
    shown: Shown,
    stations: Sequence[StationAir],
    radius_km: float,
    nested: TransferError,
    limit_ft: float | None,
) -> dict[str, np.ndarray]:
    """Every measure of every group of a hidden station, each of shape (n_groups,).

    Parameters
    ----------
    shown : Shown
    stations : sequence of StationAir
        All of the study.
    radius_km : float
    nested : TransferError
        Learned without this station.
    limit_ft : float or None
        Density altitude; None: the station's own 90th percentile.

    Returns
    -------
    dict of str to ndarray
        Keys `MEASURES`; NaN where a group has no value.
    """
    hidden, known = shown.hidden, shown.known
    codes = _group_codes(shown, known)
    error_k = -shown.error.error_k[known]
    truth = hidden.air.temperature_c[known]
    fixed, nearest = _references(hidden, stations, radius_km)
    measures = {
        "n_hours": _count(np.ones(len(known)), codes),
        "bias_k": _mean(error_k, codes),
        "mae_k": _mean(np.abs(error_k), codes),
        "rmse_k": np.sqrt(_mean(error_k**2, codes)),
        "mae_fixed_k": _mean(np.abs(fixed[known] - truth), codes),
        "mae_nearest_k": _mean(np.abs(nearest[known] - truth), codes),
        "coverage_80": _mean(_covered(shown, known, nested), codes),
    }
    measures |= _humid_measures(hidden, known, codes, limit_ft)
    return _with_skill(measures | _cell_measures(shown, nested))


def _with_skill(measures: dict[str, np.ndarray]) -> dict[str, np.ndarray]:
    """The measures with the skill against both references; NaN where a reference is exact."""
    found = dict(measures)
    for name in ("fixed", "nearest"):
        reference = measures[f"mae_{name}_k"]
        ratio = measures["mae_k"] / np.where(reference > 0, reference, np.nan)
        found[f"skill_{name}"] = 1.0 - ratio
    return found


def _references(
    hidden: Hidden, stations: Sequence[StationAir], radius_km: float
) -> tuple[np.ndarray, np.ndarray]:
    """Temperature hour by hour of the two methods that skill is held against.

    The same stations with the same weights at the standard lapse of 6.5 K/km, and the nearest
    of them that reports in the hour, taken as it is.
    """
    field = as_field(hidden.air)
    others = [s for s in stations if s is not hidden.air]
    chosen = [c for c in candidates(field, others, radius_km) if not c.on_spot]
    fixed = np.zeros(len(hidden.clock.hour))
    nearest, nearest_km = np.full(len(fixed), np.nan), np.full(len(fixed), np.inf)
    for share, c in zip(hidden.estimate.share, chosen, strict=True):
        reports = share > 0
        carried = c.air.temperature_c - LAPSE_K_PER_M * c.height_difference_m
        fixed += share * np.where(reports, carried, 0.0)
        closer = reports & (c.distance_km < nearest_km)
        nearest[closer], nearest_km[closer] = c.air.temperature_c[closer], c.distance_km
    return fixed, nearest


def _covered(shown: Shown, known: np.ndarray, nested: TransferError) -> np.ndarray:
    """1 for each hour within the central 80 % interval of the others' errors, else 0."""
    error = shown.error
    sd_k = nested.sd_k(error.carried_m, error.month, error.hour, error.carried_km)[known]
    low, high = (nested.quantile(p) * sd_k for p in INTERVAL)
    return ((error.error_k[known] >= low) & (error.error_k[known] <= high)).astype(float)


def _humid_measures(
    hidden: Hidden, known: np.ndarray, codes: np.ndarray, limit_ft: float | None
) -> dict[str, np.ndarray]:
    """Measures of density altitude and dew point, over the hours whose humidity is measured."""
    air, guess = hidden.air, hidden.estimate
    pressure = np.where(
        np.isfinite(air.pressure_hpa), air.pressure_hpa, isa_pressure_hpa(air.station.elevation_m)
    )[known]
    true_e, guess_e = air.vapour_pressure_hpa[known], guess.vapour_pressure_hpa[known]
    true_ft = density_altitude_ft(pressure, air.temperature_c[known], true_e)
    guess_ft = density_altitude_ft(pressure, guess.temperature_c[known], guess_e)
    error_ft = guess_ft - true_ft
    dew_k = dew_point_c(guess_e, pressure) - dew_point_c(true_e, pressure)
    both = np.isfinite(error_ft)
    if limit_ft is None:
        measured = true_ft[np.isfinite(true_ft)]
        one = np.zeros(len(measured), int)
        limit_ft = float(segment_quantiles(measured, one, 1, np.array([LIMIT_SHARE]))[0, 0])
    above, said = (true_ft > limit_ft) & both, (guess_ft > limit_ft) & both
    hits = _count((above & said).astype(float), codes)

    def share_of(part: np.ndarray, whole: np.ndarray) -> np.ndarray:
        n = _count(whole.astype(float), codes)
        return part / np.where(n > 0, n, np.nan)

    return {
        "n_hours_ft": _count(both.astype(float), codes),
        "bias_ft": _mean(error_ft, codes),
        "mae_ft": _mean(np.abs(error_ft), codes),
        "rmse_ft": np.sqrt(_mean(error_ft**2, codes)),
        "limit_ft": np.full(len(GROUPS), limit_ft),
        "hit_rate": share_of(hits, above),
        "false_alarm_rate": share_of(_count((said & ~above).astype(float), codes), said),
        "dew_point_bias_k": _mean(dew_k, codes),
        "dew_point_mae_k": _mean(np.abs(dew_k), codes),
    }


def _cell_measures(shown: Shown, nested: TransferError) -> dict[str, np.ndarray]:
    """Errors of the percentiles of the month x hour cells, in the group of all hours."""
    error, known = shown.error, shown.known
    cell = shown.hidden.clock.month_hour[known]
    enough = np.bincount(cell, minlength=288) >= CELL_HOURS
    sd_k = nested.sd_k(error.carried_m, error.month, error.hour, error.carried_km)[known]
    central = shown.hidden.estimate.temperature_c[known]
    levels = central[None, :] + nested.hour_levels[:, None] * sd_k[None, :]
    share = np.array([0.5, 0.9])
    truth = segment_quantiles(shown.hidden.air.temperature_c[known], cell, 288, share)
    told = {"n_cells": float(enough.sum())}
    for of, values in (("", levels), ("_central", central[None, :])):
        guess = segment_quantiles(values.reshape(-1), np.tile(cell, len(values)), 288, share)
        median, p90 = (guess - truth)[enough].T
        if enough.any():
            told[f"cell_median_mae_k{of}"] = float(np.abs(median).mean())
            told[f"cell_p90_mae_k{of}"] = float(np.abs(p90).mean())
            told[f"cell_p90_bias_k{of}"] = float(p90.mean())
    measures = {
        name: np.full(len(GROUPS), np.nan) for name in MEASURES[MEASURES.index("n_cells") :]
    }
    for name, value in told.items():
        measures[name][0] = value
    return measures


def group_table(measures: dict[str, np.ndarray]) -> pd.DataFrame:
    """The groups that have hours, one row each."""
    table = pd.DataFrame(GROUPS, columns=["group_kind", "group"])
    for name in MEASURES:
        table[name] = measures[name]
    table = table[table["n_hours"] > 0]
    return table.astype({"n_hours": int, "n_hours_ft": int, "n_cells": "Int64"})


def mean_of(measures: Sequence[dict[str, np.ndarray]]) -> dict[str, np.ndarray]:
    """Each measure's mean over the stations that have it; hours and cells summed."""
    mean = {}
    for name in measures[0]:
        values = np.array([m[name] for m in measures])
        known = np.isfinite(values)
        total = np.where(known, values, 0.0).sum(axis=0)
        n = np.where(known.any(axis=0), known.sum(axis=0), np.nan)
        mean[name] = total * (n / n) if name.startswith("n_") else total / n
    # A mean of the stations' own limits would be the limit of none.
    limits = np.array([m["limit_ft"] for m in measures])
    if np.ptp(limits) > 0 or not np.isfinite(limits).all():
        mean["limit_ft"] = np.full(len(GROUPS), np.nan)
    return _with_skill(mean)
