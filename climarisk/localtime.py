"""Time zones: by coordinates, standard offset without daylight saving, clock time to UTC.

References
----------
IANA Time Zone Database, read through `zoneinfo`.
"""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from functools import lru_cache
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np
from numpy.typing import ArrayLike, NDArray

from climarisk.errors import InputError

_DAY_S = 86400
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_EPOCH_CLOCK = datetime(1970, 1, 1)


@lru_cache(maxsize=1)
def _finder() -> Any:
    # The polygons take time to load: only when a zone is asked for.  In memory, because the
    # other way keeps files open until the interpreter ends.
    from timezonefinder import TimezoneFinder

    return TimezoneFinder(in_memory=True)


def timezone_at(latitude: float, longitude: float) -> str:
    """IANA name of the time zone at a place; at sea a fixed ``Etc/GMT`` zone.

    Parameters
    ----------
    latitude : float
        Degrees north, -90 to 90.
    longitude : float
        Degrees east, -180 to 180.

    Returns
    -------
    str

    Raises
    ------
    InputError
        The coordinates are outside these ranges.
    """
    if not (-90.0 <= latitude <= 90.0 and -180.0 <= longitude <= 180.0):
        raise InputError(
            f"latitude {latitude}, longitude {longitude} is no place: latitude is -90 to 90 and "
            "longitude -180 to 180 degrees; correct the coordinates."
        )
    name = _finder().timezone_at(lat=float(latitude), lng=float(longitude))
    if name is None:
        raise InputError(
            f"no time zone is known at latitude {latitude}, longitude {longitude}; name it in "
            "the timezone column."
        )
    return str(name)


@lru_cache(maxsize=256)
def zone_info(zone: str) -> ZoneInfo:
    """The time zone of an IANA name.

    Raises
    ------
    InputError
        There is no zone of this name.
    """
    try:
        return ZoneInfo(zone)
    except (OSError, ValueError, ModuleNotFoundError, LookupError):
        raise InputError(
            f"{zone!r} is not a time zone; give an IANA name such as 'America/Denver'."
        ) from None


def standard_offset_s(zone: str, unix_seconds: ArrayLike) -> NDArray[np.int64]:
    """Offset of local standard time (no daylight saving) from UTC, in seconds.

    Parameters
    ----------
    zone : str
        IANA name.
    unix_seconds : array_like of int, any shape
        Instants, seconds since 1970-01-01 UTC, within the years 1 to 9999.

    Returns
    -------
    ndarray of int64, shape of `unix_seconds`
        Positive east of Greenwich.

    Raises
    ------
    InputError
        There is no zone of this name.

    Notes
    -----
    The zone is evaluated once per UTC day, at 12:00.  Where the database books daylight
    saving as negative (Europe/Dublin), standard is the smaller of the offsets of 1 January
    and 1 July of the year.

    Examples
    --------
    >>> standard_offset_s("America/Denver", [1_720_000_000]).tolist()
    [-25200]
    """
    zone_info(zone)
    seconds = np.asarray(unix_seconds)
    days, inverse = np.unique(np.floor_divide(seconds, _DAY_S), return_inverse=True)
    offsets = np.array([_standard_offset_of_day(zone, int(day)) for day in days], dtype=np.int64)
    return offsets[inverse].reshape(seconds.shape)


@lru_cache(maxsize=200_000)
def _standard_offset_of_day(zone: str, day: int) -> int:
    info = zone_info(zone)
    noon = (_EPOCH + timedelta(days=day, hours=12)).astimezone(info)
    fixed = _offset_where_saving_is_negative(zone, noon.year)
    if fixed is not None:
        return fixed
    return _seconds(noon.utcoffset()) - _seconds(noon.dst())


@lru_cache(maxsize=4096)
def _offset_where_saving_is_negative(zone: str, year: int) -> int | None:
    """Standard offset of a year that has negative daylight saving; None for other years."""
    info = zone_info(zone)
    # Twice a month: the shortest negative spell known, Ramadan in Morocco, lasts a month.
    sampled = [datetime(year, m, d, 12, tzinfo=info) for m in range(1, 13) for d in (1, 15)]
    if all(_seconds(t.dst()) >= 0 for t in sampled):
        return None
    return min(_seconds(datetime(year, m, 1, 12, tzinfo=info).utcoffset()) for m in (1, 7))


def _seconds(delta: timedelta | None) -> int:
    return 0 if delta is None else round(delta.total_seconds())


def clock_to_utc_s(zone: str, clock_seconds: ArrayLike) -> NDArray[np.float64]:
    """UTC instants of legal local clock readings, daylight saving included.

    Parameters
    ----------
    zone : str
        IANA name.
    clock_seconds : array_like of float, shape (n,)
        The reading as if it were UTC, seconds since 1970-01-01; NaN passes through.

    Returns
    -------
    ndarray of float, shape (n,)
        Seconds since 1970-01-01 UTC; NaN where the reading is ambiguous or does not exist.

    Raises
    ------
    InputError
        There is no zone of this name.
    """
    info = zone_info(zone)
    clock = np.asarray(clock_seconds, dtype=float)
    result = np.full(clock.shape, np.nan)
    known = np.flatnonzero(np.isfinite(clock))
    days, inverse = np.unique(np.floor_divide(clock[known], _DAY_S), return_inverse=True)
    # A day is quiet if the offset is the same on the days around it.
    around = [[_offset_at(info, (int(day) + k) * _DAY_S) for k in (-1, 2)] for day in days]
    offsets = np.array(around, dtype=float).reshape(-1, 2)
    quiet = (offsets[:, 0] == offsets[:, 1])[inverse]
    calm = known[quiet]
    result[calm] = clock[calm] - offsets[inverse, 0][quiet]
    for i in known[~quiet]:
        reading = _EPOCH_CLOCK + timedelta(seconds=float(clock[i]))
        first, second = (
            _seconds(reading.replace(tzinfo=info, fold=fold).utcoffset()) for fold in (0, 1)
        )
        if first == second:
            result[i] = clock[i] - first
    return result


def _offset_at(info: ZoneInfo, unix_seconds: int) -> int:
    return _seconds((_EPOCH + timedelta(seconds=unix_seconds)).astimezone(info).utcoffset())
