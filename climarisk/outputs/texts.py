"""Words and numbers as people read them: the same in the map, the workbook and the report."""

from __future__ import annotations

import math
import unicodedata
from collections import Counter
from collections.abc import Callable, Mapping, Sequence
from fractions import Fraction
from typing import Any

import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.results import StudyResult
from climarisk.schedule import NEAREST_NOT_TOLD

#: What every output says about its own limits; the first one stands at the top.
CAUTIONS = (
    "Planning and comparison aid based on past weather. It is not a take-off or landing "
    "calculation and is not approved by any authority. The approved flight manual of the "
    "individual aeroplane, current weather and the judgement of the pilot in command always "
    "govern; local rules and licensed practice apply.",
    "Shares and percentiles describe the record used, not a forecast; a rare hot day can "
    "exceed every value shown. An hour without data is left out: it is never counted as "
    "an hour without risk.",
    "Distances come from the figures supplied with the study. Profiles without a table are "
    "scaled by generic rules and marked; nothing is calculated beyond the last row of a table.",
    "Weather at a field without a station of its own is estimated from stations nearby; the "
    "error may be larger in closed valleys and at night.",
    "Runway data may be incomplete or out of date; verify them in the current aeronautical "
    "publication and with the operator. Strips steeper than 2 % need a site-specific "
    "procedure and instruction.",
    "A mass that held in past weather is not a permitted mass: the flight manual, the loading and "
    "the fuel of the day decide. Landing is reckoned at the take-off mass.",
    "Carburettor-icing shares use surface air and a generic chart, or a screening that is an "
    "engineering assumption; engines differ. The zones of the chart are a reconstruction from "
    "memory, each corner uncertain by 2 to 3 K, and were not checked against the official chart. "
    "Hours with temperature and dew point close together are no forecast of fog or low cloud.",
    "Commercial, instructional or insurance decisions should be reviewed by a suitably "
    "qualified person.",
)

#: How the figures come about, in the order of the work.
METHOD = (
    "Every hour of the record gives one value of the air at the field and, for each aircraft,"
    " one margin per check: distance or climb available against required times the operator’s"
    " factors, in still air, in the most favourable direction that may be used. An hour falls"
    " short when a margin is negative, a stated limit is passed, or the air is hotter or "
    "higher than the table (“outside table”).",
    "Density altitude is the altitude of the International Standard Atmosphere with the same "
    "air density, moisture included. It is computed hour by hour and only then ordered into "
    "percentiles (Hyndman and Fan type 8), by month and hour of local standard time; clock "
    "changes are not applied. An hour is the nearest full hour.",
    "A year counts for a month and hour when at least 80 % of its days have a value there; of a "
    "month or a season the number of years with any such hour is shown, and beside it the share "
    "of the period’s cells that count. A cell below the rule is “no data”: it does not mean no "
    "risk. Intervals come from resampling whole years; from too few years there is none.",
    "Air estimated from stations nearby carries an error, learned by hiding stations that are"
    " near the fields and estimating them from the others. Percentiles, shares and intervals "
    "include it; the central share does not.",
    "Trends by season are Theil-Sen slopes with the Mann-Kendall test, corrected for "
    "autocorrelation; a step beside the trend may be a station move. Return levels are a "
    "generalised extreme-value distribution fitted to annual maxima by L-moments, to twice "
    "the length of the record at most.",
    "The mass that holds is found hour by hour: the largest at which every check of take-off, "
    "climb and landing holds, linear between the tabulated masses and never beyond them; the "
    "figure is the one that the stated share of the hours allows.",
    "Power is what the air leaves at full throttle: Gagg and Ferrar on the density of the dry "
    "part of the air, with the more favourable of that and SAE J1349 as the optimistic figure; "
    "mixture, ignition and engine condition are not in it.",
    "Shown here: density altitude to the nearest 100 ft, shares to the whole per cent, “< 1 "
    "%” for anything above zero and below one. The CSV files hold the unrounded values.",
)

