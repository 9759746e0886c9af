"""Numbers as short texts for the map page: packed arrays in base64, each with its kind.

A kind is a coding and a type.  Types: ``u1`` bytes, ``u2`` and ``i2`` words, which are coded as all
their lower bytes and then all their upper ones.  Codings: none; ``r`` runs: a byte that comes twice
is followed by a third that says how often more; ``h`` prefix codes of the runs; ``d`` prefix codes
of the runs of the differences from byte to byte.
"""

from __future__ import annotations

import base64
import math
from collections.abc import Sequence

import numpy as np
import pandas as pd

from climarisk.outputs.coding import prefix_coded

#: Stand for "no value" in the packed arrays.
NO_BYTE = 255
NO_FEET = -32768
NO_WORD = 65535
#: The longest run that one mark of a run can say.
_LONGEST_RUN = 257


def packed(values: np.ndarray) -> list[str]:
    """The kind of an array and its numbers as base64, in the coding that makes them shortest."""
    kind = {"uint8": "u1", "uint16": "u2", "int16": "i2"}[values.dtype.name]
    little = values.reshape(-1).astype(values.dtype.newbyteorder("<"))
    raw = np.frombuffer(little.tobytes(), np.uint8).reshape(-1, little.itemsize).T.reshape(-1)
    runs = run_lengths(raw)
    steps = run_lengths(np.diff(raw, prepend=np.uint8(0)))
    codings: dict[str, np.ndarray | bytes] = {"": raw, "r": runs}
    codings |= {"h": prefix_coded(runs), "d": prefix_coded(steps)}
    coding, shortest = min(codings.items(), key=lambda item: len(item[1]))
    return [coding + kind, base64.b64encode(bytes(shortest)).decode("ascii")]


def run_lengths(values: np.ndarray) -> np.ndarray:
    """Bytes with each run of two or more as the byte twice and how often more it comes.

    Parameters
    ----------
    values : ndarray of uint8, shape (n,)

    Returns
    -------
    ndarray of uint8
    """
    if not len(values):
        return values
    starts = np.concatenate(([0], np.flatnonzero(np.diff(values.astype(int))) + 1))
    lengths = np.diff(np.concatenate((starts, [len(values)])))
    # A run beyond the longest is said in several marks.
    pieces = -(-lengths // _LONGEST_RUN)
    value = np.repeat(values[starts], pieces)
    length = np.full(len(value), _LONGEST_RUN)
    last = np.cumsum(pieces) - 1
    length[last] = lengths - (pieces - 1) * _LONGEST_RUN
    size = np.where(length == 1, 1, 3)
    marks = np.repeat(value, size)
    ends = np.cumsum(size) - 1
    marks[ends[size == 3]] = length[size == 3] - 2
    return marks


def floats(values: pd.Series) -> pd.Series:
    """The values as plain floats, NaN where one is missing, whichever type the column has."""
    return values.astype("Float64").astype("float64")


def share_levels(bands: Sequence[float], days: Sequence[float] = ()) -> np.ndarray:
    """The shares at which what the page shows of a share changes, rising from zero.

    These are the first share above zero, 1 %, the half per cents at which the whole per cent
    steps, the band edges, and the shares at which the whole days that do not fall short step.
    A share is sent as the number of the level it has reached, in one byte, and still lands in
    the band and at the whole per cent and the whole days of its exact value.

    Parameters
    ----------
    bands : sequence of float
        Edges, 0-1.
    days : sequence of float
        Days that an hour of the day has in a month; the first three different ones serve.
    """
    halves = [(2 * percent + 1) / 200.0 for percent in range(1, 100)]
    steps = [
        math.nextafter(1.0 - left / offered, 1.0)
        for offered in sorted(set(days) - {0.0})[:3]
        for left in range(int(offered) + 1)
    ]
    shares = {0.0, math.ulp(0.0), 0.01, *halves, *bands}
    return np.array(sorted(shares | {s for s in steps if 0.0 < s <= 1.0}))


def share_codes(values: pd.Series, levels: np.ndarray) -> np.ndarray:
    """The number of the last level that each share reaches; `NO_BYTE` without a share."""
    share = floats(values).to_numpy()
    reached = np.searchsorted(levels, np.clip(share, 0.0, 1.0), side="right") - 1
    return np.where(np.isnan(share), NO_BYTE, reached).astype("u1")


def feet(values: pd.Series) -> np.ndarray:
    """Whole feet, rounded down, so that the nearest 100 ft is that of the exact value."""
    exact = floats(values).to_numpy()
    missing = np.isnan(exact)
    whole = np.clip(np.floor(np.where(missing, 0.0, exact)), NO_FEET + 1, -(NO_FEET + 1))
    return np.where(missing, NO_FEET, whole).astype("<i2")


def hundreds(values: pd.Series) -> np.ndarray:
    """Feet as the nearest hundreds, halves up; NaN without a value."""
    return np.floor((floats(values).to_numpy() + 50.0) / 100.0)


def above(values: np.ndarray, base: int) -> np.ndarray:
    """Whole numbers as bytes above a base, 254 at most; `NO_BYTE` for NaN."""
    known = np.clip(values - base, 0, NO_BYTE - 1)
    return np.where(np.isnan(values), NO_BYTE, known).astype("u1")


def counts(values: pd.Series) -> np.ndarray:
    """Small whole numbers as bytes, 254 at most; `NO_BYTE` without a value."""
    exact = floats(values).to_numpy()
    return np.where(np.isnan(exact), NO_BYTE, np.minimum(exact, NO_BYTE - 1)).astype("u1")


def words(values: pd.Series) -> np.ndarray:
    """Whole numbers of hours or steps as words, rounded down; `NO_WORD` without a value."""
    exact = floats(values).to_numpy()
    whole = np.clip(np.floor(np.where(np.isnan(exact), 0.0, exact)), 0, NO_WORD - 1)
    return np.where(np.isnan(exact), NO_WORD, whole).astype("<u2")
