"""The verification report as a picture: SVG written by hand."""

from __future__ import annotations

import html
import textwrap
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from climarisk.lapse import DAY_HOURS
from climarisk.transfer_error import planning_sd_k
from climarisk.verification import VerificationReport, clean, unverifiable

_WIDTH, _HEIGHT = 980, 560
_TOP, _BOTTOM = 130, 480
_MONTHS = ["Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"]
#: Okabe and Ito's colours that differ for every common kind of colour vision; the shapes too.
_INK, _PALE, _NIGHT, _DAY = "#222222", "#dddddd", "#0072b2", "#d55e00"
#: Mean absolute value of a normal variable in standard deviations: sqrt(2 / pi).
_MAE_PER_SD = float(np.sqrt(2.0 / np.pi))
#: Where a label may stand beside its point: pixels right and down, and its anchor.
_NEAR_PLACES = (
    (9, 4, "start"),
    (-9, 4, "end"),
    (0, -10, "middle"),
    (0, 19, "middle"),
    (7, -7, "start"),
    (7, 15, "start"),
    (-7, -7, "end"),
    (-7, 15, "end"),
)
#: Further places, joined to the point by a line, unless there are more stations than this.
_FAR_PLACES = (
    (25, -30, "start"),
    (25, 40, "start"),
    (-25, -30, "end"),
    (-25, 40, "end"),
    (0, -30, "middle"),
    (0, 40, "middle"),
    (0, -50, "middle"),
    (0, 60, "middle"),
)
_MOST_FAR = 20


@dataclass(frozen=True)
class _Axes:
    """A panel: pixel edges and the values at its right and upper end; both start at zero."""

    left: float
    right: float
    x_max: float
    y_max: float

    def x(self, value: float) -> float:
        return self.left + value / self.x_max * (self.right - self.left)

    def y(self, value: float) -> float:
        return _BOTTOM - value / self.y_max * (_BOTTOM - _TOP)


def svg_text(report: VerificationReport) -> str:
    """The picture: error by station against carried height, and by month and half-day."""
    title = f"Verification of {clean(report.title)}"
    kept = report.stations["verified"] & ~report.stations["singled_out"]
    singled = int(report.stations["singled_out"].sum())
    note = (
        f"Each station hidden in turn and estimated from the others, {report.period}: "
        f"{int(kept.sum())} stations" + (f", and {singled} singled out" if singled else "")
    )
    if len(report.scores):
        body = [*_height_panel(report), *_month_panel(report)]
    else:
        note = unverifiable(report)
        body = []
    described = (
        f"{note}. Left: mean absolute temperature error of each station against the mean height "
        "that its air was carried over, with the planning value. Right: the mean over stations by "
        "month, by day and by night."
        if body
        else note
    )
    height = _HEIGHT if body else _TOP
    head = [
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{_WIDTH}" height="{height}" '
        f'viewBox="0 0 {_WIDTH} {height}" role="img" aria-labelledby="title desc" '
        'font-family="DejaVu Sans, Verdana, Arial, sans-serif" font-size="13">',
        f'<title id="title">{_escaped(title)}</title>',
        f'<desc id="desc">{_escaped(described)}</desc>',
        f'<rect width="{_WIDTH}" height="{height}" fill="#ffffff"/>',
        _text(28, 36, _cut(title, 75), size=20, weight="bold"),
        *(
            _text(28, 60 + 18 * i, line)
            for i, line in enumerate(textwrap.wrap(note, 125, break_long_words=True))
        ),
    ]
    return "\n".join([*head, *body, "</svg>"]) + "\n"


def _escaped(text: object) -> str:
    return html.escape(clean(text))


def _cut(text: str, most: int) -> str:
    return text if len(text) <= most else text[: most - 3] + "..."


def _text(
    x: float,
    y: float,
    text: object,
    anchor: str = "start",
    size: int = 13,
    weight: str = "normal",
) -> str:
    return (
        f'<text x="{x:.1f}" y="{y:.1f}" text-anchor="{anchor}" font-size="{size}" '
        f'font-weight="{weight}" fill="{_INK}" stroke="#ffffff" stroke-width="3" '
        f'paint-order="stroke">{_escaped(text)}</text>'
    )


