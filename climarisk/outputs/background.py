"""Coast, borders and state lines behind the fields of a map, and whose images it may load.

The lines lie in the package (``background/README.md``: source, licence, how they were made)
and are cut to the surroundings of the fields: fine around them, coarser in each wider square
up to the whole world, so that the ground stays filled however far the reader zooms out.

Everything is cut and simplified in the plane that the page draws in: longitude in degrees,
and the Mercator ordinate in the same unit, ``asinh(tan(latitude))`` in degrees (Snyder, Map
Projections - A Working Manual, USGS Professional Paper 1395, 1987, equation 7-2).
"""

from __future__ import annotations

import base64
import gzip
import json
import math
import re
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from importlib.resources import files
from typing import Any

import numpy as np
import shapely

from climarisk.fields import Field
from climarisk.results import Tiles

#: The plane ends at these latitudes, degrees, and half a turn from the middle of the fields.
_FURTHEST_LATITUDE = 85.0
_HALF_TURN = 180.0
#: Turns of the world that a square about any field may show parts of, degrees.
_TURNS = (-360.0, 0.0, 360.0)
#: The innermost square reaches so many spans of the fields to each side of their middle,
_REACH = 1.2
#: and at least so far beyond the fields, degrees.
_LEAST_MARGIN = 2.0
#: Each square is so many times as wide as the one within it.
_STEP = 4.0
#: Bends smaller than this share of a square's half side are left out: in the innermost square,
#: in which the reader zooms in, in the next one, and in those seen only from far off.
_BENDS = (1.0 / 2500.0, 1.0 / 600.0, 1.0 / 250.0)
#: Edges of squares are whole tenths of a degree, and so are multiples of the page's units.
_TENTHS = 10
#: A plain https host: nothing in it can end a word of a security policy.
_HOST = re.compile(r"(https://[a-z0-9.-]+(?::[0-9]+)?)/", re.ASCII | re.IGNORECASE)


@dataclass(frozen=True)
class _Lines:
    """Lines of one kind in the plane, cut into pieces at the points that must stay."""

    pieces: np.ndarray  # LineStrings
    line: np.ndarray  # number of the line that each piece belongs to, rising
    bounds: np.ndarray  # west, south, east, north of each line
    closed: bool


@dataclass(frozen=True)
class _Square:
    """A square of the plane, about the fields, with the size of the bends left out in it."""

    west: float
    east: float
    south: float  # latitude
    north: float
    bend: float

    @property
    def area(self) -> shapely.Polygon:
        """The square in the plane."""
        return shapely.box(self.west, _ordinate(self.south), self.east, _ordinate(self.north))


def outlines_for(fields: Sequence[Field]) -> dict[str, Any]:
    """Land, borders and state lines around the fields, packed for the page.

    Parameters
    ----------
    fields : sequence of Field
        None give the whole world.

    Returns
    -------
    dict
        ``perDegree``: whole units to a degree.  ``land``, ``border``, ``state``: rings of land
        (a ring within a ring is a hole) and lines between lands, as base64 of whole numbers of
        seven bits a byte, low ones first, the top bit telling that more follow: for each line
        the number of its points, then longitude and latitude of each in units, less those of
        the point before, the sign in the lowest bit.  ``seams``: ``longitudes`` and
        ``latitudes`` in units along which an edge of a ring is a cut and no coast.

    Notes
    -----
    Longitudes are those of `drawn_longitudes`: they go beyond 180 degrees where the fields lie
    about that meridian.
    """
    squares = _squares(fields)
    source, finest = _source()
    wanted = _TENTHS * math.ceil(1.0 / squares[0].bend / _TENTHS)
    per_degree = min(finest, wanted)
    parts: dict[str, list[np.ndarray]] = {kind: [] for kind in source}
    inner: shapely.Geometry = shapely.Polygon()
    for square in squares:
        zone = shapely.difference(square.area, inner)
        inner = square.area
        for kind, lines in source.items():
            parts[kind] += _cut(lines, square, zone)
    packed = {kind: _packed(parts[kind], per_degree, source[kind].closed) for kind in source}
    return {"perDegree": per_degree, **packed, "seams": _seams(squares, per_degree)}


