"""Charts of the report as inline SVG: month strips, shares by month, air by month."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from climarisk.outputs.report.words import Html, el
from climarisk.outputs.texts import MONTHS, band_of, grouped

_STEP, _HEIGHT = 10, 18
#: Steps of the scale of a chart of shares; the lowest that holds every value is taken.
_TOPS = (0.04, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.8, 1.0)
_FEET_STEPS = (500, 1000, 2000, 5000, 10000)
_NARROW = {"left": 15.0, "right": 131.0, "top": 7.0, "bottom": 70.0}
_WIDE = {"left": 30.0, "right": 210.0}


def picture(title: str, width: float, height: float, kind: str, *parts: object) -> Html:
    """An SVG picture with a name for those who do not see it."""
    box = f"0 0 {width:g} {height:g}"
    return el("svg", el("title", title), parts, viewBox=box, role="img", class_=kind)


def month_strip(shares: np.ndarray, edges: Sequence[float], title: str) -> Html:
    """Twelve bars, as high as the band of each month's share; a cross is "no data"."""
    bands = [band_of(float(share), edges) for share in shares]
    bars = [
        el("path", d="".join(_bar(m, b, len(edges)) for m, b in enumerate(bands) if b == band),
           class_=f"b{band} bar")
        for band in sorted(set(bands) - {-1})
    ]  # fmt: skip
    gone = "".join(_cross(m * _STEP + 1.5, _HEIGHT - 9, 7, 7) for m, b in enumerate(bands) if b < 0)
    bars.append(el("path", d=f"M0 {_HEIGHT}H{_STEP * len(MONTHS)}", class_="rule"))
    if gone:
        bars.append(el("path", d=gone, class_="cross"))
    return picture(title, _STEP * len(MONTHS), _HEIGHT + 0.5, "strip", bars)


def _bar(month: int, band: int, highest: int) -> str:
    height = round(3 + (_HEIGHT - 4) * band / max(highest, 1), 1)
    return f"M{month * _STEP + 0.7:g} {_HEIGHT}v-{height:g}h{_STEP - 1.4:g}v{height:g}z"


def _cross(x: float, y: float, width: float, height: float) -> str:
    return f"M{x:g} {y:g}l{width:g} {height:g}m-{width:g} 0l{width:g} -{height:g}"


def strip_months() -> Html:
    """The initials of the months, in line with the bars of `month_strip`."""
    letters = [
        el("text", month[0], x=f"{i * _STEP + _STEP / 2:g}", y="8", text_anchor="middle")
        for i, month in enumerate(MONTHS)
    ]
    box = f"0 0 {_STEP * len(MONTHS)} 10"
    return el("svg", letters, viewBox=box, class_="strip", aria_hidden="true")


def band_sample(band: int, edges: int, shape: str) -> Html:
    """A band as it looks in a strip and on the sketch of the fields."""
    if band < 0:
        bar = el("path", d=_cross(1.5, _HEIGHT - 9, 7, 7), class_="cross")
    else:
        bar = el("path", d=_bar(0, band, edges), class_=f"b{band} bar")
    kind = "gone" if band < 0 else f"b{band} shape"
    mark = el("path", d=shape, class_=kind, transform="translate(30 9) scale(.62)")
    return el(
        "svg", bar, mark, viewBox=f"0 0 40 {_HEIGHT + 0.5}", class_="sample", aria_hidden="true"
    )


def share_top(highs: np.ndarray) -> float:
    """End of the common scale of charts that must hold these shares."""
    highest = float(np.nanmax(highs)) if not np.isnan(highs).all() else 0.0
    return next(top for top in _TOPS if highest <= top or top == _TOPS[-1])


def share_chart(
    shares: tuple[np.ndarray, np.ndarray, np.ndarray],
    edges: Sequence[float],
    top: float,
    title: str,
) -> Html:
    """Bars of a share by month with a line for each interval.

    Parameters
    ----------
    shares : tuple of ndarray, shape (12,)
        Share, lower and upper end of its interval.
    edges : sequence of float
        Of the bands.
    top : float
        End of the scale.
    title : str
    """
    left, right, ceiling, floor = _NARROW.values()
    step = (right - left) / len(MONTHS)

    def y(share: float) -> float:
        return round(floor - (floor - ceiling) * min(share / top, 1.0), 2)

    parts = []
    for level in (top, top / 2, 0.0):
        parts.append(el("path", d=f"M{left:g} {y(level):g}H{right:g}", class_="rule"))
        parts.append(_label(left - 2, y(level) + 2.5, _per_cent(level), "end"))
    for m, (share, low, high) in enumerate(zip(*(a.tolist() for a in shares), strict=True)):
        x = left + m * step
        parts.append(_label(x + step / 2, floor + 9, MONTHS[m][0], "middle"))
        if math.isnan(share):
            parts.append(el("path", d=_cross(x + 1.6, floor - 9, step - 3.2, 7), class_="cross"))
            continue
        tall = max(floor - y(share), 0.6 if share > 0 else 0.0)
        box = f"M{x + 1:.2f} {floor:g}v-{tall:.2f}h{step - 2:.2f}v{tall:.2f}z"
        parts.append(el("path", d=box, class_=f"b{band_of(share, edges)} bar"))
        if not math.isnan(low + high):
            x += step / 2
            whisker = f"M{x - 1.6:.2f} {y(high):g}h3.2m-1.6 0V{y(low):g}m-1.6 0h3.2"
            parts += [el("path", d=whisker, class_="halo"), el("path", d=whisker, class_="whisker")]
    return picture(title, right + 2, floor + 12, "chart", parts)