def _ticks(highest: float) -> list[float]:
    """Round values from zero past the highest, at most seven."""
    step = 10.0 ** np.floor(np.log10(highest / 6))
    step *= next(m for m in (1, 2, 2.5, 5, 10) if m * step * 6 >= highest)
    return [i * float(step) for i in range(int(np.ceil(highest / step)) + 1)]


def _frame(axes: _Axes, y_ticks: Iterable[float], heading: str) -> list[str]:
    """Heading, horizontal lines with their values and the foot line of a panel."""
    parts = [
        _text(axes.left, 98, heading, size=14, weight="bold"),
        _text(axes.left, 117, "mean absolute error, K", size=12),
    ]
    for value in y_ticks:
        y = axes.y(value)
        colour = _PALE if value else _INK
        parts.append(
            f'<line x1="{axes.left:.1f}" y1="{y:.1f}" x2="{axes.right:.1f}" y2="{y:.1f}" '
            f'stroke="{colour}"/>'
        )
        parts.append(_text(axes.left - 8, y + 4.5, f"{value:g}", "end", 12))
    return parts


def _height_panel(report: VerificationReport) -> list[str]:
    scores = report.scores[report.scores["group_kind"] == "all"]
    table = scores.merge(report.stations, on="station")
    x_ticks = _ticks(max(1.05 * float(table["carried_m"].max()), 200.0))
    reach = np.linspace(0.0, x_ticks[-1], 61)
    planning = planning_sd_k(reach) * _MAE_PER_SD
    y_ticks = _ticks(1.05 * max(float(table["mae_k"].max()), float(planning.max())))
    axes = _Axes(68, 490, x_ticks[-1], y_ticks[-1])
    parts = _frame(axes, y_ticks, "By station and height carried")
    parts += [_text(axes.x(v), _BOTTOM + 20, f"{v:g}", "middle", 12) for v in x_ticks]
    parts.append(
        _text((axes.left + axes.right) / 2, _BOTTOM + 40, "mean height carried, m", "middle", 12)
    )
    line = " ".join(
        f"{axes.x(x):.1f},{axes.y(y):.1f}" for x, y in zip(reach, planning, strict=True)
    )
    parts.append(
        f'<polyline points="{line}" fill="none" stroke="#767676" stroke-width="2" '
        'stroke-dasharray="7 5"/>'
    )
    parts += _points(table, axes)
    parts += _legend(
        68,
        [
            (_mark("circle", 0, 0, _INK), "station"),
            *(
                [(_mark("diamond", 0, 0, _INK), "singled out")]
                if table["singled_out"].any()
                else []
            ),
            (
                '<line x1="-14" x2="10" y1="0" y2="0" stroke="#767676" stroke-width="2" '
                'stroke-dasharray="7 5"/>',
                "planning value before verification",
            ),
        ],
    )
    return parts


def _points(table: pd.DataFrame, axes: _Axes) -> list[str]:
    """A mark and, where there is room, a label for each station, singled out ones first."""
    table = table.sort_values(["singled_out", "station"], ascending=[False, True], kind="stable")
    places = [
        (axes.x(x), axes.y(y)) for x, y in zip(table["carried_m"], table["mae_k"], strict=True)
    ]
    taken = [(x - 6, y - 6, x + 6, y + 6) for x, y in places]
    parts = []
    for i, (_, s) in enumerate(table.iterrows()):
        x, y = places[i]
        tip = (
            f"{clean(s['station'])} {clean(s['name'])}: {s['mae_k']:.2f} K, bias "
            f"{s['bias_k']:+.2f} K, carried {s['carried_m']:.0f} m"
        )
        mark = _mark("diamond" if s["singled_out"] else "circle", x, y, _INK)
        parts.append(f"<g><title>{_escaped(tip)}</title>{mark}</g>")
        far = len(table) <= _MOST_FAR or bool(s["singled_out"])
        parts += _label(_cut(clean(s["station"]), 14), (x, y), axes, taken, far)
    return parts