def drawn_longitudes(fields: Sequence[Field]) -> list[float]:
    """Longitudes for the map, degrees: west ones shifted by 360 where that keeps fields together.

    Fields on both sides of the 180 degree meridian are drawn beside each other this way.
    """
    plain = [field.longitude for field in fields]
    shifted = [longitude % 360.0 for longitude in plain]
    if plain and max(shifted) - min(shifted) < max(plain) - min(plain):
        return shifted
    return plain


def image_sources(tiles: Tiles | None) -> str:
    """The sources of images that the page's security policy allows: its own, and one host.

    Raises
    ------
    ValueError
        The address is not one that a study file may hold.
    """
    if tiles is None:
        return "data:"
    host = _HOST.match(tiles.url)
    if host is None:
        raise ValueError(f"{tiles.url!r} is no https address of a plain host")
    return f"data: {host[1]}"


# Squares about the fields


def _squares(fields: Sequence[Field]) -> list[_Square]:
    """Squares about the fields, the innermost first, the last one the whole plane."""
    if not fields:
        return [_square(0.0, 0.0, _HALF_TURN, 0)]
    longitudes = drawn_longitudes(fields)
    ordinates = [_ordinate(field.latitude) for field in fields]
    span = max(max(side) - min(side) for side in (longitudes, ordinates))
    middle, up = ((max(side) + min(side)) / 2.0 for side in (longitudes, ordinates))
    half = max(_REACH * span, span / 2.0 + _LEAST_MARGIN)
    squares: list[_Square] = []
    # A square nearly as wide as the world is followed by the world alone.
    while half * math.sqrt(_STEP) < _HALF_TURN:
        squares.append(_square(middle, up, half, len(squares)))
        half *= _STEP
    return [*squares, _square(middle, 0.0, _HALF_TURN, len(squares))]


def _square(longitude: float, ordinate: float, half: float, order: int) -> _Square:
    return _Square(
        west=math.floor((longitude - half) * _TENTHS) / _TENTHS,
        east=math.ceil((longitude + half) * _TENTHS) / _TENTHS,
        south=max(
            math.floor(_latitude(ordinate - half) * _TENTHS) / _TENTHS,
            -_FURTHEST_LATITUDE,
        ),
        north=min(
            math.ceil(_latitude(ordinate + half) * _TENTHS) / _TENTHS,
            _FURTHEST_LATITUDE,
        ),
        bend=half * _BENDS[min(order, len(_BENDS) - 1)],
    )


def _seams(squares: Sequence[_Square], per_degree: int) -> dict[str, list[int]]:
    """Where edges of rings are no coast: along the squares, and through the pole at 180 degrees."""
    longitudes = {edge for square in squares for edge in (square.west, square.east)}
    longitudes |= {_HALF_TURN + turn for turn in _TURNS}
    latitudes = {edge for square in squares for edge in (square.south, square.north)}
    return {
        "longitudes": [round(edge * per_degree) for edge in sorted(longitudes)],
        "latitudes": [round(edge * per_degree) for edge in sorted(latitudes)],
    }


def _ordinate(latitude: float) -> float:
    kept = min(max(latitude, -_FURTHEST_LATITUDE), _FURTHEST_LATITUDE)
    return math.degrees(math.asinh(math.tan(math.radians(kept))))


def _latitude(ordinate: float) -> float:
    return math.degrees(math.atan(math.sinh(math.radians(ordinate))))


# Lines of the package


@lru_cache(maxsize=1)
def _source() -> tuple[dict[str, _Lines], int]:
    """Lines of each kind, and the whole units to a degree in which they are kept."""
    file = files("climarisk.outputs") / "background" / "outlines.json.gz"
    content = json.loads(gzip.decompress(file.read_bytes()))
    unit = 1.0 / content["per_degree"]
    points = {
        kind: [np.cumsum(np.reshape(line, (-1, 2)), axis=0) for line in content[kind]]
        for kind in ("land", "border", "state")
    }
    # A coast keeps the points at which a border meets it.
    met = {tuple(line[end]) for line in points["border"] for end in (0, -1)}
    return {
        "land": _lines(points["land"], unit, met, closed=True),
        "border": _lines(points["border"], unit, set(), closed=False),
        "state": _lines(points["state"], unit, set(), closed=False),
    }, content["per_degree"]


