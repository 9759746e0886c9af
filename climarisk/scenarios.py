"""The same study with warmer air, other masses or factors, or in part of its years."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from climarisk.aircraft import OPERATIONS, AircraftProfile
from climarisk.atmosphere import density_altitude_ft
from climarisk.climatology import completeness, segment_quantiles
from climarisk.errors import InputError
from climarisk.performance import margins
from climarisk.progress import Progress, quiet
from climarisk.region import region_of
from climarisk.results import StudyResult
from climarisk.risk import Hours, paired_difference, shortfall_by_cell
from climarisk.scene import Scene, scene_of, shifted
from climarisk.study import Study
from climarisk.transfer import warmed
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
#: Factors on take-off and landing distance of commercial air transport in performance class B
#: on a dry runway: Regulation (EU) 965/2012, CAT.POL.A.305 without stopway and clearway, and
#: CAT.POL.A.330, landing within 70 % of the distance available.
REGULATORY_TAKEOFF, REGULATORY_LANDING = 1.25, 1.0 / 0.7
#: What the sensitivity of a study is tried with: kelvins, and shares of the planning mass.
SENSITIVITY_K, SENSITIVITY_MASS = (1.0, 2.0, 3.0), (-0.05, 0.05)
_RELATIVE = "relative humidity"


@dataclass(frozen=True)
class Scenario:
    """A variant of a study.

    Parameters
    ----------
    name : str
    study : Study
        Other than the base in its warmer air, its years or its aircraft alone.
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


def sensitivity(study: Study) -> list[Scenario]:
    """What the figures of a study hang on: warmer air, the planning mass, the factors.

    Parameters
    ----------
    study : Study
    """
    return [
        *scenarios(study, SENSITIVITY_K, _RELATIVE, []),
        *(with_mass(study, change) for change in SENSITIVITY_MASS),
        with_factors(study, "factors 1.0", 1.0, 1.0),
        with_factors(
            study,
            f"regulatory factors (take-off {REGULATORY_TAKEOFF:g}, landing 1/0.7)",
            REGULATORY_TAKEOFF,
            REGULATORY_LANDING,
        ),
    ]


def with_mass(study: Study, change: float) -> Scenario:
    """The study with every planning mass changed by a share of it.

    No mass leaves the range from the empty to the maximum mass.  The name tells the aircraft
    stopped there, and those above their heaviest table, of which every hour falls short.

    Parameters
    ----------
    study : Study
    change : float
        Such as 0.05 for 5 % more.
    """
    aircraft: list[AircraftProfile] = []
    told: dict[str, list[str]] = {}
    for profile in study.aircraft:
        wanted = profile.planning_kg * (1.0 + change)
        mass_kg = min(max(wanted, profile.empty_kg), profile.maximum_kg)
        moved = replace(profile, planning_kg=mass_kg)
        aircraft.append(moved)
        if mass_kg != wanted:
            what = "maximum" if mass_kg == profile.maximum_kg else "empty"
            told.setdefault(f"stopped at the {what} mass", []).append(profile.id)
        if _above_tables(moved) and not _above_tables(profile):
            told.setdefault("above the heaviest table", []).append(profile.id)
    name = f"mass {100 * change:+g} %" + "".join(
        f", {what}: {' '.join(ids)}" for what, ids in told.items()
    )
    return Scenario(name, replace(study, aircraft=tuple(aircraft)))


def _above_tables(profile: AircraftProfile) -> bool:
    """Whether the planning mass is above the heaviest table of any operation."""
    tables = [getattr(profile, operation) for operation in OPERATIONS]
    return any(t and profile.planning_kg > t[-1].mass_kg for t in tables)


