"""Required against available, hour by hour: the margins of one aircraft at one field."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np

from climarisk.aircraft import AircraftProfile, PerformanceTable
from climarisk.atmosphere import RHO0, moist_density
from climarisk.fields import Field, RunwayDirection
from climarisk.units import FEET_PER_NAUTICAL_MILE

#: Cell of each value on an axis, the share of the way through it, and whether it lies beyond.
_Place = tuple[np.ndarray, np.ndarray, np.ndarray]

#: Checks in their fixed order; the limits come last.
CHECKS = (
    "take-off ground roll",
    "take-off to 50 ft",
    "landing from 50 ft",
    "rate of climb",
    "climb gradient",
    "temperature limit",
    "density altitude limit",
)
N_MARGIN_CHECKS = 5
#: Margin of an hour beyond the table: nothing shows that any length would do.
OUTSIDE_MARGIN = -1.0

#: Surface factors.  Grass, wet grass, soft, snow: UK CAA Safety Sense Leaflet
#: 7c (2013), from memory; gravel: NZ CAA AC91-3 "metal" surface, from memory.
TAKEOFF_SURFACE = {
    "paved": 1.0,
    "gravel": 1.05,
    "grass": 1.20,
    "wet-grass": 1.30,
    "soft": 1.25,
    "snow": 1.25,
}
LANDING_SURFACE = {
    "paved": 1.0,
    "gravel": 1.08,
    "grass": 1.15,
    "wet-grass": 1.35,
    "soft": 1.25,
    "snow": 1.25,
}
#: Per 1 % of adverse slope: AMC2 CAT.POL.A.305 and AMC2 CAT.POL.A.430.
SLOPE_PER_PCT = 0.05

#: Exponents of density and mass for profiles without a table (engineering
#: judgement bracketed by theory): quantity -> (density exponent, mass exponent).
SCALING = {
    "ground_roll_m": (2.3, 2.0),
    "distance_50ft_m": (3.0, 2.0),
    "landing_distance_50ft_m": (1.5, 1.0),
}


@dataclass(frozen=True)
class TableAir:
    """The air as the performance tables and limits need it, all arrays of shape (n,).

    Parameters
    ----------
    pressure_altitude_ft : ndarray
    table_temperature_c : ndarray
        Temperature that enters the tables: virtual or air temperature.
    temperature_c : ndarray
        Air temperature, for the temperature limit.
    density_altitude_ft : ndarray
    density_ratio : ndarray
        Moist density over the standard sea-level density.
    """

    pressure_altitude_ft: np.ndarray
    table_temperature_c: np.ndarray
    temperature_c: np.ndarray
    density_altitude_ft: np.ndarray
    density_ratio: np.ndarray
    _places: dict[bytes, tuple[_Place, _Place]] = field(default_factory=dict, repr=False)

    def on_axes(self, table: PerformanceTable) -> tuple[_Place, _Place]:
        """Where the hours lie on a table's axes; most tables of a profile share theirs."""
        key = table.pressure_altitude_ft.tobytes() + b"|" + table.temperature_c.tobytes()
        if key not in self._places:
            self._places[key] = (
                _place(table.pressure_altitude_ft, self.pressure_altitude_ft),
                _place(table.temperature_c, self.table_temperature_c),
            )
        return self._places[key]

    def read(self, table: PerformanceTable, quantity: str) -> np.ndarray:
        """A quantity of one table in every hour, as `read_off` gives it."""
        return _bilinear(table.values[quantity], *self.on_axes(table))


@dataclass(frozen=True)
class Margins:
    """Margins of one aircraft at one field, all arrays of shape (n,).

    Parameters
    ----------
    margin : ndarray
        Smallest margin of the performance checks; -1 beyond the table.
    shortfall : ndarray of bool
    outside_table : ndarray of bool
    limiting : ndarray of int8
        Index into `CHECKS` of the smallest margin, passed limits among them.
    checks : ndarray of float32, shape (7, n)
        Margin of each of `CHECKS`, infinite where there is none; of a limit, how far it is
        passed, infinite where it is kept.
    """

    margin: np.ndarray
    shortfall: np.ndarray
    outside_table: np.ndarray
    limiting: np.ndarray
    checks: np.ndarray


