"""A schedule against the record: how often each flight falls short, and how many in all.

Every date of a flight is an hour of local standard time; what stands for it are the hours of
the record at that hour of the day on the 31 days around it (`climarisk.occasions`).  Flights
share their weather: whatever is resampled is resampled for all of them together.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import fields, replace
from functools import cached_property

import numpy as np
import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.flights import Flight
from climarisk.largest_mass import largest_mass
from climarisk.occasions import (
    HALF_WINDOW_DAYS,
    Record,
    StandardHours,
    date_array,
    hours_text,
    inside_window,
    is_skipped,
    odd_readings,
    standard_hours,
    windows,
)
from climarisk.performance import CHECKS, TableAir, margins
from climarisk.results import (
    SCHEDULE_DAYS_COLUMNS,
    SCHEDULE_FLIGHTS_COLUMNS,
    SCHEDULE_SEASONS_COLUMNS,
)
from climarisk.rules import DAYS, YEARS, interval_notes
from climarisk.scene import Scene
from climarisk.schedule_sums import FlightScores, Occasion, Tally, bounds_of, summed
from climarisk.study import Study

#: Checks that an operation has to pass, as places in `CHECKS`; its limits are always among them.
OPERATION_CHECKS = {
    "takeoff": (0, 1, 3, 4, 5, 6),
    "landing": (2, 5, 6),
    "both": tuple(range(len(CHECKS))),
}
#: Another clock time is looked for so many hours to either side, the nearest first and of two
#: the earlier one.
MOST_SHIFT_H = 12
#: The note where neither a time nor that there is none can be told.
NEAREST_NOT_TOLD = "the nearest time cannot be told"
_SHIFTS = tuple(sign * h for h in range(1, MOST_SHIFT_H + 1) for sign in (-1, 1))
#: Dates and hours kept ready for the flights that share them.
_KEPT = 64


def score_flights(scene: Scene, flights: Sequence[Flight]) -> FlightScores:
    """How often the flights at a field fall short.

    Parameters
    ----------
    scene : Scene
    flights : sequence of Flight
        Those at other fields are left out.

    Notes
    -----
    Every date of a flight counts the same in its share, whatever the number of its hours, so
    that expected numbers of dates, flights and seasons add up.
    """
    own = [flight for flight in flights if flight.field == scene.field.id]
    scorer, tally = _Scorer(scene, own), Tally(scene)
    rows: dict[int, dict] = {}
    # Flights that share dates and time follow each other, so that their air is made once.
    order = sorted(range(len(own)), key=lambda i: (own[i].when, own[i].time, own[i].aircraft))
    for i in order:
        occasion = scorer.occasion(own[i])
        counts = scorer.counts(own[i], occasion)
        rows[i] = scorer.row(own[i], occasion, counts)
        tally.add(own[i], occasion, counts)
    low, high = tally.intervals()
    for place, i in enumerate(order):
        rows[i] |= {"ci_low": low[place], "ci_high": high[place]}
    table = _flight_table([rows[i] for i in range(len(own))])
    return tally.scores(scene.field.id, table)


def _flight_table(rows: Sequence[dict]) -> pd.DataFrame:
    """Rows of flights with whole numbers as such, however few of them have a value."""
    table = pd.DataFrame(rows, columns=SCHEDULE_FLIGHTS_COLUMNS)
    whole = dict.fromkeys(("flights", "n_hours", "n_years", "unknown_flights"), "int64")
    return table.astype(whole | {"nearest_shift_h": "Int64"})


def lighter_holds(profile: AircraftProfile) -> bool:
    """Whether every check that holds at a mass surely holds at every lighter one.

    Tables of one operation on the same axes require no less at a greater mass (they are refused
    otherwise); on other axes, or with a blank cell, that is not certain.

    Parameters
    ----------
    profile : AircraftProfile
    """
    for tables in (profile.takeoff, profile.landing, profile.climb):
        for table in tables:
            same = all(
                np.array_equal(getattr(table, axis), getattr(tables[0], axis))
                for axis in ("pressure_altitude_ft", "temperature_c")
            )
            if not same or any(np.isnan(grid).any() for grid in table.values.values()):
                return False
    return True


def _part(air: TableAir, chosen: np.ndarray) -> TableAir:
    """Some hours of the air."""
    if chosen.all():
        return air
    columns = (f.name for f in fields(air) if not f.name.startswith("_"))
    return TableAir(**{name: getattr(air, name)[chosen] for name in columns})


class _Scorer:
    """Scores the flights of one field."""

    def __init__(self, scene: Scene, flights: Sequence[Flight]) -> None:
        self.scene = scene
        self.record = Record(scene.clock, scene.known)
        self.profiles = {profile.id: profile for profile in scene.study.aircraft}
        self.monotone = {p.id: lighter_holds(p) for p in scene.study.aircraft}
        self.n_levels = max(len(scene.shifts), 1)
        self._when: dict[tuple, StandardHours] = {}
        self._occasions: dict[tuple, Occasion] = {}
        self._masses: dict[tuple[str, str], tuple[np.ndarray, set[int]]] = {}
        self._dates = np.unique(np.array([d for f in flights for d in f.dates], "datetime64[D]"))

    # Hours

    def occasion(self, flight: Flight, shift_h: int = 0) -> Occasion:
        """The dates of a flight at its clock time, or so many hours later."""
        when = self.when(flight, shift_h)
        # Clock times that round to the same hours share everything.
        key = flight.dates, when.date.tobytes(), when.hour.tobytes()
        if key not in self._occasions:
            if len(self._occasions) >= _KEPT:
                del self._occasions[next(iter(self._occasions))]
            of_seasons = [
                [(date.month, date.day) in season.days for date in flight.dates]
                for season in self.scene.study.seasons
            ]
            members = np.array([np.ones(len(flight.dates)), *of_seasons], float)
            self._occasions[key] = Occasion(when, windows(self.record, when), members)
        return self._occasions[key]

    def when(self, flight: Flight, shift_h: int) -> StandardHours:
        """The hours of local standard time of a flight, or of one so many hours later."""
        key = flight.dates, flight.time, shift_h
        if key not in self._when:
            if len(self._when) >= _KEPT:
                del self._when[next(iter(self._when))]
            dates, zone = date_array(flight.dates), self.scene.field.timezone
            self._when[key] = standard_hours(zone, dates, flight.time, shift_h)
        return self._when[key]

    def air(self, places: np.ndarray) -> tuple[TableAir, np.ndarray]:
        """The air of some known hours as estimated and at each level of the transfer error.

        Returns
        -------
        air : TableAir
            Hours measured here once, the others at each level, level by level.
        carried : ndarray of bool, shape (len(places),)
        """
        scene, where = self.scene, self.scene.known[places]
        carried = np.isfinite(scene.air.carried_m[where]) & np.full(
            len(where), len(scene.shifts) > 0
        )
        moved = where[carried]
        shift = scene.shifts[:, moved].reshape(-1)
        here = where[~carried]
        times = len(scene.shifts) if len(moved) else 0
        all_places = np.concatenate([here, np.tile(moved, times)])
        return scene.table_air(all_places, np.concatenate([np.zeros(len(here)), shift])), carried

    def on_levels(self, values: np.ndarray, carried: np.ndarray) -> np.ndarray:
        """Values of `air` as an array of shape (n_levels, n)."""
        here = int((~carried).sum())
        spread = np.empty((self.n_levels, len(carried)), values.dtype)
        spread[:, ~carried] = values[:here]
        if carried.any():
            spread[:, carried] = values[here:].reshape(self.n_levels, -1)
        return spread

    # Shortfalls

    def verdicts(self, flight: Flight, occasion: Occasion) -> tuple[np.ndarray, np.ndarray]:
        """Whether each hour falls short at each level, and by which check most where it does.

        The checks are made wherever the largest mass does not already show that they hold.
        """
        key = "verdicts", flight.aircraft, flight.mass_kg, flight.operation
        if key not in occasion.cache:
            if "air" not in occasion.cache:
                occasion.cache["air"] = self.air(occasion.windows.places)
            air, carried = occasion.cache["air"]
            profile, rows = self.loaded(flight), list(OPERATION_CHECKS[flight.operation])
            doubtful = np.ones(len(air.temperature_c), bool)
            if self.monotone[profile.id]:
                heavy = self.masses(flight, occasion) < profile.planning_kg
                doubtful = np.concatenate([heavy[0, ~carried], heavy[:, carried].reshape(-1)])
            checks = margins(profile, self.scene.field, _part(air, doubtful)).checks[rows]
            short, worst = np.zeros(len(doubtful), bool), np.zeros(len(doubtful), np.int8)
            short[doubtful] = (checks < 0).any(axis=0)
            worst[doubtful] = np.array(rows)[checks.argmin(axis=0)]
            occasion.cache[key] = self.on_levels(short, carried), self.on_levels(worst, carried)
        return occasion.cache[key]

    def counts(self, flight: Flight, occasion: Occasion) -> np.ndarray:
        """Hours that fall short of each date, year and level."""
        return occasion.windows.sums(self.verdicts(flight, occasion)[0])

    def loaded(self, flight: Flight) -> AircraftProfile:
        """The profile at the mass of the flight."""
        profile = self.profiles[flight.aircraft]
        return profile if flight.mass_kg is None else replace(profile, planning_kg=flight.mass_kg)

    # Masses

    def masses(self, flight: Flight, occasion: Occasion) -> np.ndarray:
        """Largest mass of each hour at each level, shape (n_levels, n)."""
        key = flight.aircraft, flight.operation
        last, found = occasion.cache.get("masses", ("", None))
        if last == key:
            return found
        if key not in self._masses:
            self._masses[key] = np.full((self.n_levels, len(self.scene.known)), np.nan), set()
        table, made = self._masses[key]
        for hour in {int(h) for h in occasion.when.hour} - made:
            places = self.record.by_hour[hour]
            places = places[self._near_a_date[self.record.day[places]]]
            air, carried = self.air(places)
            found = largest_mass(self.profiles[key[0]], self.scene.field, air, flight.operation)
            table[:, places] = self.on_levels(found, carried)
            made.add(hour)
        found = table[:, occasion.windows.places]
        occasion.cache["masses"] = key, found
        return found

    @cached_property
    def _near_a_date(self) -> np.ndarray:
        """Days of the period in the window of any date, or of the day before or after."""
        record = self.record
        near = np.zeros(record.n_days, bool)
        for days in (-1, 0, 1):
            centre = record.centres(self._dates + days).reshape(-1)
            for step in range(-HALF_WINDOW_DAYS, HALF_WINDOW_DAYS + 1):
                near[np.clip(centre + step, 0, record.n_days - 1)] = True
        return near

    def mass_that_holds(self, flight: Flight, occasion: Occasion) -> float:
        """The largest mass that holds in the share asked for; -inf where there is none."""
        key = "mass", flight.aircraft, flight.operation
        if key not in occasion.cache:
            values = self.masses(flight, occasion)
            weight = np.broadcast_to(occasion.windows.weight, values.shape).reshape(-1)
            values = values.reshape(-1)
            order = np.argsort(-values, kind="stable")
            held = np.cumsum(weight[order])
            # The least weight that is at least the share, a rounding apart.
            enough = self.scene.study.planning.holds_in * held[-1] * (1.0 - 1e-12)
            occasion.cache[key] = float(values[order][np.searchsorted(held, enough)])
        return occasion.cache[key]

    # Rows

    def row(self, flight: Flight, occasion: Occasion, counts: np.ndarray) -> dict:
        """The figures of a flight but for the interval."""
        planning, windows = self.scene.study.planning, occasion.windows
        n_known = int(occasion.known.sum())
        row = {
            "flight": flight.id,
            "field": flight.field,
            "aircraft": flight.aircraft,
            "operation": flight.operation,
            "when": flight.when,
            "clock_time": f"{flight.time:%H:%M}",
            "hours": hours_text(occasion.when.hour),
            "mass_kg": self.loaded(flight).planning_kg,
            "flights": len(flight.dates) * flight.repeats,
            "n_hours": len(windows.places),
            "n_years": occasion.n_years,
            "coverage": float(windows.counting.mean()),
            "holds_in": planning.holds_in,
            **dict.fromkeys(("limiting", "outcome", "nearest_time", "never_met"), ""),
            "interval_note": _interval_note(occasion.n_years) if n_known else "",
            "steep": "yes" if self.scene.field.is_steep else "",
            "unknown_flights": (len(flight.dates) - n_known) * flight.repeats,
        }
        notes = self.notes(flight, occasion)
        if n_known:
            share = self.share(occasion, counts)
            never = int(counts.sum()) == int(windows.total.sum()) * self.n_levels
            nearest, is_told = self.nearest(flight, occasion, share)
            row |= {
                "shortfall": share,
                "affected": share * n_known * flight.repeats,
                "limiting": self.limiting(flight, occasion),
                **self.weight(flight, occasion),
                **nearest,
                "never_met": "yes" if never else "no",
            }
        if not n_known or not is_told:
            notes.append(NEAREST_NOT_TOLD)
        return row | {"note": "; ".join(notes)}

    def notes(self, flight: Flight, occasion: Occasion) -> list[str]:
        """What to know of the flight's own time."""
        inside, notes = self.inside(occasion), []
        if not inside.any():
            notes.append("outside the hours window")
        elif not inside.all():
            n_outside = int((~inside).sum())
            notes.append(f"outside the hours window on {n_outside} of {len(inside)} dates")
        dates, zone = date_array(flight.dates), self.scene.field.timezone
        return notes + odd_readings(zone, dates, flight.time)

    def inside(self, occasion: Occasion) -> np.ndarray:
        """Dates whose hour lies inside the hours window, shape (n_dates,)."""
        if "inside" not in occasion.cache:
            study, field = self.scene.study, self.scene.field
            occasion.cache["inside"] = inside_window(study.window, field, occasion.when)
        return occasion.cache["inside"]

    def share(self, occasion: Occasion, counts: np.ndarray) -> float:
        """The shortfall share, every date with figures counting the same."""
        by_date = counts.sum(axis=(1, 2)) * occasion.windows.per_hour / self.n_levels
        return float(by_date[occasion.known].mean())

    def limiting(self, flight: Flight, occasion: Occasion) -> str:
        """The most frequent limiting check; empty without a shortfall."""
        short, worst = self.verdicts(flight, occasion)
        weight = np.broadcast_to(occasion.windows.weight, short.shape)[short]
        votes = np.bincount(worst[short], weight, len(CHECKS))
        return CHECKS[int(votes.argmax())] if len(weight) else ""

    def weight(self, flight: Flight, occasion: Occasion) -> dict:
        """The mass that holds, in the columns of a row."""
        profile, mass = self.profiles[flight.aircraft], self.mass_that_holds(flight, occasion)
        if mass == -np.inf:
            return {"outcome": "cannot be met"}
        return {
            "mass_that_holds_kg": mass,
            "useful_load_kg": mass - profile.empty_kg,
            "outcome": "maximum mass" if mass == profile.maximum_kg else "mass",
        }

    def nearest(self, flight: Flight, occasion: Occasion, share: float) -> tuple[dict, bool]:
        """The nearest clock time below the target, in the columns of a row; empty without one.

        It is looked for on the dates on which the flight itself has figures.  A time counts
        when all of these have figures there and lie inside the hours window, and clocks skip
        it on none.

        Returns
        -------
        columns : dict
        is_told : bool
            False where there are times inside the window and no figures at any of them, so
            that none can be named or ruled out.
        """
        target = self.scene.study.planning.target
        if share < target:
            return _nearest(flight.time, 0, share), True
        known = tuple(d for d, has in zip(flight.dates, occasion.known, strict=True) if has)
        flight, n_inside, n_told = replace(flight, dates=known), 0, 0
        for shift_h in _SHIFTS:
            moved = self.occasion(flight, shift_h)
            if not self.inside(moved).all():
                continue
            n_inside += 1
            if not moved.known.all():
                continue
            n_told += 1
            there = self.share_below(flight, moved, target)
            if there is not None and not self.is_skipped(flight, shift_h):
                return _nearest(flight.time, shift_h, there), True
        return {}, n_told > 0 or n_inside == 0

    def is_skipped(self, flight: Flight, shift_h: int) -> bool:
        """Whether clocks skip the time so many hours later on any date of a flight."""
        zone, dates = self.scene.field.timezone, date_array(flight.dates)
        return is_skipped(zone, dates, flight.time, shift_h)

    def share_below(self, flight: Flight, occasion: Occasion, target: float) -> float | None:
        """The shortfall share where it is below the target, else None."""
        # The largest masses sort out the hours; the checks themselves decide.
        light = (self.masses(flight, occasion) < self.loaded(flight).planning_kg).mean(axis=0)
        weight = occasion.windows.weight
        if (light * weight).sum() / weight.sum() >= target:
            return None
        share = self.share(occasion, self.counts(flight, occasion))
        return share if share < target else None