def _per_cent(level: float) -> str:
    return f"{level * 100:g}"


def _label(x: float, y: float, text: str, anchor: str, kind: str | None = None) -> Html:
    return el("text", text, x=f"{x:.5g}", y=f"{y:.5g}", text_anchor=anchor, class_=kind)


def feet_scale(*values: np.ndarray) -> list[int]:
    """Steps of a common scale that holds these feet: three to eight of them, round."""
    known = np.concatenate([v[~np.isnan(v)] for v in values])
    if not known.size:
        return [0, 1000]
    low, high = float(known.min()), float(known.max())
    step = next((s for s in _FEET_STEPS if (high - low) / s <= 6), _FEET_STEPS[-1])
    return list(range(math.floor(low / step) * step, math.ceil(high / step) * step + step, step))


def air_chart(
    altitude: Sequence[np.ndarray],
    humidity: Sequence[np.ndarray],
    elevation_ft: float,
    steps: Sequence[int],
    title: str,
) -> Html:
    """Density altitude above, relative humidity below, by month: band P10 to P90 and median.

    Parameters
    ----------
    altitude, humidity : sequence of three ndarray, shape (12,)
        P10, P50, P90 in ft and in per cent.
    elevation_ft : float
        Drawn as a dashed line.
    steps : sequence of int
        Levels of the scale of feet, rising.
    title : str
    """
    feet = _Panel(15.0, 130.0, float(steps[0]), float(max(steps[-1], steps[0] + 1)))
    per_cent = _Panel(152.0, 194.0, 0.0, 100.0)
    parts = [*feet.scale(steps, grouped), *per_cent.scale((0, 50, 100), str)]
    at = feet.y(elevation_ft)
    parts += feet.band(*altitude)
    parts.append(el("path", d=f"M{_WIDE['left']:g} {at:.1f}H{_WIDE['right']:g}", class_="ground"))
    parts += per_cent.band(*humidity)
    parts += [_label(_month_x(m), 204, name[0], "middle") for m, name in enumerate(MONTHS)]
    parts += [_label(28, 8, "ft", "end"), _label(28, 145, "RH %", "end")]
    return picture(title, _WIDE["right"] + 2, 207, "chart", parts)


def _month_x(month: int) -> float:
    return _WIDE["left"] + (month + 0.5) * (_WIDE["right"] - _WIDE["left"]) / len(MONTHS)


class _Panel:
    """One pair of axes of an air chart; months lie across."""

    def __init__(self, top: float, bottom: float, low: float, high: float) -> None:
        self._top, self._bottom, self._low, self._high = top, bottom, low, high

    def y(self, value: float) -> float:
        part = (value - self._low) / (self._high - self._low)
        return self._bottom - (self._bottom - self._top) * min(max(part, 0.0), 1.0)

    def scale(self, levels: Sequence[int], text) -> list[Html]:
        parts = []
        for level in levels:
            y = self.y(level)
            parts.append(
                el("path", d=f"M{_WIDE['left']:g} {y:.1f}H{_WIDE['right']:g}", class_="rule")
            )
            parts.append(_label(_WIDE["left"] - 2, y + 2.5, text(level), "end"))
        return parts

    def band(self, low: np.ndarray, middle: np.ndarray, high: np.ndarray) -> list[Html]:
        """Band and median of each run of months with data, crosses in the others."""
        known = ~np.isnan(low + middle + high)
        parts = []
        for run in _runs(known):
            half = (_month_x(1) - _month_x(0)) / 2 if len(run) == 1 else 0.0
            xs = [_month_x(m) for m in run]
            upper = [(x, self.y(high[m])) for x, m in zip(xs, run, strict=True)]
            lower = [(x, self.y(low[m])) for x, m in zip(xs, run, strict=True)]
            line = [(x, self.y(middle[m])) for x, m in zip(xs, run, strict=True)]
            edge = _spread(upper, half) + _spread(lower, half)[::-1]
            parts.append(el("path", d=_polyline(edge) + "Z", class_="band"))
            parts.append(el("path", d=_polyline(_spread(line, half)), class_="median"))
        bottom = self._bottom - 8
        gone = "".join(_cross(_month_x(int(m)) - 3, bottom, 6, 6) for m in np.flatnonzero(~known))
        return [*parts, el("path", d=gone, class_="cross")] if gone else parts


def _runs(known: np.ndarray) -> list[list[int]]:
    """Places of the values, in runs without a gap."""
    runs: list[list[int]] = []
    for place in np.flatnonzero(known).tolist():
        if runs and place == runs[-1][-1] + 1:
            runs[-1].append(place)
        else:
            runs.append([place])
    return runs


def _spread(points: list[tuple[float, float]], half: float) -> list[tuple[float, float]]:
    """A single point as a short level line, so that it can be seen."""
    if len(points) != 1:
        return points
    ((x, y),) = points
    return [(x - half, y), (x + half, y)]


def _polyline(points: Sequence[tuple[float, float]]) -> str:
    return "M" + "L".join(f"{x:.1f} {y:.1f}" for x, y in points)