MONTH_NAMES = (
    "January",
    "February",
    "March",
    "April",
    "May",
    "June",
    "July",
    "August",
    "September",
    "October",
    "November",
    "December",
)
MONTHS = tuple(name[:3] for name in MONTH_NAMES)
NO_DATA = "no data"
#: From this many feet on (one standard deviation) the doubt about the pressure is told wherever the
#: doubt about the air is: the pressure is then not measured well, or not at all (our choice).
PRESSURE_TOLD_FT = 20.0
#: In place of a better time for a flight, and beside the name of a field where no figure is a pass.
NO_TIME, NO_TIME_TOLD, STEEP_TAIL = "none within 12 h", "cannot be told", " (steep)"
#: The band of carburettor icing that tells places apart, called so everywhere.
ICING_SERIOUS = "serious even in cruise"
_OPERATIONS = {"takeoff": "take-off", "landing": "landing", "both": "take-off and landing"}
_MINUS = "\N{MINUS SIGN}"


def share_text(share: float) -> str:
    """A share 0-1 in whole per cent; ``< 1 %`` for anything above zero and below one."""
    if math.isnan(share):
        return NO_DATA
    if 0.0 < share < 0.01:
        return "< 1 %"
    # 0.045 is a little below 9/200 as a float; the share it stands for is not.
    return f"{math.floor(Fraction(round(share * 10**8), 10**6) + Fraction(1, 2))} %"


def interval_text(low: float, high: float) -> str:
    """An interval of a share, as ``4-12 %`` or ``0 %``; ``none`` where there is none."""
    if math.isnan(low) or math.isnan(high):
        return "none"
    first, last = (share_text(share).replace("< ", "<") for share in (low, high))
    if first == last:
        return share_text(low)
    return f"{first.removesuffix(' %')}-{last}"


def altitude_text(feet: float) -> str:
    """A density altitude to the nearest 100 ft, with its unit."""
    if math.isnan(feet):
        return NO_DATA
    return f"{grouped(math.floor(Fraction(feet) / 100 + Fraction(1, 2)) * 100)} ft"


def grouped(whole: int) -> str:
    """A whole number with commas between the thousands and a proper minus sign."""
    return f"{whole:,}".replace("-", _MINUS)


def hour_text(hour: int) -> str:
    """An hour of the day, as ``07:00``."""
    return f"{hour:02d}:00"


def window_text(window: str | Sequence[int]) -> str:
    """The hours window of a study, as in its settings."""
    if isinstance(window, str):
        return "all hours" if window == "all" else window
    return " to ".join(hour_text(int(hour)) for hour in window)


def band_labels(edges: Sequence[float]) -> list[str]:
    """Names of the shortfall bands by their numbers: ``< 1 %``, ``1-5 %``, ``20 % or more``."""
    words = [f"{round(edge * 100, 2):g}" for edge in edges]
    between = [f"{low}-{high} %" for low, high in zip(words, words[1:], strict=False)]
    return [f"< {words[0]} %", *between, f"{words[-1]} % or more"]


def band_of(share: float, edges: Sequence[float]) -> int:
    """The number of the band a share lies in, 0 being the lowest; -1 without a share."""
    return -1 if math.isnan(share) else sum(share >= edge for edge in edges)


def worst_months(shares: Sequence[float]) -> list[int]:
    """Places (0-11) of the months whose share is the largest; none without any share."""
    known = [(share, month) for month, share in enumerate(shares) if not math.isnan(share)]
    worst = max(known, default=(math.nan, 0))[0]
    return [month for share, month in known if share == worst]


def months_text(months: Sequence[int]) -> str:
    """Months in words, those that tie told: ``July``, ``June, July``, ``every month``."""
    if len(months) == len(MONTH_NAMES):
        return "every month"
    if len(months) > 2:
        return f"{MONTH_NAMES[months[0]]} and {len(months) - 1} months more"
    return ", ".join(MONTH_NAMES[month] for month in months)


def short_months(months: Sequence[int]) -> str:
    """Months for a narrow cell: ``Jul``, ``Jan, Apr``, ``Jun and 3 more``, ``every month``."""
    if len(months) == len(MONTHS):
        return months_text(months)
    if len(months) > 2:
        return f"{MONTHS[months[0]]} and {len(months) - 1} more"
    return ", ".join(MONTHS[month] for month in months)


def field_labels(result: StudyResult) -> list[str]:
    """How the fields are called: by name, and by id too where names look the same."""
    return unique_labels([f.name for f in result.fields], [f.id for f in result.fields])


def aircraft_labels(result: StudyResult) -> list[str]:
    """How the aircraft are called, in the same way."""
    return unique_labels([a.name for a in result.aircraft], [a.id for a in result.aircraft])