def with_factors(study: Study, name: str, takeoff: float, landing: float) -> Scenario:
    """The study with other factors on the distances; those of surface and slope stay.

    Parameters
    ----------
    study : Study
    name : str
    takeoff, landing : float
        In place of every aircraft's own.
    """
    aircraft = [replace(p, takeoff_factor=takeoff, landing_factor=landing) for p in study.aircraft]
    return Scenario(name, replace(study, aircraft=tuple(aircraft)))


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

    Raises
    ------
    InputError
        No field has a usable station in the years of a variant.
    """
    found = _evaluated(variants, weather, progress)
    reference = _reference(base)
    keys = ["field", "aircraft", "month"]
    tables = []
    for variant, (monthly, yearly) in zip(variants, found, strict=True):
        joined = monthly.merge(reference, on=keys, suffixes=("", "_base"))
        joined = joined.merge(_changes(yearly, base), on=keys, how="left")
        joined["scenario"] = variant.name
        for p in ("p50", "p90"):
            column = f"density_altitude_{p}_ft"
            change = joined[column] - joined[f"{column}_base"]
            joined[f"density_altitude_{p}_change_ft"] = change
        tables.append(joined[SCENARIO_COLUMNS])
    return pd.concat(tables, ignore_index=True)


#: Monthly shares with density altitudes, and the counts of each year.
_Tables = tuple[pd.DataFrame, pd.DataFrame]


def _evaluated(variants: Sequence[Scenario], weather: Weather, progress: Progress) -> list[_Tables]:
    """The tables of every variant; those of the same years share the air of each field."""
    by_years: dict[tuple[int, int], list[int]] = {}
    for i, variant in enumerate(variants):
        years = variant.study.first_year, variant.study.last_year
        by_years.setdefault(years, []).append(i)
    parts: list[list[_Tables]] = [[] for _ in variants]
    fields = variants[0].study.fields
    total, done = len(by_years) * len(fields), 0
    for places in by_years.values():
        study = replace(variants[places[0]].study, warmer_k=0.0)
        region = region_of(study, weather, progress)
        used = False
        for field in fields:
            progress("comparing scenarios", done, total)
            scene = scene_of(study, field, region)
            used |= bool((scene.air.share[:, scene.clock.in_period] > 0).any())
            for i, tables in zip(places, _of_field(scene, variants, places), strict=True):
                parts[i].append(tables)
            done += 1
        _refuse_unused(used, study)
    progress("comparing scenarios", total, total)
    return [(_stacked([m for m, _ in part]), _stacked([y for _, y in part])) for part in parts]


def _refuse_unused(used: bool, study: Study) -> None:
    if not used:
        raise InputError(
            f"{study.path}: no field of the study has a usable station in "
            f"{study.first_year}-{study.last_year}; compare other years."
        )


def _stacked(frames: Sequence[pd.DataFrame]) -> pd.DataFrame:
    filled = [f for f in frames if len(f)]
    return pd.concat(filled, ignore_index=True) if filled else frames[0]


def _of_field(base: Scene, variants: Sequence[Scenario], places: Sequence[int]) -> list[_Tables]:
    """The tables of some variants at one field, computed once where they have the same air."""
    airs: dict[tuple[float, str], _Air] = {}
    found = []
    for study in (variants[i].study for i in places):
        key = study.warmer_k, study.warmer_holds if study.warmer_k else ""
        if key not in airs:
            air = warmed(base.air, *_warming(study), base.field.elevation_m)
            airs[key] = _Air(base if air is base.air else replace(base, air=air))
        found.append(airs[key].tables(study.aircraft))
    return found


def _warming(study: Study) -> tuple[float, str]:
    return study.warmer_k, study.warmer_holds


class _Air:
    """One air at one field: its hours that enter the months, ready for any aircraft."""

    def __init__(self, scene: Scene) -> None:
        self.scene, self.clock = scene, scene.clock
        on_grid = np.zeros(len(scene.clock.hour), bool)
        on_grid[scene.known] = True
        self.places = np.flatnonzero(completeness(on_grid, scene.clock).used & scene.inside)
        self.month = self.clock.month[self.places]
        self.central = scene.table_air(self.places)
        carried = np.isfinite(scene.air.carried_m[self.places])
        self.carried = np.flatnonzero(carried)
        where = self.places[carried]
        self.levels = [scene.table_air(where, shift[where]) for shift in scene.shifts]
        self.altitudes = self._altitudes()

    def tables(self, aircraft: Sequence[AircraftProfile]) -> _Tables:
        """Monthly shares with density altitudes, and the counts of each year, of some aircraft."""
        monthly, yearly = [], []
        for profile in aircraft:
            named = {"field": self.scene.field.id, "aircraft": profile.id}
            hours = self._hours(profile)
            every = np.ones(len(self.places), bool)
            shares = shortfall_by_cell(hours, every, self.month, 12).assign(**self.altitudes)
            monthly.append(shares.assign(month=np.arange(1, 13), **named))
            yearly.append(self._yearly(hours).assign(**named))
        return _stacked(monthly), _stacked(yearly)

    def _hours(self, profile: AircraftProfile) -> Hours:
        scene = self.scene
        central = margins(profile, scene.field, self.central)
        levels = []
        for air in self.levels:
            shortfall = central.shortfall.copy()
            shortfall[self.carried] = margins(profile, scene.field, air).shortfall
            levels.append(replace(central, shortfall=shortfall))
        return Hours(
            self.clock,
            self.places,
            central,
            scene.inside,
            scene.study.confidence,
            levels,
            scene.error.place_share,
        )

    def _yearly(self, hours: Hours) -> pd.DataFrame:
        """Hours and shortfall hours of each month of each year, as `climarisk.risk` counts them."""
        levels = hours.levels or (hours.central,)
        n_years = self.clock.n_years
        index = self.month * n_years + self.clock.year[self.places]
        total = np.bincount(index, minlength=12 * n_years)
        fallen = sum(np.bincount(index, m.shortfall, 12 * n_years) for m in levels) / len(levels)
        some = np.flatnonzero(total)
        return pd.DataFrame(
            {
                "month": some // n_years + 1,
                "year": some % n_years + self.clock.first_year,
                "n_hours": total[some],
                "shortfall_hours": np.asarray(fallen)[some],
            }
        )

    def _altitudes(self) -> dict[str, np.ndarray]:
        """P50 and P90 of density altitude by month, the error of the air included."""
        scene, air = self.scene, self.scene.air

        def altitude(shift_k: np.ndarray | float) -> np.ndarray:
            return density_altitude_ft(air.pressure_hpa, *shifted(scene.field, air, shift_k))

        central = altitude(0.0)
        used = completeness(np.isfinite(central), self.clock).used & scene.inside
        values = [central[used]]
        if (scene.sd_k != 0.0).any():
            values = [altitude(z * scene.sd_k)[used] for z in scene.error.hour_levels]
        months = np.tile(self.clock.month[used], len(values))
        quantiles = segment_quantiles(np.concatenate(values), months, 12, np.array([0.5, 0.9]))
        return {f"density_altitude_{p}_ft": quantiles[:, i] for i, p in enumerate(("p50", "p90"))}


def _changes(yearly: pd.DataFrame, base: StudyResult) -> pd.DataFrame:
    """Change of every monthly share with its interval, from the same resampled years."""
    years = range(base.settings["first_year"], base.settings["last_year"] + 1)
    keys = ["field", "aircraft"]
    own, other = (dict(list(table.groupby(keys))) for table in (yearly, base.risk_yearly))
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


def _reference(result: StudyResult) -> pd.DataFrame:
    """The study's own density altitudes by field, aircraft and month."""
    air = result.distributions_monthly
    air = air[air["variable"] == "density_altitude"][["field", "month", "p50", "p90"]]
    air = air.rename(columns={p: f"density_altitude_{p}_ft" for p in ("p50", "p90")})
    keys = result.risk_monthly[["field", "aircraft", "month"]]
    return keys.merge(air, on=["field", "month"], how="left")