def density_ratio(
    pressure_hpa: np.ndarray, temperature_c: np.ndarray, vapour_pressure_hpa: np.ndarray
) -> np.ndarray:
    """Moist density over the standard sea-level density."""
    return moist_density(pressure_hpa, temperature_c, vapour_pressure_hpa) / RHO0


def read_off(
    table: PerformanceTable,
    quantity: str,
    pressure_altitude_ft: np.ndarray,
    temperature_c: np.ndarray,
) -> np.ndarray:
    """A quantity of one table, bilinear in pressure altitude and temperature.

    Colder than the first column or lower than the first row takes that column or row;
    hotter, higher or at a blank cell gives NaN.

    Parameters
    ----------
    table : PerformanceTable
    quantity : str
        Key of ``table.values``.
    pressure_altitude_ft, temperature_c : ndarray, shape (n,)

    Returns
    -------
    ndarray, shape (n,)
    """
    return _bilinear(
        table.values[quantity],
        _place(table.pressure_altitude_ft, pressure_altitude_ft),
        _place(table.temperature_c, temperature_c),
    )


def _bilinear(grid: np.ndarray, row: _Place, column: _Place) -> np.ndarray:
    """A grid between its corners; NaN beyond it, at a blank corner, and at an unknown place."""
    i, u, beyond_u = row
    j, v, beyond_v = column
    i1, j1 = np.minimum(i + 1, grid.shape[0] - 1), np.minimum(j + 1, grid.shape[1] - 1)
    flat, width, has_blanks = grid.ravel(), grid.shape[1], bool(np.isnan(grid).any())

    def corner(row: np.ndarray, column: np.ndarray, weight: np.ndarray) -> np.ndarray:
        value = flat.take(row * width + column) * weight
        # A corner of weight zero does not matter, even if it is blank.
        return np.where(weight == 0, 0.0, value) if has_blanks else value

    value = (
        corner(i, j, (1 - u) * (1 - v))
        + corner(i, j1, (1 - u) * v)
        + corner(i1, j, u * (1 - v))
        + corner(i1, j1, u * v)
    )
    return np.where(beyond_u | beyond_v, np.nan, value)


def _place(axis: np.ndarray, x: np.ndarray) -> _Place:
    """Cell of each value on an axis, the share of the way through it, and what lies beyond."""
    beyond = x > axis[-1]
    inside = np.clip(x, axis[0], axis[-1])
    i = np.clip(np.searchsorted(axis, inside, side="right") - 1, 0, max(len(axis) - 2, 0))
    if len(axis) == 1:
        return i, np.zeros_like(inside), beyond
    return i, (inside - axis[i]) / (axis[i + 1] - axis[i]), beyond


def at_mass(
    tables: Sequence[PerformanceTable],
    mass_kg: float,
    read: Callable[[PerformanceTable], np.ndarray],
) -> np.ndarray:
    """What `read` gives at a mass, linear between the tabulated masses around it.

    Lighter than the lightest takes the lightest; heavier than the heaviest gives NaN.
    """
    masses = [t.mass_kg for t in tables]
    if mass_kg > masses[-1]:
        return np.full_like(read(tables[-1]), np.nan)
    if mass_kg <= masses[0]:
        return read(tables[0])
    upper = next(i for i, m in enumerate(masses) if m >= mass_kg)
    if masses[upper] == mass_kg:
        return read(tables[upper])
    share = (mass_kg - masses[upper - 1]) / (masses[upper] - masses[upper - 1])
    light, heavy = read(tables[upper - 1]), read(tables[upper])
    return light + share * (heavy - light)


def takeoff_correction(direction: RunwayDirection) -> float:
    """Factor on take-off distances for surface and uphill slope; no credit downhill."""
    return TAKEOFF_SURFACE[direction.surface] * (
        1.0 + SLOPE_PER_PCT * max(direction.slope_pct, 0.0)
    )