def unique_labels(names: Sequence[str], ids: Sequence[str]) -> list[str]:
    """The names, each followed by its id where another one looks the same."""
    plain = [" ".join(name.split()) for name in names]
    looks = Counter(_look(name) for name in plain)
    return [
        name if _look(name) and looks[_look(name)] == 1 else f"{_visible(name)} ({key})".strip()
        for name, key in zip(plain, ids, strict=True)
    ]


def _look(name: str) -> str:
    """A name without what no reader sees: case, composition, characters without width."""
    return _visible(unicodedata.normalize("NFC", name)).casefold()


def _visible(text: str) -> str:
    return "".join(c for c in text if not invisible(c))


def invisible(character: str) -> bool:
    """Whether a character is a format mark: no width, or a direction for what follows it."""
    return unicodedata.category(character) == "Cf"


#: Takes back the error of a product of floats: 0.29 * 100 is below 29.
_SLACK = 1e-9
#: Edges of the classes of a useful load, as shares of the one at maximum mass (our choice), and
#: what the classes are called, the lightest load last.
_LOAD_EDGES = (0.75, 0.5, 0.25)
LOAD_LABELS = ("all of it", "75 % or more", "50-75 %", "25-50 %", "< 25 %", "cannot be met")


def mass_text(kilograms: float) -> str:
    """A mass in whole kilograms, rounded down: never more than holds."""
    return NO_DATA if math.isnan(kilograms) else f"{grouped(whole_down(kilograms))} kg"


def whole_down(value: float) -> int:
    """The whole number below a value, which may itself lie a hair below a whole one."""
    return math.floor(value + _SLACK * max(1.0, abs(value)))


def whole_up(value: float) -> int:
    """The whole number above a value, which may itself lie a hair above a whole one."""
    return -whole_down(-value)


def load_class(share: float, outcome: str) -> int:
    """The place of a useful load in `LOAD_LABELS`; -1 without data.

    Parameters
    ----------
    share : float
        Of the useful load at maximum mass.
    outcome : str
        As in the frames of the weights.
    """
    if outcome == LOAD_LABELS[-1]:
        return len(LOAD_LABELS) - 1
    if math.isnan(share):
        return -1
    return 0 if outcome == "maximum mass" else 1 + sum(share < edge for edge in _LOAD_EDGES)


def hours_text(hours: float) -> str:
    """Usable hours, rounded down: never more than there are."""
    return "" if math.isnan(hours) else f"{grouped(whole_down(hours))}\N{NARROW NO-BREAK SPACE}h"


def hours_interval(low: float, high: float) -> str:
    """An interval of usable hours in whole ones, outwards; one number where both ends are it."""
    first, last = grouped(whole_down(low)), grouped(whole_up(high))
    return first if first == last else f"{first}-{last}"


def tenths_text(value: float) -> str:
    """A number of flights or hours to the nearest: to a tenth below ten, else whole."""
    if 0.0 < abs(value) < 0.05 - _SLACK:
        return f"< {_MINUS if value < 0.0 else ''}0.1"
    return _tenths(nearest(value))


def affected_text(row: Mapping[str, Any]) -> str:
    """How many of a flight's flights are expected to fall short, and how many have no figures.

    Parameters
    ----------
    row : mapping
        ``affected``, ``flights`` and ``unknown_flights``.
    """
    unknown = int(row["unknown_flights"])
    known = grouped(int(row["flights"]) - unknown)
    rest = f" with figures, {grouped(unknown)} without" if unknown else ""
    return f"{flights_text(float(row['affected']))} of {known}{rest}"


def no_time_text(note: object) -> str:
    """Why a flight has no better time: there is none, or it cannot be told."""
    return NO_TIME_TOLD if isinstance(note, str) and NEAREST_NOT_TOLD in note else NO_TIME


def nearest(value: float) -> float:
    """The tenth nearest to a value below ten, halves upwards, else the whole number."""
    return _stepped(value, lambda v: math.floor(v + 0.5 + _SLACK))


def outwards(low: float, high: float) -> tuple[float, float]:
    """The ends of an interval to a tenth below ten, else whole, as wide as they leave it."""
    return _stepped(low, whole_down), _stepped(high, whole_up)


def _stepped(value: float, whole: Callable[[float], int]) -> float:
    tenth = whole(value * 10.0) / 10.0
    return tenth if abs(tenth) < 10.0 else float(whole(value))