def _lines(
    points: list[np.ndarray], unit: float, kept: set[tuple[int, int]], *, closed: bool
) -> _Lines:
    pieces, line, bounds = [], [], []
    for number, whole in enumerate(points):
        latitude = np.clip(whole[:, 1] * unit, -_FURTHEST_LATITUDE, _FURTHEST_LATITUDE)
        ordinate = np.degrees(np.arcsinh(np.tan(np.radians(latitude))))
        plane = np.column_stack([whole[:, 0] * unit, ordinate])
        bounds.append([*plane.min(axis=0), *plane.max(axis=0)])
        inside = range(1, len(whole) - 1)
        cuts = [0, *(i for i in inside if tuple(whole[i]) in kept), len(whole) - 1]
        for first, last in zip(cuts, cuts[1:], strict=False):
            pieces.append(shapely.LineString(plane[first : last + 1]))
            line.append(number)
    return _Lines(np.array(pieces), np.array(line), np.array(bounds), closed)


# Cutting and packing


def _cut(lines: _Lines, square: _Square, zone: shapely.Geometry) -> list[np.ndarray]:
    """The lines within a zone of a square, smoothed, as arrays of points of the plane."""
    found = []
    for turn in _TURNS:
        west, south, east, north = zone.bounds
        bounds = lines.bounds
        near = (bounds[:, 0] <= east - turn) & (bounds[:, 2] >= west - turn)
        near &= (bounds[:, 1] <= north) & (bounds[:, 3] >= south)
        if not near.any():
            continue
        shapes = _smoothed(lines, near, square.bend, turn)
        parts = shapely.get_parts(shapely.get_parts(shapely.intersection(shapes, zone)))
        wanted = shapely.GeometryType.POLYGON if lines.closed else shapely.GeometryType.LINESTRING
        parts = parts[(shapely.get_type_id(parts) == wanted) & ~shapely.is_empty(parts)]
        found += [shapely.get_coordinates(p) for p in _rings(parts, lines.closed)]
    return found


def _rings(parts: np.ndarray, closed: bool) -> np.ndarray:
    return shapely.get_rings(parts) if closed else parts


def _smoothed(lines: _Lines, chosen: np.ndarray, bend: float, turn: float) -> np.ndarray:
    """The chosen lines without bends smaller than `bend`; rings become valid areas."""
    mine = chosen[lines.line]
    pieces = shapely.simplify(lines.pieces[mine], bend, preserve_topology=False)
    points, piece = shapely.get_coordinates(pieces, return_index=True)
    points[:, 0] += turn
    _, line, count = np.unique(lines.line[mine][piece], return_inverse=True, return_counts=True)
    if not lines.closed:
        return shapely.linestrings(points, indices=line)
    # An island smaller than a bend is down to a line there and back.
    large = count[line] >= 4
    _, line = np.unique(line[large], return_inverse=True)
    areas = shapely.polygons(shapely.linearrings(points[large], indices=line))
    crossed = ~shapely.is_valid(areas)
    areas[crossed] = shapely.make_valid(areas[crossed])
    return areas


def _packed(lines: Sequence[np.ndarray], per_degree: int, closed: bool) -> str:
    """Lines of the plane as text, in whole units; see `outlines_for`."""
    numbers: list[int] = []
    last = np.zeros(2, dtype=int)
    for line in lines:
        latitude = np.degrees(np.arctan(np.sinh(np.radians(line[:, 1]))))
        units = np.rint(np.column_stack([line[:, 0], latitude]) * per_degree).astype(int)
        moved = np.any(np.diff(units, axis=0) != 0, axis=1)
        units = units[np.r_[not closed, moved]]  # a ring needs no first point beside its last
        if len(units) < (3 if closed else 2):
            continue
        steps = np.diff(units, axis=0, prepend=last[np.newaxis]).ravel()
        last = units[-1]
        numbers += [
            len(units),
            *np.where(steps < 0, -2 * steps - 1, 2 * steps).tolist(),
        ]
    return base64.b64encode(_seven_bits(numbers)).decode("ascii")


def _seven_bits(numbers: Sequence[int]) -> bytes:
    out = bytearray()
    for number in numbers:
        while number > 127:
            out.append(number & 127 | 128)
            number >>= 7
        out.append(number)
    return bytes(out)
