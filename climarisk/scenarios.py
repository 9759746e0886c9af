"""The same study with warmer air, or in part of its years, held against the study itself."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import pandas as pd

from climarisk.errors import InputError
from climarisk.pipeline import evaluate
from climarisk.progress import Progress, quiet
from climarisk.results import StudyResult
from climarisk.risk import paired_difference
from climarisk.study import Study
from climarisk.weather import Weather

#: Columns of ``scenarios.csv``.
SCENARIO_COLUMNS = [
    "scenario",
    "field",
    "aircraft",
    "month",
    "n_hours",
    "n_years",
    "shortfall",
    "ci_low",
    "ci_high",
    "shortfall_change",
    "change_ci_low",
    "change_ci_high",
    "density_altitude_p50_ft",
    "density_altitude_p90_ft",
    "density_altitude_p50_change_ft",
    "density_altitude_p90_change_ft",
]
_LARGEST_K = 10.0


@dataclass(frozen=True)
class Scenario:
    """A variant of a study.

    Parameters
    ----------
    name : str
    study : Study
    """

    name: str
    study: Study


def scenarios(
    study: Study, warmer_k: Sequence[float], holds: str, years: Sequence[str]
) -> list[Scenario]:
    """The variants asked for.

    Parameters
    ----------
    study : Study
    warmer_k : sequence of float
        Kelvins by which the air is warmer, within -10 to 10.
    holds : {"relative humidity", "vapour pressure"}
        What stays unchanged.
    years : sequence of str
        Sub-periods such as ``"2010-2014"``, inside the study's period.

    Raises
    ------
    InputError
        A value is not allowed.
    """
    found = []
    for k in warmer_k:
        if not abs(k) <= _LARGEST_K:
            raise InputError(
                f"--warmer {k:g}: between -{_LARGEST_K:g} and {_LARGEST_K:g} K allowed."
            )
        name = f"air {float(k):+} K, {holds} unchanged".replace(".0 K", " K")
        found.append(Scenario(name, replace(study, warmer_k=float(k), warmer_holds=holds)))
    for text in years:
        first, last = _sub_period(text, study)
        found.append(Scenario(f"{first}-{last}", replace(study, first_year=first, last_year=last)))
    return list({scenario.name: scenario for scenario in found}.values())


def _sub_period(text: str, study: Study) -> tuple[int, int]:
    try:
        first, last = (int(part) for part in text.split("-"))
    except ValueError:
        raise InputError(f"--years {text!r}: give two years as 2010-2014.") from None
    if not study.first_year <= first <= last <= study.last_year:
        raise InputError(
            f"--years {text}: the first year must not be after the last, and both within the "
            f"study's {study.first_year}-{study.last_year}."
        )
    return first, last


def compare(
    base: StudyResult,
    variants: Sequence[Scenario],
    weather: Weather,
    progress: Progress = quiet,
) -> pd.DataFrame:
    """Monthly figures of each variant and their change against the study.

    Parameters
    ----------
    base : StudyResult
    variants : sequence of Scenario
        One at least.
    weather : Weather
    progress : callable

    Returns
    -------
    DataFrame
        Columns `SCENARIO_COLUMNS`.
    """
    reference = _monthly(base)
    tables = []
    for variant in variants:
        result = evaluate(variant.study, weather, progress)
        keys = ["field", "aircraft", "month"]
        joined = _monthly(result).merge(reference, on=keys, suffixes=("", "_base"))
        joined = joined.merge(_changes(result, base), on=keys, how="left")
        joined["scenario"] = variant.name
        for p in ("p50", "p90"):
            column = f"density_altitude_{p}_ft"
            change = joined[column] - joined[f"{column}_base"]
            joined[f"density_altitude_{p}_change_ft"] = change
        tables.append(joined[SCENARIO_COLUMNS])
    return pd.concat(tables, ignore_index=True)


def _changes(variant: StudyResult, base: StudyResult) -> pd.DataFrame:
    """Change of every monthly share with its interval, from the same resampled years."""
    years = range(base.settings["first_year"], base.settings["last_year"] + 1)
    keys = ["field", "aircraft"]
    own, other = (dict(list(r.risk_yearly.groupby(keys))) for r in (variant, base))
    empty = base.risk_yearly.iloc[:0]
    tables = []
    for field in base.fields:
        for profile in base.aircraft:
            pair = (field.id, profile.id)
            table = paired_difference(
                own.get(pair, empty), other.get(pair, empty), years, base.settings["confidence"]
            )
            tables.append(table.assign(field=field.id, aircraft=profile.id))
    names = {
        "difference": "shortfall_change",
        "ci_low": "change_ci_low",
        "ci_high": "change_ci_high",
    }
    return pd.concat(tables, ignore_index=True).rename(columns=names)


def _monthly(result: StudyResult) -> pd.DataFrame:
    air = result.distributions_monthly
    air = air[air["variable"] == "density_altitude"][["field", "month", "p50", "p90"]]
    air = air.rename(columns={p: f"density_altitude_{p}_ft" for p in ("p50", "p90")})
    columns = ["field", "aircraft", "month", "n_hours", "n_years", "shortfall", "ci_low", "ci_high"]
    return result.risk_monthly[columns].merge(air, on=["field", "month"], how="left")
