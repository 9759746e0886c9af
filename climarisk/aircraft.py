"""Aircraft profiles: the handbook figures a study is scored against."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any, Literal

import numpy as np
from annotated_types import Ge, Gt, Le, MinLen
from pydantic import Field as Key

from climarisk.inputs import Identifier, Name, Strict, Text, load_toml, validate
from climarisk.units import METRES_PER_FOOT

#: Quantities of each operation's table and whether they must rise (+1) or fall (-1) with
#: pressure altitude, temperature and mass.
OPERATIONS: dict[str, dict[str, int]] = {
    "takeoff": {"ground_roll_m": 1, "distance_50ft_m": 1},
    "landing": {"distance_50ft_m": 1, "ground_roll_m": 1},
    "climb": {"rate_ft_min": -1},
}
_OPTIONAL_QUANTITIES = {("landing", "ground_roll_m")}


@dataclass(frozen=True)
class PerformanceTable:
    """One table of the handbook at one mass.

    Parameters
    ----------
    mass_kg : float
    pressure_altitude_ft : ndarray, shape (n_pa,)
        Strictly increasing.
    temperature_c : ndarray, shape (n_t,)
        Strictly increasing.
    values : dict of str to ndarray, shape (n_pa, n_t)
        By column name of the contract (``ground_roll_m``, ``distance_50ft_m``,
        ``rate_ft_min``); NaN is a blank cell.
    speed_kt : float or None
        Climb speed, for climb tables.
    """

    mass_kg: float
    pressure_altitude_ft: np.ndarray
    temperature_c: np.ndarray
    values: dict[str, np.ndarray]
    speed_kt: float | None = None


@dataclass(frozen=True)
class ScaledFigures:
    """Single sea-level ISA figures of a profile without tables, scaled by density."""

    mass_kg: float
    takeoff_ground_roll_m: float | None = None
    takeoff_distance_50ft_m: float | None = None
    landing_distance_50ft_m: float | None = None
    climb_rate_ft_min: float | None = None
    absolute_ceiling_ft: float | None = None
    climb_speed_kt: float | None = None


@dataclass(frozen=True)
class AircraftProfile:
    """An aircraft with its figures, limits and the operator's margins.

    Parameters
    ----------
    id, name, source : str
        ``source`` says where the figures come from.
    aspiration : {"natural", "turbocharged", "diesel", "electric"}
    carburettor : bool
    maximum_kg, planning_kg, empty_kg : float
    takeoff, landing, climb : tuple of PerformanceTable
        Ordered by mass.
    scaled : ScaledFigures or None
        Used for the operations that have no table.
    limit_temperature_c, limit_density_altitude_ft : float or None
    takeoff_factor, landing_factor : float
        Multiply the required distance; at least 1.
    climb_rate_ft_min : float or None
        Rate of climb the operator asks for.
    climb_gradient_pct : float or None
        Climb gradient the operator asks for.
    critical_altitude_ft : float or None
        Highest standard altitude at which a turbocharged engine holds full power.
    """

    id: str
    name: str
    source: str
    aspiration: str
    carburettor: bool
    maximum_kg: float
    planning_kg: float
    empty_kg: float
    takeoff: tuple[PerformanceTable, ...] = ()
    landing: tuple[PerformanceTable, ...] = ()
    climb: tuple[PerformanceTable, ...] = ()
    scaled: ScaledFigures | None = None
    limit_temperature_c: float | None = None
    limit_density_altitude_ft: float | None = None
    takeoff_factor: float = 1.0
    landing_factor: float = 1.0
    climb_rate_ft_min: float | None = None
    climb_gradient_pct: float | None = None
    critical_altitude_ft: float | None = None

    @property
    def is_scaled(self) -> bool:
        """Whether any check rests on scaled single figures instead of a table."""
        return self.scaled is not None and not (self.takeoff and self.landing and self.climb)


_Positive = Annotated[float, Gt(0)]
_Temperatures = Annotated[list[Annotated[float, Ge(-80), Le(70)]], MinLen(1)]
_AltitudesFt = Annotated[list[Annotated[float, Ge(-5_000), Le(60_000)]], MinLen(1)]
_AltitudesM = Annotated[list[Annotated[float, Ge(-1_500), Le(18_000)]], MinLen(1)]
# A blank cell of the handbook is nan, so these numbers alone may be.
_Cell = Annotated[float, Key(allow_inf_nan=True)]
_Grid = Annotated[list[list[_Cell]], MinLen(1)]


class _Engine(Strict):
    aspiration: Literal["natural", "turbocharged", "diesel", "electric"]
    carburettor: bool
    critical_altitude_ft: Annotated[float, Ge(0), Le(60_000)] | None = None


class _Mass(Strict):
    maximum_kg: _Positive
    planning_kg: _Positive
    empty_kg: _Positive


class _Distances(Strict):
    mass_kg: _Positive
    pressure_altitude_ft: _AltitudesFt | None = None
    pressure_altitude_m: _AltitudesM | None = None
    temperature_c: _Temperatures
    ground_roll_m: _Grid | None = None
    ground_roll_ft: _Grid | None = None
    distance_50ft_m: _Grid | None = None
    distance_50ft_ft: _Grid | None = None


class _Climb(Strict):
    mass_kg: _Positive
    speed_kt: _Positive | None = None
    pressure_altitude_ft: _AltitudesFt | None = None
    pressure_altitude_m: _AltitudesM | None = None
    temperature_c: _Temperatures
    rate_ft_min: _Grid


class _Limits(Strict):
    temperature_c: Annotated[float, Gt(0), Le(70)] | None = None
    density_altitude_ft: Annotated[float, Gt(0), Le(60_000)] | None = None


class _Margins(Strict):
    takeoff_factor: Annotated[float, Ge(1), Le(5)] = 1.0
    landing_factor: Annotated[float, Ge(1), Le(5)] = 1.0
    climb_rate_ft_min: _Positive | None = None
    climb_gradient_pct: Annotated[float, Gt(0), Le(100)] | None = None


class _Scaled(Strict):
    mass_kg: _Positive
    takeoff_ground_roll_m: _Positive | None = None
    takeoff_distance_50ft_m: _Positive | None = None
    landing_distance_50ft_m: _Positive | None = None
    climb_rate_ft_min: _Positive | None = None
    absolute_ceiling_ft: _Positive | None = None
    climb_speed_kt: _Positive | None = None


class _Profile(Strict):
    id: Identifier
    name: Name
    source: Text
    engine: _Engine
    mass: _Mass
    takeoff: list[_Distances] = []
    landing: list[_Distances] = []
    climb: list[_Climb] = []
    sea_level: _Scaled | None = None
    limits: _Limits = _Limits()
    margins: _Margins = _Margins()


def read_aircraft(path: Path) -> tuple[AircraftProfile | None, list[str]]:
    """The aircraft profile of a TOML file, or None, and the problems found.

    Raises
    ------
    InputError
        The file is absent or not TOML.
    """
    problems: list[str] = []
    checked = validate(_Profile, load_toml(path), str(path), problems)
    if checked is None:
        return None, problems
    tables: dict[str, tuple[PerformanceTable, ...]] = {}
    for operation, quantities in OPERATIONS.items():
        blocks = getattr(checked, operation)
        read = [
            _table(block.model_dump(), operation, f"{path}: [[{operation}]] block {i}", problems)
            for i, block in enumerate(blocks, start=1)
        ]
        ordered = sorted((t for t in read if t is not None), key=lambda t: t.mass_kg)
        tables[operation] = tuple(ordered)
        problems += _mass_problems(ordered, quantities, f"{path}: [[{operation}]]")
    problems += _profile_problems(checked, tables, path)
    if problems:
        return None, problems
    scaled = checked.sea_level
    return AircraftProfile(
        checked.id,
        checked.name or checked.id,
        checked.source,
        checked.engine.aspiration,
        checked.engine.carburettor,
        checked.mass.maximum_kg,
        checked.mass.planning_kg,
        checked.mass.empty_kg,
        **tables,
        scaled=ScaledFigures(**scaled.model_dump()) if scaled else None,
        limit_temperature_c=checked.limits.temperature_c,
        limit_density_altitude_ft=checked.limits.density_altitude_ft,
        takeoff_factor=checked.margins.takeoff_factor,
        landing_factor=checked.margins.landing_factor,
        climb_rate_ft_min=checked.margins.climb_rate_ft_min,
        climb_gradient_pct=checked.margins.climb_gradient_pct,
        critical_altitude_ft=checked.engine.critical_altitude_ft,
    ), []


def _in_unit(block: dict[str, Any], metric: str, where: str, problems: list[str]) -> Any:
    """A quantity given as ``name_m`` or ``name_ft``, as an array in the unit of `metric`."""
    name, unit = metric.rsplit("_", 1)
    other, factor = (
        (f"{name}_ft", METRES_PER_FOOT) if unit == "m" else (f"{name}_m", 1 / METRES_PER_FOOT)
    )
    if block.get(metric) is not None and block.get(other) is not None:
        problems.append(f"{where}: {metric} and {other} are both given; give one of them.")
        return None
    if block.get(metric) is not None:
        return block[metric], 1.0
    return (block[other], factor) if block.get(other) is not None else None


def _table(
    block: dict[str, Any], operation: str, where: str, problems: list[str]
) -> PerformanceTable | None:
    before = len(problems)
    altitude = _in_unit(block, "pressure_altitude_ft", where, problems)
    if altitude is None:
        if len(problems) == before:
            problems.append(f"{where}: pressure_altitude_ft is missing; add it.")
        return None
    axes = {
        "pressure_altitude_ft": np.array(altitude[0], float) * altitude[1],
        "temperature_c": np.array(block["temperature_c"], float),
    }
    for name, axis in axes.items():
        if not (np.diff(axis) > 0).all():
            problems.append(f"{where}: {name} must rise from each value to the next.")
    values = {}
    for name, direction in OPERATIONS[operation].items():
        is_rate = name == "rate_ft_min"
        known = len(problems)
        given = (block[name], 1.0) if is_rate else _in_unit(block, name, where, problems)
        if given is not None:
            grid = _grid(given[0], axes, f"{where}: {name}", problems)
            if grid is not None:
                values[name] = grid * given[1]
                problems += _monotony(grid, axes, direction, f"{where}: {name}")
        elif (operation, name) not in _OPTIONAL_QUANTITIES and len(problems) == known:
            problems.append(f"{where}: {name} is missing; add it.")
    if "ground_roll_m" in values and "distance_50ft_m" in values:
        longer = np.argwhere(values["ground_roll_m"] > values["distance_50ft_m"])
        if len(longer):
            row, column = (int(i) + 1 for i in longer[0])
            problems.append(
                f"{where}: the ground roll is longer than the distance to or from 50 ft in row "
                f"{row}, column {column}; check the figures against the handbook."
            )
    if len(problems) > before:
        return None
    return PerformanceTable(block["mass_kg"], **axes, values=values, speed_kt=block.get("speed_kt"))


def _grid(
    rows: list[list[float]], axes: dict[str, np.ndarray], where: str, problems: list[str]
) -> np.ndarray | None:
    n_rows, n_columns = (len(axis) for axis in axes.values())
    if len(rows) != n_rows or any(len(row) != n_columns for row in rows):
        came = f"{len(rows)} rows of {sorted({len(row) for row in rows})} values"
        problems.append(
            f"{where} has {came}; the axes ask for {n_rows} rows (pressure altitudes) "
            f"of {n_columns} values (temperatures)."
        )
        return None
    grid = np.array(rows, float)
    if np.isinf(grid).any() or np.isnan(grid).all():
        problems.append(f"{where} must hold numbers; nan only for blank cells.")
        return None
    return grid


def _monotony(
    grid: np.ndarray, axes: dict[str, np.ndarray], direction: int, where: str
) -> list[str]:
    """Problems with cells that go the wrong way along an axis (blank cells skipped)."""
    if direction > 0 and (grid[np.isfinite(grid)] <= 0).any():
        return [f"{where} holds a distance of zero or less; distances are above zero."]
    problems = []
    word = "fall" if direction > 0 else "rise"
    for axis, (name, _) in enumerate(axes.items()):
        # Against the largest so far, so that a blank cell hides nothing.
        rising = np.moveaxis(grid * direction, axis, 0)
        below = rising[1:] < np.fmax.accumulate(rising, axis=0)[:-1]
        wrong = np.argwhere(np.moveaxis(below, 0, axis))
        if len(wrong):
            row, column = (int(i) + 1 for i in wrong[0])
            problems.append(
                f"{where} must not {word} as {name} rises, but does after row {row}, "
                f"column {column}; check the figures against the handbook."
            )
    return problems


def _mass_problems(
    tables: list[PerformanceTable], quantities: dict[str, int], where: str
) -> list[str]:
    problems = []
    for light, heavy in zip(tables, tables[1:], strict=False):
        if light.mass_kg == heavy.mass_kg:
            problems.append(f"{where}: the mass {light.mass_kg:g} kg is tabulated twice.")
            continue
        same = np.array_equal(
            light.pressure_altitude_ft, heavy.pressure_altitude_ft
        ) and np.array_equal(light.temperature_c, heavy.temperature_c)
        for name, direction in quantities.items():
            if (name in light.values) != (name in heavy.values):
                problems.append(f"{where}: {name} is given for some masses only; give it for all.")
            elif same and name in light.values:
                change = (heavy.values[name] - light.values[name]) * direction
                if (change < 0).any():
                    word = "shorter" if direction > 0 else "higher"
                    problems.append(
                        f"{where}: {name} is {word} at {heavy.mass_kg:g} kg than at "
                        f"{light.mass_kg:g} kg in places; check the figures against the handbook."
                    )
    return problems


def _profile_problems(
    checked: _Profile, tables: dict[str, tuple[PerformanceTable, ...]], path: Path
) -> list[str]:
    problems = []
    mass, single, margins, engine = checked.mass, checked.sea_level, checked.margins, checked.engine
    if engine.critical_altitude_ft is not None and engine.aspiration != "turbocharged":
        problems.append(
            f"{path}: [engine] critical_altitude_ft is {engine.critical_altitude_ft:g} but the "
            f"aspiration is {engine.aspiration}; only a turbocharged engine has one: remove it."
        )
    if not mass.empty_kg < mass.planning_kg <= mass.maximum_kg:
        problems.append(
            f"{path}: the masses must satisfy empty < planning <= maximum; they are "
            f"{mass.empty_kg:g}, {mass.planning_kg:g} and {mass.maximum_kg:g} kg."
        )
    for operation in ("takeoff", "landing"):
        if not getattr(checked, operation) and (
            single is None or getattr(single, f"{operation}_distance_50ft_m") is None
        ):
            problems.append(
                f"{path}: there is no [[{operation}]] table and no "
                f"{operation}_distance_50ft_m under [sea_level]; give one of them."
            )
    asked = margins.climb_rate_ft_min is not None or margins.climb_gradient_pct is not None
    scaled_climb = single is not None and None not in (
        single.climb_rate_ft_min,
        single.absolute_ceiling_ft,
    )
    if asked and not checked.climb and not scaled_climb:
        problems.append(
            f"{path}: [margins] asks for a climb but there is no [[climb]] table, nor "
            "climb_rate_ft_min and absolute_ceiling_ft under [sea_level]; give one of them."
        )
    if margins.climb_gradient_pct is not None:
        speeds = [block.speed_kt for block in checked.climb] or [
            single.climb_speed_kt if single else None
        ]
        if None in speeds:
            problems.append(
                f"{path}: climb_gradient_pct needs speed_kt in each [[climb]] block "
                "(climb_speed_kt under [sea_level])."
            )
    return problems
