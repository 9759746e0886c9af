"""What the page of a schedule is made from, and its numbers and texts in words."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.fields import Field
from climarisk.outputs.colours import MOST_EDGES
from climarisk.outputs.report.tables import STEEP_MARK
from climarisk.outputs.report.words import Html, el, given, unbroken
from climarisk.outputs.texts import (
    STEEP_TAIL,
    grouped,
    mass_text,
    no_time_text,
    operation_text,
    share_text,
    unique_labels,
)

#: Single dates are told up to so many.
_MOST_DATES = 3
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


def count_words(row: Mapping[str, Any]) -> str:
    """The number of flights, and how many of them have no figures."""
    total = grouped(int(row["flights"]))
    return f"{total} ({grouped(unknown_of(row))} unknown)" if unknown_of(row) else total


def field_words(page: SchedulePage, row: Mapping[str, Any]) -> list[object]:
    """The name of the field of a flight, told where no figure is a pass."""
    return [given(page.names["field " + row["field"]]), STEEP_TAIL if is_steep(row) else ""]


def is_steep(row: Mapping[str, Any]) -> bool:
    """Whether no figure of a row is a pass."""
    return bool(row["steep"] == "yes")


def flown_words(page: SchedulePage, row: Mapping[str, Any]) -> list[object]:
    """Aircraft, operation and mass."""
    return [
        given(page.names["aircraft " + row["aircraft"]]),
        f", {operation_text(row['operation'])} at ",
        unbroken(mass_text(row["mass_kg"])),
    ]


def place_cell(page: SchedulePage, row: Mapping[str, Any]) -> Html:
    """The field with its mark, below it what is flown."""
    mark = [" ", el("small", STEEP_MARK, class_="mark")] if is_steep(row) else []
    name = given(page.names["field " + row["field"]])
    return el("td", name, mark, el("small", flown_words(page, row)))


def note_words(row: Mapping[str, Any]) -> list[Html]:
    """What is to be known of the time of a flight, in small letters."""
    note = row["note"]
    return [el("small", note)] if isinstance(note, str) and note else []


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
        return [no_time_text(row["note"])]
    if shift == 0:
        return ["as planned"]
    hours = int(abs(shift))
    side = "earlier" if shift < 0 else "later"
    share = share_text(row["nearest_shortfall"])
    return [unbroken(row["nearest_time"]), el("small", f"{hours} h {side}, {share}")]