def _interval_note(n_years: int) -> str:
    """What to know of the interval of a figure; not even one whole year is too few as well."""
    return str(interval_notes(np.array([max(n_years, 1)]))[0])


def _nearest(time: dt.time, shift_h: int, share: float) -> dict:
    return {
        "nearest_time": f"{(time.hour + shift_h) % 24:02d}:{time.minute:02d}",
        "nearest_shift_h": shift_h,
        "nearest_shortfall": share,
    }


def schedule_frames(study: Study, scores: Sequence[FlightScores]) -> dict[str, pd.DataFrame]:
    """The tables of a whole schedule.

    Parameters
    ----------
    study : Study
    scores : sequence of FlightScores
        One for each field; those of a field without flights add nothing.

    Returns
    -------
    dict of str to DataFrame
        ``schedule_flights`` in the order of the file; ``schedule_seasons``, the whole schedule
        first; ``schedule_days``, every planned date, the one with the most flights expected to
        fall short first and those without figures last.
    """
    some = [s.flights for s in scores if len(s.flights)] or [_flight_table([])]
    flights = pd.concat(some, ignore_index=True)
    place = {flight.id: i for i, flight in enumerate(study.flights)}
    order = flights["flight"].map(place).to_numpy().argsort(kind="stable")
    return {
        "schedule_flights": flights.iloc[order].reset_index(drop=True),
        "schedule_seasons": _seasons(study, scores),
        "schedule_days": _days(scores),
    }