def landing_correction(direction: RunwayDirection) -> float:
    """Factor on landing distance for surface and downhill slope; no credit uphill."""
    return LANDING_SURFACE[direction.surface] * (
        1.0 + SLOPE_PER_PCT * max(-direction.slope_pct, 0.0)
    )


def required(profile: AircraftProfile, operation: str, quantity: str, air: TableAir) -> np.ndarray:
    """An unfactored distance or rate of climb at the planning mass; NaN beyond the table.

    Parameters
    ----------
    profile : AircraftProfile
    operation : {"takeoff", "landing", "climb"}
    quantity : str
        Column name of the table.
    air : TableAir
    """
    tables = getattr(profile, operation)
    if tables:
        return at_mass(tables, profile.planning_kg, lambda table: air.read(table, quantity))
    return _scaled(profile, operation, quantity, air)


def _scaled(profile: AircraftProfile, operation: str, quantity: str, air: TableAir) -> np.ndarray:
    """A quantity scaled from one sea-level ISA figure; no credit for air denser than that.

    Distances by powers of density and mass; rate of climb linear in density altitude, to zero
    at the absolute ceiling.
    """
    figures = profile.scaled
    assert figures is not None
    if operation == "climb":
        ceiling = figures.absolute_ceiling_ft
        rate = figures.climb_rate_ft_min * (
            1.0 - np.maximum(air.density_altitude_ft, 0.0) / ceiling
        )
        return np.where(profile.planning_kg > figures.mass_kg, np.nan, rate)
    figure = getattr(figures, f"{operation}_{quantity}")
    key = "landing_distance_50ft_m" if operation == "landing" else quantity
    density_exponent, mass_exponent = SCALING[key]
    mass_ratio = max(profile.planning_kg / figures.mass_kg, 1.0)
    sigma = np.minimum(air.density_ratio, 1.0)
    return figure * mass_ratio**mass_exponent * sigma**-density_exponent


def takeoff_margins(
    profile: AircraftProfile, field: Field, air: TableAir
) -> tuple[np.ndarray, np.ndarray]:
    """Margins of ground roll and of the distance to 50 ft in the most favourable direction.

    The direction is chosen hour by hour as the one whose smaller margin is largest (beyond the
    table counting as `OUTSIDE_MARGIN`), so both margins belong to the same direction.  A scaled
    profile without a ground roll has its distance to 50 ft held against TORA as well.
    """
    to_50ft = required(profile, "takeoff", "distance_50ft_m", air)
    scaled = profile.scaled
    has_roll = profile.takeoff or (scaled and scaled.takeoff_ground_roll_m is not None)
    roll = required(profile, "takeoff", "ground_roll_m", air) if has_roll else to_50ft
    best = None
    for direction in (d for d in field.runways if d.takeoff):
        factor = takeoff_correction(direction) * profile.takeoff_factor
        pair = np.array([direction.tora_m / (roll * factor), direction.toda_m / (to_50ft * factor)])
        best = pair - 1.0 if best is None else _better(best, pair - 1.0)
    assert best is not None  # a field without such a direction is refused when it is read
    return best[0], best[1]


def _better(first: np.ndarray, second: np.ndarray) -> np.ndarray:
    """Of two directions the more favourable, hour by hour; margins of shape (2, n).

    The one whose smaller margin is larger; of equals the one whose other margin is larger, so
    that the order of the directions does not matter where both are beyond one table.
    """
    filled = [np.where(np.isnan(m), OUTSIDE_MARGIN, m) for m in (first, second)]
    low = [np.minimum(*m) for m in filled]
    high = [np.maximum(*m) for m in filled]
    wins = (low[1] > low[0]) | ((low[1] == low[0]) & (high[1] > high[0]))
    return np.where(wins, second, first)