def _label(
    text: str,
    point: tuple[float, float],
    axes: _Axes,
    taken: list[tuple[float, float, float, float]],
    far: bool,
) -> list[str]:
    """The label of a point where it covers nothing; none where there is no room."""
    x, y = point
    wide = 7.0 * len(text)
    for dx, dy, anchor in _NEAR_PLACES + (_FAR_PLACES if far else ()):
        left = x + dx - {"start": 0.0, "middle": wide / 2, "end": wide}[anchor]
        box = (left, y + dy - 10, left + wide, y + dy + 2)
        inside = box[0] >= axes.left and box[2] <= axes.right + 20 and box[3] <= _BOTTOM - 1
        clear = all(box[2] < b[0] or b[2] < box[0] or box[3] < b[1] or b[3] < box[1] for b in taken)
        if inside and clear:
            taken.append(box)
            label = _text(x + dx, y + dy, text, anchor, 11)
            if (dx, dy, anchor) in _NEAR_PLACES:
                return [label]
            foot = y + dy + (2 if dy < 0 else -10)
            leader = (
                f'<line x1="{x:.1f}" y1="{y:.1f}" x2="{x + dx:.1f}" y2="{foot:.1f}" '
                'stroke="#767676"/>'
            )
            return [leader, label]
    return []


def _mark(shape: str, x: float, y: float, colour: str) -> str:
    if shape == "circle":
        return f'<circle cx="{x:.1f}" cy="{y:.1f}" r="4.5" fill="{colour}"/>'
    if shape == "square":
        return f'<rect x="{x - 4:.1f}" y="{y - 4:.1f}" width="8" height="8" fill="{colour}"/>'
    path = f"M{x:.1f} {y - 6:.1f}l6 6l-6 6l-6-6z"
    return f'<path d="{path}" fill="#ffffff" stroke="{colour}" stroke-width="2"/>'


def _legend(left: float, entries: Sequence[tuple[str, str]]) -> list[str]:
    """Marks with their names in one row below a panel."""
    parts, x = [], left
    for mark, name in entries:
        x += 14
        parts.append(f'<g transform="translate({x:.1f} {_BOTTOM + 62})">{mark}</g>')
        parts.append(_text(x + 14, _BOTTOM + 66.5, name, size=12))
        x += 26 + 6.6 * len(name)
    return parts


def _month_panel(report: VerificationReport) -> list[str]:
    totals = report.totals
    over = "kept" if (totals["over"] == "kept").any() else "all"
    rows = totals[(totals["over"] == over) & (totals["group_kind"] == "month and half-day")]
    y_ticks = _ticks(1.1 * max(float(rows["mae_k"].max()), 0.1))
    axes = _Axes(560, 950, 12.0, y_ticks[-1])
    parts = _frame(axes, y_ticks, "By month, mean over stations")
    for m, name in enumerate(_MONTHS):
        parts.append(_text(axes.x(m + 0.5), _BOTTOM + 20, name, "middle", 12))
    mae = rows.set_index("group")["mae_k"].to_dict()
    for half, shape, colour in (("night", "square", _NIGHT), ("day", "circle", _DAY)):
        values = [mae.get(f"{m:02d} {half}", np.nan) for m in range(1, 13)]
        parts += _curve(axes, values, shape, colour, half)
    parts += _legend(
        560,
        [
            (_mark("circle", 0, 0, _DAY), "day ({}-{} h local standard time)".format(*DAY_HOURS)),
            (_mark("square", 0, 0, _NIGHT), "night"),
        ],
    )
    return parts


def _curve(axes: _Axes, values: Sequence[float], shape: str, colour: str, half: str) -> list[str]:
    """Marks joined by a line, broken where a month has no hours."""
    parts, before = [], None
    for m, value in enumerate(values):
        if not np.isfinite(value):
            before = None
            continue
        here = (axes.x(m + 0.5), axes.y(value))
        if before is not None:
            parts.append(
                f'<line x1="{before[0]:.1f}" y1="{before[1]:.1f}" x2="{here[0]:.1f}" '
                f'y2="{here[1]:.1f}" stroke="{colour}" stroke-width="2"/>'
            )
        tip = f"{_MONTHS[m]}, {half}: {value:.2f} K"
        parts.append(f"<g><title>{tip}</title>{_mark(shape, *here, colour)}</g>")
        before = here
    return parts
