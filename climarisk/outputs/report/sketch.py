"""A small sketch of where the fields lie, with a graticule and a scale bar."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from climarisk.fields import Field
from climarisk.outputs.colours import NO_DATA_SHAPE, SHAPES
from climarisk.outputs.map_data import drawn_longitudes
from climarisk.outputs.report.charts import picture
from climarisk.outputs.report.words import Html, el
from climarisk.outputs.texts import grouped
from climarisk.stations import distance_km

_WIDTH, _HEIGHT, _EDGE = 330.0, 215.0, 24.0
_FOOT = 20.0
#: A single field is drawn in a frame of this many degrees of latitude.
_LEAST_DEGREES = 0.4
_GRATICULE = (0.1, 0.2, 0.5, 1, 2, 5, 10, 20, 45)
_LETTER = 5.2
#: Half the width of a symbol, and beyond so many fields.
_MARK, _SMALL_MARK, _MANY = 6.0, 3.5, 100
#: Beyond so many fields only the first ones carry their number.
_MOST_NUMBERS = 60


@dataclass(frozen=True)
class _Frame:
    """Equirectangular picture, longitudes shortened by the cosine of the middle latitude."""

    west: float
    north: float
    per_degree: float  # of latitude
    shrink: float

    def at(self, longitude: float, latitude: float) -> tuple[float, float]:
        return (
            (longitude - self.west) * self.shrink * self.per_degree,
            (self.north - latitude) * self.per_degree,
        )


def fields_sketch(
    fields: Sequence[Field], numbers: Sequence[int], bands: Sequence[int], title: str
) -> Html:
    """Where the fields lie: a symbol of the band and the number of the report beside it.

    Parameters
    ----------
    fields : sequence of Field
        At least one.
    numbers : sequence of int
        Numbers of the fields in the report, 1 being the first to get a label.
    bands : sequence of int
        Band of each field, -1 for "no data".
    title : str
    """
    longitudes = drawn_longitudes(fields)
    frame = _frame(longitudes, [f.latitude for f in fields])
    points = [frame.at(x, f.latitude) for x, f in zip(longitudes, fields, strict=True)]
    parts = [*_graticule(frame), *_scale_bar(frame)]
    places = sorted(range(len(fields)), key=lambda i: -numbers[i])
    size = _SMALL_MARK if len(fields) > _MANY else _MARK
    parts += [_symbol(points[i], bands[i], size) for i in places]  # the first on top
    parts += _labels(points, numbers, size)
    return picture(title, _WIDTH, _HEIGHT, "sketch", parts)


def _frame(longitudes: Sequence[float], latitudes: Sequence[float]) -> _Frame:
    middle = (min(latitudes) + max(latitudes)) / 2.0, (min(longitudes) + max(longitudes)) / 2.0
    shrink = max(math.cos(math.radians(middle[0])), 0.02)  # a pole has no longitude
    tall = max(max(latitudes) - min(latitudes), _LEAST_DEGREES)
    wide = max((max(longitudes) - min(longitudes)) * shrink, _LEAST_DEGREES)
    scale = min((_WIDTH - 2 * _EDGE) / wide, (_HEIGHT - _FOOT - 2 * _EDGE) / tall)
    west = middle[1] - _WIDTH / 2.0 / scale / shrink
    north = middle[0] + (_HEIGHT - _FOOT) / 2.0 / scale
    return _Frame(west, north, scale, shrink)


def _graticule(frame: _Frame) -> list[Html]:
    bottom = _HEIGHT - _FOOT
    tall = bottom / frame.per_degree
    wide = _WIDTH / frame.per_degree / frame.shrink
    parts = [
        el("rect", x="0.5", y="0.5", width=f"{_WIDTH - 1:g}", height=f"{bottom:g}", class_="ground")
    ]
    for degree in _multiples(frame.west, frame.west + wide):
        x = frame.at(degree, frame.north)[0]
        parts.append(el("path", d=f"M{x:.1f} .5V{bottom:g}", class_="rule"))
        if 14 < x < _WIDTH - 14:
            text = _degrees((degree + 180.0) % 360.0 - 180.0, "E", "W")
            parts.append(_text(text, x, bottom - 3.0, "middle", "degree"))
    for degree in _multiples(frame.north - tall, frame.north):
        y = frame.at(frame.west, degree)[1]
        parts.append(el("path", d=f"M.5 {y:.1f}H{_WIDTH - 0.5:g}", class_="rule"))
        if 10 < y < bottom - 16:
            parts.append(_text(_degrees(degree, "N", "S"), 3.0, y - 2.0, "start", "degree"))
    return parts


def _multiples(low: float, high: float) -> list[float]:
    step = next((s for s in _GRATICULE if (high - low) / s <= 5), _GRATICULE[-1])
    return [k * step for k in range(math.ceil(low / step), math.floor(high / step) + 1)]


def _degrees(value: float, positive: str, negative: str) -> str:
    side = "" if round(value, 6) == 0 else positive if value > 0 else negative
    return f"{abs(round(value, 6)):g}° {side}".strip()


def _scale_bar(frame: _Frame) -> list[Html]:
    """A bar of a round length, measured at the middle latitude."""
    latitude = frame.north - (_HEIGHT - _FOOT) / 2.0 / frame.per_degree
    across = _WIDTH / frame.per_degree / frame.shrink
    part = min(across, 90.0) / 4.0
    per_km = part * frame.shrink * frame.per_degree / distance_km(latitude, 0.0, latitude, part)
    most = _WIDTH / 3.0 / per_km
    power = 10.0 ** math.floor(math.log10(most))
    km = next(step * power for step in (5.0, 2.0, 1.0) if step * power <= most)
    y, length = _HEIGHT - 6.0, km * per_km
    bar = f"M1 {y - 4:g}v4h{length:.1f}v-4"
    return [
        el("path", d=bar, class_="scale"),
        _text(f"{grouped(round(km)) if km >= 1 else f'{km:g}'} km", length + 5.0, y, "start"),
        _text("north is up", _WIDTH - 1.0, y, "end"),
    ]


def _symbol(point: tuple[float, float], band: int, size: float) -> Html:
    shape = NO_DATA_SHAPE if band < 0 else SHAPES[min(band, len(SHAPES) - 1)]
    move = f"translate({point[0]:.1f} {point[1]:.1f}) scale({size / 13:.3f})"
    return el("path", d=shape, transform=move, class_="gone" if band < 0 else f"b{band} shape")


def _labels(
    points: Sequence[tuple[float, float]], numbers: Sequence[int], size: float
) -> list[Html]:
    """Numbers beside the symbols, the first fields first, where nothing lies in the way."""
    taken = [(x - size, y - size, x + size, y + size) for x, y in points]
    parts = []
    for i in sorted(range(len(points)), key=lambda i: numbers[i])[:_MOST_NUMBERS]:
        text = str(numbers[i])
        wide, (x, y) = _LETTER * len(text), points[i]
        for dx, dy in ((size + 1, 3), (-size - 1 - wide, 3), (-wide / 2, -8), (-wide / 2, 15)):
            box = (x + dx, y + dy - 7, x + dx + wide, y + dy)
            inside = box[0] > 1 and box[2] < _WIDTH - 1 and box[1] > 1 and box[3] < _HEIGHT - _FOOT
            if inside and not any(_meet(box, other) for other in taken):
                taken.append(box)
                parts.append(_text(text, x + dx, y + dy, "start", "number"))
                break
    return parts


def _meet(one: tuple[float, ...], other: tuple[float, ...]) -> bool:
    return one[0] < other[2] and other[0] < one[2] and one[1] < other[3] and other[1] < one[3]


def _text(text: str, x: float, y: float, anchor: str, kind: str | None = None) -> Html:
    return el("text", text, x=f"{x:.1f}", y=f"{y:.1f}", text_anchor=anchor, class_=kind)
