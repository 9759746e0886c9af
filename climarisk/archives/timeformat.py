"""Time formats of a column mapping: directives as in ``strptime``, hour 24 allowed.

References
----------
ISO/IEC 9899 ``strftime`` and POSIX ``strptime``: meaning of the directives; two-digit years
69 to 99 are of the 1900s, 00 to 68 of the 2000s (POSIX).
"""

from __future__ import annotations

import re

import numpy as np

from climarisk.archives.text import clock_seconds

#: Patterns of the directives a time format may use.
_DIRECTIVES = {
    "Y": r"(?P<Y>[0-9]{4})",
    "y": r"(?P<y>[0-9]{2})",
    "m": r"(?P<m>[0-9]{1,2})",
    "b": r"(?P<b>[A-Za-z]{3})",
    "d": r"(?P<d>[0-9]{1,2})",
    "j": r"(?P<j>[0-9]{1,3})",
    "H": r"(?P<H>[0-9]{1,2})",
    "I": r"(?P<I>[0-9]{1,2})",
    "p": r"(?P<p>[AaPp][Mm])",
    "M": r"(?P<M>[0-9]{2})",
    "S": r"(?P<S>[0-9]{2})",
    "%": "%",
}
_MONTHS = ("jan", "feb", "mar", "apr", "may", "jun", "jul", "aug", "sep", "oct", "nov", "dec")


def clock_of_format(text: str, pattern: re.Pattern[str], last_hour: int) -> float:
    """Seconds from 1970-01-01 to a clock reading; NaN if it does not fit the format.

    Parameters
    ----------
    text : str
    pattern : compiled pattern
        Of `format_pattern`.
    last_hour : int
        23, or 24 where the label is the end of the hour.
    """
    match = pattern.fullmatch(text)
    if match is None:
        return np.nan
    part = match.groupdict()
    hour = int(part.get("H") or 0)
    if "I" in part:
        hour = int(part["I"]) % 12 + (12 if part["p"].lower() == "pm" else 0)
    if hour > last_hour:
        return np.nan
    # Two-digit years as POSIX: 69 to 99 are 19xx.
    short = int(part.get("y") or 0)
    year = int(part.get("Y") or (1900 if short >= 69 else 2000) + short)
    if "j" in part:
        days = (int(part["j"]) - 1) * 86400.0
        month, day = 1, 1
        if not 1 <= int(part["j"]) <= 366:
            return np.nan
    else:
        days, day = 0.0, int(part["d"])
        name = (part.get("b") or "").lower()
        month = int(part.get("m") or (_MONTHS.index(name) + 1 if name in _MONTHS else 0))
    minute, second = int(part.get("M") or 0), int(part.get("S") or 0)
    return clock_seconds(year, month, day, hour, minute, second) + days


def format_pattern(text: str) -> re.Pattern[str]:
    """A time format as a pattern.

    Raises
    ------
    ValueError
        A directive is unknown or repeated, or the date is not complete.
    """
    pieces: list[str] = []
    used: list[str] = []
    for plain, directive in re.findall(r"([^%]*)(%.?)?", text):
        pieces.append(re.escape(plain))
        if directive:
            if directive[1:] not in _DIRECTIVES:
                known = ", ".join(f"%{d}" for d in _DIRECTIVES)
                raise ValueError(f"the directive {directive!r} is not known; allowed: {known}")
            used.append(directive[1:])
            pieces.append(_DIRECTIVES[directive[1:]])
    named = [d for d in used if d != "%"]
    if len(set(named)) < len(named):
        raise ValueError("a directive comes twice; use each once")
    day = "j" in named or ("d" in named and ("m" in named or "b" in named))
    if not (("Y" in named) != ("y" in named) and day):
        raise ValueError("the date is not complete: %Y (or %y), %m (or %b) and %d are needed")
    if ("H" in named) == ("I" in named) or ("I" in named) != ("p" in named):
        raise ValueError("the hour is not clear: use %H, or %I with %p")
    return re.compile("".join(pieces))