def _tenths(value: float) -> str:
    """A number that `nearest` or `outwards` gave, in words."""
    if value == 0.0:
        return "0"
    return f"{value:.1f}".replace("-", _MINUS) if abs(value) < 10.0 else grouped(round(value))


def flights_text(flights: float) -> str:
    """Flights expected to fall short, to the nearest: to a tenth below ten, else whole."""
    return NO_DATA if pd.isna(flights) else tenths_text(flights)


def flights_interval(low: float, high: float) -> str:
    """An interval of a number of flights, rounded outwards; ``none`` where there is none."""
    if pd.isna(low) or pd.isna(high):
        return "none"
    first, last = map(_tenths, outwards(low, high))
    return first if first == last else f"{first}-{last}"


def gap_text(hours: float) -> str:
    """Hours of a difference, to the nearest: to a tenth below ten, else whole."""
    return f"{tenths_text(hours)} h"


def gap_interval(low: float, high: float) -> str:
    """The interval of a difference in hours, rounded outwards."""
    first, last = map(_tenths, outwards(low, high))
    return first if first == last else f"{first} to {last}"


def told_apart(low: float, high: float) -> bool:
    """Whether the unrounded interval of a difference leaves zero out."""
    return not low <= 0.0 <= high


def good_share(share: float) -> float:
    """The share of something good in whole per cent, rounded down: only all of it is all."""
    if math.isnan(share) or share < 0.01:
        return share
    return 1.0 if share >= 1.0 else min(whole_down(share * 100.0), 99) / 100.0


def good_share_text(share: float) -> str:
    """The same in words."""
    return share_text(good_share(share))


def operation_text(operation: str) -> str:
    """The operations of a flight in words."""
    return _OPERATIONS.get(operation, operation)


def ranges_text(hours: str) -> str:
    """Hours of the day as the windows have them, ``06-10 18``, for people: ``06-10, 18``."""
    return ", ".join(hours.split())


def icing_basis(method: str, verified: str) -> str:
    """What the shares of carburettor icing rest on, told wherever such a figure stands."""
    if method == "physical":
        return "screening, no published chart"
    return "chart verified" if verified == "yes" else "chart not verified"


def schedule_words(
    flights: pd.DataFrame | None, seasons: pd.DataFrame | None, confidence: float
) -> tuple[str, ...]:
    """What a schedule comes to, a sentence each; none without a schedule.

    Parameters
    ----------
    flights, seasons : DataFrame or None
        ``schedule_flights`` and ``schedule_seasons`` of a result.
    confidence : float

    Returns
    -------
    tuple of str
        How many flights are expected to fall short, with the interval; then, where there are
        any, those without figures and those that can never be met.
    """
    if flights is None or seasons is None or seasons.empty:
        return ()
    whole = seasons.iloc[0]  # the first row is the whole schedule
    planned, unknown = int(whole["flights"]), int(whole["unknown_flights"])
    if unknown >= planned:
        return (f"None of the {_flights(planned)} has figures: that does not mean no risk.",)
    sure = f"{round(confidence * 100, 2):g} %"
    ends = flights_interval(float(whole["ci_low"]), float(whole["ci_high"]))
    of = f"the {_flights(planned - unknown)} with figures" if unknown else _flights(planned)
    words = [
        f"{flights_text(float(whole['affected']))} of {of} are expected to fall short "
        f"({'too few years for an interval' if ends == 'none' else f'{sure}: {ends}'})."
    ]
    if unknown:
        have = "has" if unknown == 1 else "have"
        words.append(f"{_flights(unknown)} {have} no figures: that does not mean no risk.")
    never = int(flights["flights"][flights["never_met"] == "yes"].sum())
    if never:
        words.append(f"{grouped(never)} can never be met at the mass planned.")
    return tuple(words)


def _flights(count: int) -> str:
    return f"{grouped(count)} flight{'' if count == 1 else 's'}"


def engine_groups(result: StudyResult) -> dict[str, list[AircraftProfile]]:
    """Engines that the air treats differently by what they are called, each with its aircraft."""
    engines: dict[str, list[AircraftProfile]] = {}
    for profile in result.aircraft:
        name = "naturally aspirated" if profile.aspiration == "natural" else profile.aspiration
        if profile.aspiration == "turbocharged" and profile.critical_altitude_ft is not None:
            name += f" to {profile.critical_altitude_ft:,.0f} ft"
        engines.setdefault(name, []).append(profile)
    return engines
