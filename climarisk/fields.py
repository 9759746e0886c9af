"""Fields and their runways."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path
from typing import Annotated, Any, Literal, get_args

import numpy as np
import pandas as pd
from annotated_types import Ge, Gt, Le

from climarisk.errors import InputError
from climarisk.inputs import (
    Identifier,
    Row,
    Text,
    metres,
    nearest,
    one_of_units,
    read_bytes,
    read_table,
    repeated,
    validate,
)
from climarisk.localtime import standard_offset_s, timezone_at
from climarisk.units import METRES_PER_FOOT

Surface = Literal["paved", "gravel", "grass", "wet-grass", "soft", "snow"]
SURFACES: tuple[str, ...] = get_args(Surface)
DISTANCES = ("tora", "toda", "asda", "lda")
#: Slopes steeper than this need a site-specific procedure (AMC2 CAT.POL.A.305).
STEEP_SLOPE_PCT = 2.0

_LONGEST_M = 10_000.0
_Metres = Annotated[float, Gt(0), Le(_LONGEST_M)] | None
_Feet = Annotated[float, Gt(0), Le(_LONGEST_M / METRES_PER_FOOT)] | None


@dataclass(frozen=True)
class RunwayDirection:
    """One direction of one runway with its declared distances.

    Parameters
    ----------
    runway : str
        Designator, such as ``"09"``.
    heading_deg : float
        0-360.
    tora_m, toda_m, asda_m, lda_m : float
        Declared distances in metres, above zero.
    slope_pct : float
        Positive uphill in the take-off direction.
    surface : str
        One of `SURFACES`.
    takeoff, landing : bool
        Whether the direction may be used for it.
    undeclared : bool
        The distances were filled from one physical length.
    """

    runway: str
    heading_deg: float
    tora_m: float
    toda_m: float
    asda_m: float
    lda_m: float
    slope_pct: float
    surface: str
    takeoff: bool
    landing: bool
    undeclared: bool = False

    @property
    def is_steep(self) -> bool:
        """Whether it is steeper than the published factors hold for."""
        return abs(self.slope_pct) > STEEP_SLOPE_PCT


@dataclass(frozen=True)
class Field:
    """An airfield.

    Parameters
    ----------
    id, name : str
    latitude, longitude : float
        Degrees north and east (WGS 84).
    elevation_m : float
        Metres above mean sea level.
    timezone : str
        IANA name.
    stations : tuple of str
        Stations the field is pinned to; empty: the best within the radius.
    runways : tuple of RunwayDirection
    """

    id: str
    name: str
    latitude: float
    longitude: float
    elevation_m: float
    timezone: str
    stations: tuple[str, ...] = ()
    runways: tuple[RunwayDirection, ...] = ()

    @property
    def is_steep(self) -> bool:
        """Whether a runway is steeper than the published factors hold for."""
        return any(way.is_steep for way in self.runways)


class _FieldRow(Row):
    id: Identifier
    name: Text
    latitude: Annotated[float, Ge(-90), Le(90)]
    longitude: Annotated[float, Ge(-180), Le(180)]
    elevation_m: Annotated[float, Ge(-430), Le(6000)] | None = None
    elevation_ft: Annotated[float, Ge(-1411), Le(19685)] | None = None
    timezone: str | None = None
    stations: str | None = None


class _RunwayRow(Row):
    field: str
    runway: Text
    heading_deg: Annotated[float, Ge(0), Le(360)]
    tora_m: _Metres = None
    toda_m: _Metres = None
    asda_m: _Metres = None
    lda_m: _Metres = None
    length_m: _Metres = None
    tora_ft: _Feet = None
    toda_ft: _Feet = None
    asda_ft: _Feet = None
    lda_ft: _Feet = None
    length_ft: _Feet = None
    slope_pct: Annotated[float, Ge(-40), Le(40)] = 0.0
    surface: Surface
    takeoff: Literal["yes", "no"]
    landing: Literal["yes", "no"]


def read_fields(path: Path) -> tuple[list[Field], list[str]]:
    """Fields of a CSV, GeoJSON or GeoPackage file (without runways), and the problems found.

    Raises
    ------
    InputError
        The file is absent or cannot be read at all.
    """
    what = "line"
    if path.suffix.lower() in (".geojson", ".json", ".gpkg"):
        what = "feature"
        rows, problems = _rows_from_layer(path)
    else:
        rows, problems = read_table(
            path,
            ["id", "name", "latitude", "longitude"],
            ["elevation_m", "elevation_ft", "timezone", "stations"],
        )
    if rows:
        problems += one_of_units(
            ("elevation_m", "elevation_ft"), rows[0][1], path, "elevation of the fields"
        )
    if problems:
        return [], problems
    fields = []
    for number, row in rows:
        where = f"{path}, {what} {number}"
        field = _field(row, where, problems)
        if field is not None:
            fields.append(field)
    for twice in repeated(f.id for f in fields):
        problems.append(f"{path}: the field {twice!r} comes twice; give each field its own id.")
    return fields, problems


def _field(row: dict[str, Any], where: str, problems: list[str]) -> Field | None:
    checked = validate(_FieldRow, {k: v for k, v in row.items() if v is not None}, where, problems)
    if checked is None:
        return None
    elevation_m = metres(checked.model_dump(), "elevation")
    if elevation_m is None:
        problems.append(f"{where}: the elevation of {checked.id!r} is empty; fill it in.")
        return None
    try:
        zone = checked.timezone or timezone_at(checked.latitude, checked.longitude)
        standard_offset_s(zone, np.zeros(1))  # refuses an unknown zone
    except InputError as error:
        problems.append(f"{where}: {error}")
        return None
    pinned = tuple(dict.fromkeys((checked.stations or "").split()))
    return Field(
        checked.id,
        checked.name or checked.id,
        checked.latitude,
        checked.longitude,
        elevation_m,
        zone,
        pinned,
    )


def _layer(path: Path) -> Any:
    """The vector layer of a GeoJSON or GeoPackage file that really is one."""
    import geopandas
    import pyogrio

    start = read_bytes(path)[:16].lstrip(b"\xef\xbb\xbf \t\r\n")
    wanted = b"SQLite format 3" if path.suffix.lower() == ".gpkg" else b"{"
    if not start.startswith(wanted):
        raise InputError(
            f"{path}: this is not a readable vector layer (it does not begin as one does); give "
            "GeoJSON or GeoPackage."
        )
    try:
        names = [str(name) for name, _ in pyogrio.list_layers(path)]
        if len(names) > 1 and "fields" not in names:
            raise InputError(f"{path}: there are the layers {names}; name the right one 'fields'.")
        return geopandas.read_file(path, layer="fields" if "fields" in names else names[0])
    except InputError:
        raise
    except Exception as error:  # the drivers raise many kinds
        raise InputError(f"{path}: this is not a readable vector layer ({error}).") from None


def _plain(value: Any) -> Any:
    """An attribute as a CSV cell would give it; None if it is empty."""
    if isinstance(value, str | int | float):
        return None if value == "" or value != value else value
    # A list or an array is no cell; as a list it fails the check of its row with a sentence.
    return None if value is None or value is pd.NA else [repr(value)]


def _rows_from_layer(path: Path) -> tuple[list[tuple[int, dict[str, Any]]], list[str]]:
    """Rows of a point layer, with latitude and longitude from its geometry (WGS 84)."""
    layer = _layer(path)
    if layer.empty or layer.geometry is None or not (layer.geom_type == "Point").all():
        return [], [f"{path}: the layer must hold points, one for each field."]
    if layer.crs is None:
        return [], [f"{path}: the layer has no coordinate reference system; set it (EPSG:4326)."]
    points = layer.to_crs("EPSG:4326").geometry
    known = {"id", "name", "elevation_m", "elevation_ft", "timezone", "stations"}
    table = layer.drop(columns=layer.geometry.name)
    table = table.drop(columns=[c for c in ("latitude", "longitude") if c in table])
    problems = [
        f"{path}: the attribute {c!r} is not known; {nearest(c, sorted(known))}"
        for c in table.columns
        if c not in known
    ]
    rows = []
    for number, (record, point) in enumerate(
        zip(table.to_dict("records"), points, strict=True), start=1
    ):
        row = {k: _plain(v) for k, v in record.items()}
        for key in ("id", "name"):
            if isinstance(row.get(key), int):
                row[key] = str(row[key])
        rows.append((number, {**row, "latitude": point.y, "longitude": point.x}))
    return rows, problems


def read_runways(
    path: Path, fields: list[Field], complete: bool = True
) -> tuple[list[Field], list[str]]:
    """The fields with the runway directions of a CSV file, and the problems found.

    Parameters
    ----------
    path : Path
    fields : list of Field
    complete : bool
        False: some fields could not be read, so a row of an unknown field may be theirs.

    Raises
    ------
    InputError
        The file is absent or not text.
    """
    lengths = [f"{d}_{u}" for d in (*DISTANCES, "length") for u in ("m", "ft")]
    rows, problems = read_table(
        path,
        ["field", "runway", "heading_deg", "surface", "takeoff", "landing"],
        [*lengths, "slope_pct"],
    )
    by_field: dict[str, list[RunwayDirection]] = {f.id: [] for f in fields}
    damaged: set[str | None] = set()
    strangers = False
    for number, row in rows:
        where = f"{path}, line {number}"
        if row["field"] not in by_field:
            strangers = True
            if complete:
                hint = nearest(str(row["field"]), by_field)
                problems.append(
                    f"{where}: the field {row['field']!r} is not in the fields file; {hint}"
                )
            continue
        direction = _direction(row, where, problems)
        if direction is None:
            damaged.add(row["field"])
        else:
            by_field[str(row["field"])].append(direction)
    if rows and not strangers:
        for field in fields:
            if field.id not in damaged:
                problems += _runway_problems(field.id, by_field[field.id], path)
    return [replace(f, runways=tuple(by_field[f.id])) for f in fields], problems


def _runway_problems(field: str, directions: list[RunwayDirection], path: Path) -> list[str]:
    if not directions:
        return [f"{path}: the field {field!r} has no runway direction; add one row at least."]
    problems = [
        f"{path}: the direction {twice!r} of {field!r} comes twice; keep one row."
        for twice in repeated(d.runway for d in directions)
    ]
    for operation in ("takeoff", "landing"):
        if not any(getattr(d, operation) for d in directions):
            problems.append(
                f"{path}: no runway direction of {field!r} is open for {operation}; "
                f"set {operation} to yes in one row at least."
            )
    return problems


def _direction(row: dict[str, Any], where: str, problems: list[str]) -> RunwayDirection | None:
    checked = validate(_RunwayRow, {k: v for k, v in row.items() if v is not None}, where, problems)
    if checked is None:
        return None
    values = checked.model_dump()
    try:
        given = {name: metres(values, name) for name in (*DISTANCES, "length")}
    except ValueError as error:
        problems.append(f"{where}: {error}.")
        return None
    filled, undeclared = _fill_distances(given)
    missing = [name.upper() for name in DISTANCES if filled[name] is None]
    if missing:
        problems.append(
            f"{where}: {' and '.join(missing)} cannot be told; give the declared distances "
            "or the length of the runway."
        )
        return None
    for longer in ("toda", "asda"):
        if filled[longer] < filled["tora"]:
            problems.append(
                f"{where}: {longer.upper()} is {filled[longer]:.0f} m, shorter than TORA with "
                f"{filled['tora']:.0f} m; by definition it cannot be. Check the columns."
            )
            return None
    return RunwayDirection(
        checked.runway,
        checked.heading_deg,
        filled["tora"],
        filled["toda"],
        filled["asda"],
        filled["lda"],
        checked.slope_pct,
        checked.surface,
        checked.takeoff == "yes",
        checked.landing == "yes",
        undeclared,
    )


def _fill_distances(given: dict[str, float | None]) -> tuple[dict[str, Any], bool]:
    """Declared distances with the gaps filled: from the length; TODA and ASDA else from TORA."""
    length = given["length"]
    filled: dict[str, Any] = {
        name: given[name] if given[name] is not None else length for name in DISTANCES
    }
    for name in ("toda", "asda"):
        if filled[name] is None or given[name] is None:
            filled[name] = given["tora"] if given["tora"] is not None else length
    return filled, any(given[name] is None for name in DISTANCES)
