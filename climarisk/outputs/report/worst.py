"""The worst month of an aircraft at a field, with all the months that are as bad."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from climarisk.outputs.report.data import N_MONTHS, Figures
from climarisk.outputs.texts import interval_text, share_text, worst_months
from climarisk.rules import YEARS

#: A share of hours outside the table is told beside the limiting check from here on.
_TOLD_OUTSIDE = 0.01
#: Coverage is told where less than this share of the period's year x hour cells counts.
LOW_COVERAGE = 0.8


@dataclass(frozen=True)
class Worst:
    """The largest monthly share of an aircraft at a field.

    Parameters
    ----------
    months : tuple of int
        Places (0-11) of the months that have it.
    share : float
        0-1.
    interval : str
        The widest over these months, as `interval_words` puts it.
    coverage : float
        The lowest of these months, 0-1.
    limits : tuple of str
        The limiting checks of these months, each once.
    outside : str
        What lies outside the table, in words; empty where that is next to nothing.
    """

    months: tuple[int, ...]
    share: float
    interval: str
    coverage: float
    limits: tuple[str, ...]
    outside: str


def worst_of(figures: Figures, field: int, aircraft: int) -> Worst | None:
    """The worst month, or the equally bad ones; None without data."""
    months = worst_months(figures.shares[field, aircraft].tolist())
    if not months:
        return None
    at = {name: values[field, aircraft, months] for name, values in figures.risk.items()}
    limits = (str(text) for text in figures.limiting[field, aircraft, months])
    return Worst(
        tuple(months),
        float(at["shortfall"][0]),
        interval_words(
            float(at["ci_low"].min()), float(at["ci_high"].max()), float(at["n_years"].min())
        ),
        float(at["coverage"].min()),
        tuple(dict.fromkeys(text for text in limits if text)),
        _outside(at["outside_table"]),
    )


def _outside(shares: np.ndarray) -> str:
    most = float(shares.max())
    if not most >= _TOLD_OUTSIDE:
        return ""
    up_to = "up to " if share_text(float(shares.min())) != share_text(most) else ""
    return f"{up_to}{share_text(most)} outside table"


def interval_words(low: float, high: float, years: float) -> str:
    """An interval with a star where it rests on few years, or why there is none."""
    if math.isnan(low) or math.isnan(high):
        return "too few years" if years < YEARS.interval else "no interval"
    return interval_text(low, high) + ("*" if years < YEARS.settled_interval else "")


def coverage_text(shares: Sequence[float]) -> str:
    """The range of some coverages where any is low; empty where none is."""
    known = [share for share in shares if not math.isnan(share)]
    if not known or min(known) >= LOW_COVERAGE:
        return ""
    shown = interval_text(min(known), max(known)).replace(" ", "\N{NO-BREAK SPACE}")
    return f"coverage\N{NO-BREAK SPACE}{shown}"


def low_coverage(figures: Figures) -> bool:
    """Whether any month with a share has a low coverage."""
    known = ~np.isnan(figures.shares)
    return bool((figures.risk["coverage"][:, :, :N_MONTHS][known] < LOW_COVERAGE).any())
