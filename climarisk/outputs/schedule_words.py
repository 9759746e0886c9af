"""What the page of a schedule is made from, and its numbers and texts in words."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.fields import Field
from climarisk.outputs.colours import MOST_EDGES
from climarisk.outputs.report.words import Html, el, given, unbroken
from climarisk.outputs.texts import NO_DATA, grouped, share_text, unique_labels

#: Single dates are told up to so many.
_MOST_DATES = 3
_OPERATIONS = {
    "takeoff": "take-off",
    "landing": "landing",
    "both": "take-off and landing",
}
_ISO = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}")


@dataclass(frozen=True)
class SchedulePage:
    """What every part of the page needs."""

    title: str
    fields: Sequence[Field]
    aircraft: Sequence[AircraftProfile]
    settings: Mapping[str, Any]
    frames: Mapping[str, pd.DataFrame]

    @cached_property
    def flights(self) -> list[dict[str, Any]]:
        """The rows of the flights."""
        return self.frames["schedule_flights"].to_dict("records")

    @cached_property
    def whole(self) -> dict[str, Any]:
        """The row of the whole schedule."""
        return self.frames["schedule_seasons"].to_dict("records")[0]

    @cached_property
    def names(self) -> dict[str, str]:
        """What fields and aircraft are called, by ``field`` or ``aircraft`` and id."""
        named: dict[str, str] = {}
        for kind, things in (("field ", self.fields), ("aircraft ", self.aircraft)):
            ids = [thing.id for thing in things]
            labels = unique_labels([thing.name for thing in things], ids)
            named |= {kind + key: label for key, label in zip(ids, labels, strict=True)}
        return named

    @property
    def edges(self) -> list[float]:
        """Edges of the bands."""
        return [float(edge) for edge in self.settings["bands"]][:MOST_EDGES]

    @property
    def confidence(self) -> str:
        """The confidence of the intervals, as ``90 %``."""
        return f"{round(float(self.settings['confidence']) * 100, 2):g} %"

    @property
    def target(self) -> str:
        """The share below which a time will do, as ``5 %``."""
        return f"{round(float(self.settings['planning']['target']) * 100, 2):g} %"

    @property
    def holds_in(self) -> str:
        """The share of the hours in which a mass has to hold, as ``90 %``."""
        return f"{round(float(self.settings['planning']['holds_in']) * 100, 2):g} %"

    @property
    def years(self) -> str:
        """The years of the record."""
        return f"{self.settings['first_year']} to {self.settings['last_year']}"


def span_text(dates: pd.Series) -> str:
    """The first and the last of some dates."""
    first, last = str(dates.min()), str(dates.max())
    return first if first == last else f"{first} to {last}"


def unknown_of(row: Mapping[str, Any]) -> int:
    """Flights without figures."""
    return int(row["unknown_flights"])


def number_text(flights: float) -> str:
    """An expected number of flights; one decimal below ten."""
    if pd.isna(flights):
        return NO_DATA
    if flights == 0:
        return "0"
    if flights < 0.1:
        return "< 0.1"
    return grouped(round(flights)) if flights >= 9.95 else f"{flights:.1f}"


def numbers_text(low: float, high: float) -> str:
    """An interval of numbers of flights, never narrower than it is."""
    if pd.isna(low) or pd.isna(high):
        return "none"
    step = 1 if high >= 9.95 else 10
    ends = (math.floor(low * step + 1e-9) / step, math.ceil(high * step - 1e-9) / step)
    texts = [grouped(round(end)) if step == 1 else f"{end:g}" for end in ends]
    return texts[0] if texts[0] == texts[1] else "-".join(texts)


def remedy(page: SchedulePage, row: Mapping[str, Any]) -> str:
    """What would help a flight, in a sentence."""
    told = []
    mass = row["mass_that_holds_kg"]
    if not pd.isna(mass) and mass < row["mass_kg"]:
        told.append(f"{mass_text(mass)} holds in {page.holds_in} of the hours")
    shift = row["nearest_shift_h"]
    if not pd.isna(shift) and shift != 0:
        told.append(f"at {row['nearest_time']} {share_text(row['nearest_shortfall'])} fall short")
    if not told:
        return "" if row["outcome"] != "cannot be met" else "No tabulated mass would do."
    text = "; ".join(told)
    return f"{text[0].upper()}{text[1:]}."


def mass_text(mass: float) -> str:
    """A mass in whole kilograms, rounded down."""
    return f"{grouped(math.floor(mass + 1e-9))}\N{NO-BREAK SPACE}kg"


def flights_text(row: Mapping[str, Any]) -> str:
    """The number of flights, and how many of them have no figures."""
    total = grouped(int(row["flights"]))
    return f"{total} ({grouped(unknown_of(row))} unknown)" if unknown_of(row) else total


def flown_words(page: SchedulePage, row: Mapping[str, Any]) -> list[object]:
    """Field, then aircraft, operation and mass."""
    return [
        given(page.names["field " + row["field"]]),
        ", ",
        given(page.names["aircraft " + row["aircraft"]]),
        f", {_OPERATIONS.get(row['operation'], row['operation'])} at {mass_text(row['mass_kg'])}",
    ]


def when_text(row: Mapping[str, Any]) -> Html:
    """The dates as the file gives them; of many single dates the first and how many more."""
    words = str(row["when"]).split()
    if len(words) > _MOST_DATES and all(_ISO.fullmatch(word) for word in words):
        return given(f"{words[0]} and {len(words) - 1} dates more")
    return given(row["when"])


def holding_words(row: Mapping[str, Any]) -> list[object]:
    """The mass that holds, with the useful load."""
    if row["outcome"] == "cannot be met":
        return ["cannot be met at any tabulated mass"]
    mass, load = mass_text(row["mass_that_holds_kg"]), mass_text(row["useful_load_kg"])
    top = " (the maximum)" if row["outcome"] == "maximum mass" else ""
    return [unbroken(mass), top, el("small", f"useful load {load}")]


def nearest_words(row: Mapping[str, Any]) -> list[object]:
    """The nearest time that will do, and how far it is away."""
    shift = row["nearest_shift_h"]
    if pd.isna(shift):
        return ["none within 12 h"]
    if shift == 0:
        return ["as planned"]
    hours = int(abs(shift))
    side = "earlier" if shift < 0 else "later"
    share = share_text(row["nearest_shortfall"])
    return [unbroken(row["nearest_time"]), el("small", f"{hours} h {side}, {share}")]
