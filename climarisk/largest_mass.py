"""The largest mass at which every check holds, hour by hour."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Literal

import numpy as np

from climarisk.aircraft import AircraftProfile, PerformanceTable, ScaledFigures
from climarisk.fields import Field
from climarisk.performance import (
    SCALING,
    TableAir,
    at_mass,
    climb_gradient_pct,
    climb_speed_kt,
    landing_correction,
    required,
    takeoff_correction,
)

#: What is checked: a take-off (with the climb), a landing, or both at the same mass.
Operation = Literal["both", "takeoff", "landing"]
#: Share by which a mass between tabulated ones stays under its limit, so that rounding of the
#: last digit never turns it into a shortfall.
_CUSHION = 1e-12
_ROLL, _TO_50FT = ("takeoff", "ground_roll_m"), ("takeoff", "distance_50ft_m")
_LANDING, _CLIMB = ("landing", "distance_50ft_m"), ("climb", "rate_ft_min")
_Quantity = tuple[str, str]


@dataclass(frozen=True)
class _Line:
    """A required quantity as it changes with mass between two masses; arrays of shape (n,)."""

    low_kg: float
    high_kg: float
    low: np.ndarray
    high: np.ndarray

    def at(self, mass_kg: np.ndarray) -> np.ndarray:
        """The quantity at a mass of each hour, with the arithmetic of `performance.at_mass`."""
        share = (mass_kg - self.low_kg) / (self.high_kg - self.low_kg)
        return self.low + share * (self.high - self.low)

    def bounds(self, limit: np.ndarray | float) -> tuple[np.ndarray, np.ndarray]:
        """Least and largest mass at which the quantity is at most a limit; -inf where at none.

        A blank at either end leaves nothing in between.
        """
        slope = self.high - self.low
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            crossing = (limit - _CUSHION * np.abs(limit) - self.low) / slope
        crossing = self.low_kg + crossing * (self.high_kg - self.low_kg)
        flat = np.where((slope == 0) & (self.low <= limit), np.inf, -np.inf)
        falls = slope < 0
        largest = np.where(slope > 0, crossing, np.where(falls, np.inf, flat))
        return np.where(falls, crossing, -np.inf), largest


@dataclass(frozen=True)
class _Power:
    """A required distance that grows with a power of mass above a reference mass."""

    reference_kg: float
    exponent: float
    base: np.ndarray

    def at(self, mass_kg: np.ndarray) -> np.ndarray:
        """The distance at a mass of each hour; no credit below the reference mass."""
        return self.base * np.maximum(mass_kg / self.reference_kg, 1.0) ** self.exponent

    def bounds(self, limit: np.ndarray | float) -> tuple[np.ndarray, np.ndarray]:
        """As of `_Line`: the inverse of the power law."""
        ratio = limit * (1.0 - _CUSHION) / self.base
        fits = np.where(self.base <= limit, self.reference_kg, -np.inf)
        largest = self.reference_kg * np.maximum(ratio, 1.0) ** (1.0 / self.exponent)
        return np.full_like(ratio, -np.inf), np.where(ratio >= 1.0, largest, fits)


@dataclass(frozen=True)
class _Case:
    """One aircraft at one field in some air, asked for an operation; each table is read once."""

    profile: AircraftProfile
    place: Field
    air: TableAir
    operation: Operation
    _read: dict[tuple[int, str], np.ndarray] = field(default_factory=dict, repr=False)

    @property
    def figures(self) -> ScaledFigures:
        """The single figures that operations without a table are scaled from."""
        assert self.profile.scaled is not None  # a profile with neither is refused when read
        return self.profile.scaled

    @property
    def quantities(self) -> tuple[_Quantity, ...]:
        """The required quantities that the operation needs."""
        profile, needed = self.profile, []
        if self.operation != "landing":
            figures = profile.scaled
            if profile.takeoff or (figures and figures.takeoff_ground_roll_m is not None):
                needed.append(_ROLL)
            needed.append(_TO_50FT)
            if (profile.climb_rate_ft_min, profile.climb_gradient_pct) != (None, None):
                needed.append(_CLIMB)
        if self.operation != "takeoff":
            needed.append(_LANDING)
        return tuple(needed)

    @property
    def masses(self) -> list[float]:
        """Masses between which every required quantity follows one law, ascending.

        From the lightest that makes a difference to the heaviest that no table is too light for;
        empty where there is none.
        """
        profile = self.profile
        tabulated: set[float] = set()
        lightest, heaviest = [], [profile.maximum_kg]
        for operation in sorted({operation for operation, _ in self.quantities}):
            tables = getattr(profile, operation)
            own = [t.mass_kg for t in tables] or [self.figures.mass_kg]
            lightest.append(own[0])
            if tables or operation == "climb":
                heaviest.append(own[-1])
            tabulated.update(own)
        top = min(heaviest)
        bottom = min(max(min(lightest), profile.empty_kg), profile.maximum_kg)
        if bottom > top:
            return []
        return sorted({bottom, top, *(m for m in tabulated if bottom < m < top)})

    def read(self, table: PerformanceTable, quantity: str) -> np.ndarray:
        """A quantity of a table in every hour."""
        key = id(table), quantity
        if key not in self._read:
            self._read[key] = self.air.read(table, quantity)
        return self._read[key]

    def required(self, quantity: _Quantity, mass_kg: float) -> np.ndarray:
        """A required quantity in every hour at one mass; NaN beyond the table."""
        operation, name = quantity
        tables = getattr(self.profile, operation)
        if tables:
            return at_mass(tables, mass_kg, lambda table: self.read(table, name))
        loaded = replace(self.profile, planning_kg=mass_kg)
        return required(loaded, operation, name, self.air)

    def law(self, quantity: _Quantity, low_kg: float, places: np.ndarray) -> _Line | _Power:
        """How a required quantity changes with mass from one of `masses` to the next.

        A rate of climb, of which more is better, comes with its sign changed.
        """
        operation, name = quantity
        sign = -1.0 if operation == "climb" else 1.0
        tables = getattr(self.profile, operation)
        if not tables:
            reference_kg = self.figures.mass_kg
            base = sign * self.required(quantity, reference_kg)[places]
            if operation == "climb":
                return _Line(0.0, 1.0, base, base)
            key = "landing_distance_50ft_m" if operation == "landing" else name
            return _Power(reference_kg, SCALING[key][1], base)
        above = next(i for i, t in enumerate(tables) if t.mass_kg > low_kg)
        high = sign * self.read(tables[above], name)[places]
        if above == 0:
            return _Line(0.0, 1.0, high, high)
        low = sign * self.read(tables[above - 1], name)[places]
        return _Line(tables[above - 1].mass_kg, tables[above].mass_kg, low, high)

    def ways(self, operation: str) -> list[tuple[float, ...]]:
        """Correction and declared distances of the directions that no other one outdoes."""
        if operation == "takeoff":
            ways: set[tuple[float, ...]] = {
                (takeoff_correction(d) * self.profile.takeoff_factor, d.tora_m, d.toda_m)
                for d in self.place.runways
                if d.takeoff
            }
        else:
            ways = {(landing_correction(d), d.lda_m) for d in self.place.runways if d.landing}

        def outdone(way: tuple[float, ...], by: tuple[float, ...]) -> bool:
            longer = all(b >= a for a, b in zip(way[1:], by[1:], strict=True))
            return by != way and by[0] <= way[0] and longer

        return sorted(way for way in ways if not any(outdone(way, by) for by in ways))

    def within_limits(self) -> np.ndarray:
        """Hours in which no stated limit of temperature or density altitude is passed."""
        kept = np.ones(len(self.air.temperature_c), bool)
        for limit, value in (
            (self.profile.limit_temperature_c, self.air.temperature_c),
            (self.profile.limit_density_altitude_ft, self.air.density_altitude_ft),
        ):
            if limit is not None:
                kept &= value <= limit
        return kept

    def holds(self, values: dict[_Quantity, np.ndarray], sigma: np.ndarray) -> np.ndarray:
        """Whether every check holds at the required quantities (rates of climb as they are).

        A quotient of floats is at least 1 exactly where the dividend is at least the divisor,
        so this is `performance.margins` without the divisions.
        """
        profile, verdict = self.profile, np.ones(len(sigma), bool)
        if _TO_50FT in values:
            roll, to_50ft = values.get(_ROLL, values[_TO_50FT]), values[_TO_50FT]
            ways = self.ways("takeoff")
            fits = [(roll * f <= tora) & (to_50ft * f <= toda) for f, tora, toda in ways]
            verdict = np.logical_or.reduce(fits)
        if _LANDING in values:
            flown = values[_LANDING]
            ways = self.ways("landing")
            fits = [flown * f * profile.landing_factor <= lda for f, lda in ways]
            verdict = verdict & np.logical_or.reduce(fits)
        if _CLIMB in values:
            rate = values[_CLIMB]
            if profile.climb_rate_ft_min is not None:
                verdict = verdict & (rate >= profile.climb_rate_ft_min)
            if profile.climb_gradient_pct is not None:
                gradient = climb_gradient_pct(rate, climb_speed_kt(profile), sigma)
                verdict = verdict & (gradient >= profile.climb_gradient_pct)
        return verdict

    def holds_at(self, mass_kg: float) -> np.ndarray:
        """Whether every check holds at one mass, in every hour."""
        values = {quantity: self.required(quantity, mass_kg) for quantity in self.quantities}
        return self.holds(values, self.air.density_ratio)

    def least_rate(self, sigma: np.ndarray) -> np.ndarray:
        """The rate of climb that the rate and the gradient asked for come to, ft/min."""
        least = np.full(len(sigma), self.profile.climb_rate_ft_min or 0.0)
        if self.profile.climb_gradient_pct is not None:
            speed_kt, one = climb_speed_kt(self.profile), np.ones(len(sigma))
            per_ft_min = climb_gradient_pct(one, speed_kt, sigma)
            return np.maximum(least, self.profile.climb_gradient_pct / per_ft_min)
        return least

    def between(self, low_kg: float, high_kg: float, places: np.ndarray) -> np.ndarray:
        """The largest mass strictly between two of `masses` at some hours; -inf where none."""
        sigma = self.air.density_ratio[places]
        laws = {quantity: self.law(quantity, low_kg, places) for quantity in self.quantities}
        whole = np.full(len(places), low_kg), np.full(len(places), high_kg * (1.0 - _CUSHION))
        common: list[tuple[_Quantity, np.ndarray | float]] = []
        if _LANDING in laws:
            longest = max(lda / f for f, lda in self.ways("landing"))
            common.append((_LANDING, longest / self.profile.landing_factor))
        if _CLIMB in laws:
            common.append((_CLIMB, -self.least_rate(sigma)))
        directions: list[list[tuple[_Quantity, float]]] = [[]]
        if _TO_50FT in laws:
            roll = _ROLL if _ROLL in laws else _TO_50FT
            directions = [
                [(roll, tora / f), (_TO_50FT, toda / f)] for f, tora, toda in self.ways("takeoff")
            ]
        shared = _narrowed(*whole, laws, common)
        best = np.full(len(places), -np.inf)
        for direction in directions:
            lowest, largest = _narrowed(*shared, laws, direction)
            best = np.maximum(best, np.where(largest > lowest, largest, -np.inf))
        trial = np.where(best > -np.inf, best, low_kg)
        values = {quantity: law.at(trial) for quantity, law in laws.items()}
        if _CLIMB in values:
            values[_CLIMB] = -values[_CLIMB]
        # Tables so steep in mass that the cushion is too thin leave the lighter table's mass.
        best[~self.holds(values, sigma)] = -np.inf
        return best


def _narrowed(
    lowest: np.ndarray,
    largest: np.ndarray,
    laws: dict[_Quantity, _Line | _Power],
    limits: Sequence[tuple[_Quantity, np.ndarray | float]],
) -> tuple[np.ndarray, np.ndarray]:
    """A range of masses cut to where the quantities keep their limits."""
    for quantity, limit in limits:
        low, high = laws[quantity].bounds(limit)
        lowest, largest = np.maximum(lowest, low), np.minimum(largest, high)
    return lowest, largest


def largest_mass(
    profile: AircraftProfile, field: Field, air: TableAir, operation: Operation = "both"
) -> np.ndarray:
    """The largest take-off mass at which every check holds, hour by hour.

    Parameters
    ----------
    profile : AircraftProfile
        Its planning mass does not matter.
    field : Field
    air : TableAir
        Hours with all values known.
    operation : {"both", "takeoff", "landing"}
        ``"both"``: landing is checked at the take-off mass, as if no fuel were burnt off;
        ``"takeoff"``: take-off, climb and limits; ``"landing"``: landing and limits.

    Returns
    -------
    ndarray, shape (n,)
        kg; never above ``maximum_kg`` nor above the heaviest table of an operation that is
        needed.  -inf where the checks cannot be met at any tabulated mass: not at the lightest
        one either, which stands for every lighter mass (nor at the empty mass, if heavier).

    Notes
    -----
    Exact on the interpolant of `climarisk.performance.at_mass`: between neighbouring tabulated
    masses each required quantity is linear in mass (a power law for scaled figures), so each
    check bounds the mass there in closed form, direction by direction.  A crossing between
    tabulated masses is placed a share of 1e-12 of the limit inside, so that
    `climarisk.performance.margins` at the returned mass shows no shortfall; at a tabulated
    mass the comparison itself is exact.  Where a blank cell ends a range of masses that hold,
    the mass returned is 1e-12 below its end.

    With tables that never require less at a greater mass, every lighter mass holds too.  Tables
    on different axes can break that between their points, and a blank cell of a lighter table
    does: the largest mass that holds is returned all the same, and lighter ones may not hold.
    """
    case = _Case(profile, field, air, operation)
    answer = np.full(len(air.temperature_c), -np.inf)
    masses = case.masses
    open_hours = case.within_limits()
    for i in reversed(range(len(masses))):
        holding = open_hours & case.holds_at(masses[i])
        answer[holding] = masses[i]
        open_hours &= ~holding
        if i == 0 or not open_hours.any():
            break
        places = np.flatnonzero(open_hours)
        answer[places] = case.between(masses[i - 1], masses[i], places)
        open_hours[places] = answer[places] == -np.inf
    return answer