def _seasons(study: Study, scores: Sequence[FlightScores]) -> pd.DataFrame:
    names = "planned", "unknown", "affected", "drawn", "of_year", "hours_of_year", "with_year"
    sums = {name: np.sum([getattr(s, name) for s in scores], axis=0) for name in names}
    rows = []
    for i, name in enumerate(["", *(season.name for season in study.seasons)]):
        own = {key: values[i] for key, values in sums.items()}
        planned, unknown = int(own["planned"]), int(own["unknown"])
        row = {"season": name, "flights": planned, "unknown_flights": unknown}
        row |= {"n_years": 0, "interval_note": ""}
        if planned > unknown:
            row |= {"affected": own["affected"], **_of_years(study, own)}
        rows.append(row)
    table = pd.DataFrame(rows, columns=SCHEDULE_SEASONS_COLUMNS)
    return table.astype({"worst_year": "Int64"})


def _of_years(study: Study, own: dict) -> dict:
    """What single years of the record, and resamples of them, say of some flights.

    A year counts when the cells that count cover at least `rules.DAYS.share_of_days` of the
    windows of the flights with figures.  Its flights are all of these, falling short as often
    as in its hours, each hour with its weight in the expected number: so the expected number is
    a weighted mean of the years' numbers where every year counts.  Below
    `rules.YEARS.interval` counting years nothing is told of single ones.

    Parameters
    ----------
    study : Study
    own : dict
        The sums of `FlightScores` of these flights.
    """
    known = own["planned"] - own["unknown"]
    counts = own["with_year"] >= DAYS.share_of_days * known
    n_years = int(counts.sum())
    row = {"n_years": n_years, "interval_note": _interval_note(n_years)}
    if n_years < YEARS.interval:
        return row
    years = np.arange(study.first_year, study.first_year + len(counts))[counts]
    values = known * own["of_year"][counts] / own["hours_of_year"][counts]
    worst = values.max()
    low, high = bounds_of(own["drawn"][None, :], np.array([n_years]), study.confidence)[:, 0]
    return row | {
        "ci_low": low,
        "ci_high": high,
        "year_low": values.min(),
        "year_high": worst,
        # Of years alike, a rounding apart, the first.
        "worst_year": int(years[(values >= worst * (1.0 - 1e-12)).argmax()]) if worst else None,
    }


def _days(scores: Sequence[FlightScores]) -> pd.DataFrame:
    parts = pd.concat([s.days for s in scores], ignore_index=True)
    columns = [parts[c].to_numpy() for c in ("date", "flights", "unknown_flights", "affected")]
    table = summed(*columns)
    known = table["flights"] - table["unknown_flights"]
    table["affected"] = table["affected"].where(known > 0)
    table["share"] = table["affected"] / known.where(known > 0)
    table["weekday"] = table["date"].dt.day_name()
    table = table.sort_values("affected", ascending=False, kind="stable", ignore_index=True)
    table["date"] = table["date"].dt.strftime("%Y-%m-%d")
    return table.astype({"flights": int, "unknown_flights": int})[SCHEDULE_DAYS_COLUMNS]