def landing_margins(profile: AircraftProfile, field: Field, air: TableAir) -> np.ndarray:
    """Margin of the landing distance from 50 ft in the most favourable direction."""
    distance = required(profile, "landing", "distance_50ft_m", air)
    return np.max(
        [
            d.lda_m / (distance * landing_correction(d) * profile.landing_factor) - 1.0
            for d in field.runways
            if d.landing
        ],
        axis=0,
    )


def climb_gradient_pct(
    rate_ft_min: np.ndarray, speed_kt: float, density_ratio: np.ndarray
) -> np.ndarray:
    """Climb gradient in still air, %, from the rate and the indicated speed.

    Notes
    -----
    True airspeed is the indicated speed over the square root of the density ratio;
    gradient = 100 rate / (TAS x 6076.12 ft/NM / 60 min/h).
    """
    true_kt = speed_kt / np.sqrt(density_ratio)
    return 100.0 * rate_ft_min / (true_kt * FEET_PER_NAUTICAL_MILE / 60.0)


def climb_speed_kt(profile: AircraftProfile) -> float:
    """The fastest tabulated climb speed: of several the one with the flattest climb."""
    speeds = [t.speed_kt for t in profile.climb] or [
        getattr(profile.scaled, "climb_speed_kt", None)
    ]
    return max(speed for speed in speeds if speed is not None)


def climb_margins(
    profile: AircraftProfile, air: TableAir
) -> tuple[np.ndarray | None, np.ndarray | None]:
    """Margins of rate of climb and of climb gradient; None for one that is not asked for."""
    rate_asked, gradient_asked = profile.climb_rate_ft_min, profile.climb_gradient_pct
    if rate_asked is None and gradient_asked is None:
        return None, None
    rate = required(profile, "climb", "rate_ft_min", air)
    rate_margin = rate / rate_asked - 1.0 if rate_asked is not None else None
    if gradient_asked is None:
        return rate_margin, None
    gradient = climb_gradient_pct(rate, climb_speed_kt(profile), air.density_ratio)
    return rate_margin, gradient / gradient_asked - 1.0


def margins(profile: AircraftProfile, field: Field, air: TableAir) -> Margins:
    """Margins of every check and what they add up to.

    Parameters
    ----------
    profile : AircraftProfile
    field : Field
    air : TableAir
        Hours with all values known.

    Returns
    -------
    Margins
    """
    n = len(air.temperature_c)
    checks = [
        *takeoff_margins(profile, field, air),
        landing_margins(profile, field, air),
        *climb_margins(profile, air),
    ]
    absent = np.full(n, np.inf)
    stack = np.array([absent if c is None else c for c in checks])
    outside = np.isnan(stack).any(axis=0)
    stack[np.isnan(stack)] = OUTSIDE_MARGIN
    margin = stack.min(axis=0)
    limits = np.array(
        [
            _passed(profile.limit_temperature_c, air.temperature_c),
            _passed(profile.limit_density_altitude_ft, air.density_altitude_ft),
        ]
    )
    everything = np.concatenate([stack, limits])
    shortfall = outside | (margin < 0) | (limits < 0).any(axis=0)
    limiting = everything.argmin(axis=0).astype(np.int8)
    return Margins(margin, shortfall, outside, limiting, everything.astype(np.float32))


def checks_of(profile: AircraftProfile) -> tuple[str, ...]:
    """Those of `CHECKS` that apply to a profile: climb and limits only where stated."""
    asked = (
        True,
        True,
        True,
        profile.climb_rate_ft_min is not None,
        profile.climb_gradient_pct is not None,
        profile.limit_temperature_c is not None,
        profile.limit_density_altitude_ft is not None,
    )
    return tuple(check for check, wanted in zip(CHECKS, asked, strict=True) if wanted)


def _passed(limit: float | None, value: np.ndarray) -> np.ndarray:
    """Relative distance to a stated limit where it is passed; infinite elsewhere."""
    if limit is None:
        return np.full(len(value), np.inf)
    return np.where(value > limit, (limit - value) / limit, np.inf)
