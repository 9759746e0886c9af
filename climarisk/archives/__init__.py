"""Archive readers: one module per format, and the table of their names.

Every reader returns an `ArchiveFile`: the canonical hourly table, what the file says of its
station, and notes.  To add a format write a module with ``parse_x`` and ``read_x`` and add
one line to `FORMATS`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from climarisk.archives import asos, ghcnh, inmet, isd_lite, lcd, typical_year
from climarisk.archives.mapping import ColumnMapping, parse_mapped, parse_mapping, read_mapping
from climarisk.errors import InputError
from climarisk.inputs import nearest
from climarisk.observations import ArchiveFile

__all__ = [
    "FORMATS",
    "ColumnMapping",
    "Format",
    "parse_archive",
    "parse_mapped",
    "parse_mapping",
    "read_mapping",
]


@dataclass(frozen=True)
class Format:
    """One archive format.

    Parameters
    ----------
    parse : callable
        ``parse(data, name)`` gives an `ArchiveFile`.
    version : int
        Raised whenever the parser's results change; part of the store's key.
    source : str
        Publisher or attribution, where the file does not tell more.
    """

    parse: Callable[[bytes, str], ArchiveFile]
    version: int
    source: str


#: The built-in formats by the name used in the archive column of stations.csv.
FORMATS: dict[str, Format] = {
    "inmet": Format(inmet.parse_inmet, inmet.VERSION, inmet.SOURCE),
    "epw": Format(typical_year.parse_epw, typical_year.VERSION, typical_year.EPW_SOURCE),
    "tmy3": Format(typical_year.parse_tmy3, typical_year.VERSION, typical_year.TMY3_SOURCE),
    "isd-lite": Format(isd_lite.parse_isd_lite, isd_lite.VERSION, isd_lite.SOURCE),
    "lcd": Format(lcd.parse_lcd, lcd.VERSION, lcd.SOURCE),
    "asos": Format(asos.parse_asos, asos.VERSION, asos.SOURCE),
    "ghcnh": Format(ghcnh.parse_ghcnh, ghcnh.VERSION, ghcnh.SOURCE),
}


def parse_archive(
    data: bytes,
    archive: str,
    name: str,
    mapping: ColumnMapping | None = None,
    zone: str | None = None,
) -> ArchiveFile:
    """The hours of an archive file of a built-in format or of a column mapping.

    Parameters
    ----------
    data : bytes
        Content of the file, plain or gzip.
    archive : str
        Name of a built-in format; not looked at where `mapping` is given.
    name : str
        Name of the file, for messages.
    mapping : ColumnMapping, optional
        How to read delimited text.
    zone : str, optional
        IANA name of the station's time zone, for the one format in local standard time
        (``lcd``); default: that at the file's coordinates.

    Raises
    ------
    ArchiveError
        The file cannot be read as this format.
    InputError
        There is no format of this name.
    """
    if mapping is not None:
        return parse_mapped(data, mapping, name)
    if archive not in FORMATS:
        raise InputError(
            f"{name}: the archive {archive!r} is not known; {nearest(archive, FORMATS)} "
            "(or give the path of a column mapping that ends in .toml)"
        )
    if archive == lcd.FORM:
        return lcd.parse_lcd(data, name, zone=zone)
    return FORMATS[archive].parse(data, name)
