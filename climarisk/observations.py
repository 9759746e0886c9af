"""The canonical hourly table: what every archive reader returns.

Index: ``time``, UTC instants at full hours, strictly increasing, unique.
Columns: see `COLUMNS`.  Values are as reported (converted to the unit in the name),
before quality control; a missing value is NaN.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import pandas as pd

from climarisk.errors import ArchiveError
from climarisk.findings import Severity

#: Columns of the canonical table and what they hold.
COLUMNS: dict[str, str] = {
    "temperature_c": "air temperature, degC",
    "dew_point_c": "dew point with respect to water, degC",
    "relative_humidity_pct": "relative humidity with respect to water, %, as reported",
    "station_pressure_hpa": "pressure at the station, hPa",
    "qnh_hpa": "altimeter setting (QNH), hPa",
    "sea_level_pressure_hpa": "mean sea-level pressure (QFF), hPa",
    "wind_direction_deg": "direction the wind blows from, degrees true",
    "wind_speed_kt": "wind speed, kt",
}
PRESSURE_COLUMNS = ("station_pressure_hpa", "qnh_hpa", "sea_level_pressure_hpa")

#: What a reader has to say of a file: severity, check, message.
Note = tuple[Severity, str, str]

_HALF_HOUR = pd.Timedelta(minutes=30)


@dataclass(frozen=True)
class ArchiveFile:
    """The hours of one archive file, with what the file says about its station.

    Parameters
    ----------
    hours : DataFrame, shape (n_hours, 8)
        The canonical table.
    source : str
        Where the data come from: publisher, licence or attribution if known.
    station_id, station_name : str or None
    latitude, longitude : float or None
        Degrees north and east, as the file states them.
    elevation_m : float or None
        Metres above mean sea level, as the file states it.
    typical_year : bool
        The file is a typical year: each month is a real month of a different year.
    notes : tuple of (severity, check, message)
        What the reader has to say of damaged lines, dropped reports and the like;
        severity is ``note``, ``caution`` or ``reject``.
    """

    hours: pd.DataFrame
    source: str
    station_id: str | None = None
    station_name: str | None = None
    latitude: float | None = None
    longitude: float | None = None
    elevation_m: float | None = None
    typical_year: bool = False
    notes: tuple[Note, ...] = field(default=())


def empty_hours() -> pd.DataFrame:
    """The canonical table with no rows."""
    index = pd.DatetimeIndex([], tz="UTC", name="time").as_unit("s")
    return pd.DataFrame({name: np.empty(0) for name in COLUMNS}, index=index)


def assign_to_hours(reports: pd.DataFrame) -> tuple[pd.DataFrame, int]:
    """One report per full hour: the one nearest HH:00 within 30 minutes.

    A report that carries temperature, humidity and a pressure is preferred over one that
    does not, whatever their distance from the hour; among equals the nearest wins, then
    the earlier, then the one that comes first.  Reports with no air temperature are left
    out.  A report at HH:30 belongs to the following hour.

    Parameters
    ----------
    reports : DataFrame, shape (n_reports, ...)
        Index: UTC instants, any order, repeats allowed.  Columns: any of `COLUMNS`.

    Returns
    -------
    hours : DataFrame
        The canonical table.
    repeated : int
        Reports with an air temperature dropped because another one has the same instant.

    Raises
    ------
    ArchiveError
        A column is unknown or the index is not in UTC.
    """
    unknown = sorted(set(reports.columns) - set(COLUMNS))
    if unknown:
        raise ArchiveError(f"the reports have unknown columns {unknown}; known: {list(COLUMNS)}")
    if not isinstance(reports.index, pd.DatetimeIndex) or str(reports.index.tz) != "UTC":
        raise ArchiveError("the reports must be indexed by instants in UTC")
    if not len(reports):
        return empty_hours(), 0
    table = reports.reindex(columns=list(COLUMNS)).astype(float)
    table = table[(table["temperature_c"].notna() & table.index.notna()).to_numpy()]
    instants = table.index.as_unit("s")
    repeated = int(instants.duplicated().sum())
    hour = (instants + _HALF_HOUR).floor("h")
    distance_s = np.abs((instants - hour).total_seconds().to_numpy())
    humidity = table["dew_point_c"].notna() | table["relative_humidity_pct"].notna()
    pressure = table[list(PRESSURE_COLUMNS)].notna().any(axis=1)
    incomplete = (~(humidity & pressure)).to_numpy()
    # lexsort: last key first; the running number keeps the file's order among ties.
    order = np.lexsort((np.arange(len(table)), instants.asi8, distance_s, incomplete, hour.asi8))
    table = table.iloc[order].set_axis(hour[order].rename("time"), axis=0)
    return table[~table.index.duplicated(keep="first")], repeated


def join_files(files: list[ArchiveFile]) -> tuple[pd.DataFrame, int]:
    """The hours of several files of one station as one table, and how many overlapped.

    Where two files hold the same hour the first file's row is kept.
    """
    tables = [f.hours for f in files if len(f.hours)]
    if not tables:
        return empty_hours(), 0
    joined = pd.concat(tables)
    duplicated = joined.index.duplicated(keep="first")
    return joined[~duplicated].sort_index(), int(duplicated.sum())
