"""The verification report as files: a table, a picture and plain words."""

from __future__ import annotations

import textwrap
from pathlib import Path

import pandas as pd

from climarisk.outputs.verification_picture import svg_text
from climarisk.outputs.writing import write_files, write_texts
from climarisk.verification import (
    SCORE_COLUMNS,
    SINGLED_OUT_FACTOR,
    VerificationReport,
    clean,
    unverifiable,
)
from climarisk.verification_scores import CELL_HOURS, LIMIT_SHARE

#: Decimals by the end of a column's name; the others are counts and texts.
_DECIMALS = {"_k": 3, "_ft": 1, "_rate": 4, "_fixed": 4, "_nearest": 4, "_80": 4, "_central": 3}
_SCOPES = {"kept": "mean without singled out", "all": "mean of all"}
_TEXT_COLUMNS = 100


def write_verification(report: VerificationReport, folder: Path) -> list[Path]:
    """Write ``verification.csv``, ``.svg`` and ``.txt``; the folder is made, other files stay.

    All are written beside the folder first and moved into place when the last is complete.

    Parameters
    ----------
    report : VerificationReport
    folder : Path

    Returns
    -------
    list of Path
        The files written.

    Raises
    ------
    OutputError
        The folder cannot be written.
    """
    texts = {
        "verification.csv": csv_text(report),
        "verification.svg": svg_text(report),
        "verification.txt": plain_text(report),
    }
    return write_files(folder, lambda staging: write_texts(staging, texts))


def csv_text(report: VerificationReport) -> str:
    """Every station's scores, then the means over stations, as one CSV table.

    ``scope`` is ``station`` or says which mean a row is; ``singled_out`` belongs to stations.
    """
    single = report.stations.set_index("station")["singled_out"].map({True: "yes", False: "no"})
    stations = report.scores.assign(
        scope="station", n_stations=1, singled_out=report.scores["station"].map(single)
    )
    totals = report.totals.assign(
        scope=report.totals["over"].map(_SCOPES), station="", singled_out=""
    )
    filled = [t for t in (stations, totals) if len(t)]
    table = pd.concat(filled, ignore_index=True) if filled else stations
    columns = ["scope", "station", "n_stations", "singled_out", *SCORE_COLUMNS[1:]]
    table = table[columns]
    ends = [
        (name, end)
        for name in columns
        for end in _DECIMALS
        if name.endswith(end) and name[:2] != "n_"
    ]
    # Adding zero turns a negative zero into a plain one.
    rounded = {name: table[name].astype(float).round(_DECIMALS[end]) + 0.0 for name, end in ends}
    return table.assign(**rounded).to_csv(index=False, lineterminator="\n")


def plain_text(report: VerificationReport) -> str:
    """The report in plain words."""
    blocks = [
        f"How far to trust {clean(report.title)}, {report.period}",
        *_summary(report),
        "FIELDS",
        "\n".join(_bullet(field_words(row)) for _, row in report.fields.iterrows()),
        "STATIONS",
        _station_words(report),
    ]
    if len(report.scores):
        blocks += [_station_lines(report), "WHAT THIS CANNOT TELL", _limits()]
    return "\n\n".join(blocks) + "\n"


def _wrapped(text: str, indent: str = "", first: str | None = None) -> str:
    return textwrap.fill(
        text,
        _TEXT_COLUMNS,
        initial_indent=indent if first is None else first,
        subsequent_indent=indent,
        break_long_words=False,
        break_on_hyphens=False,
    )


def _bullet(text: str) -> str:
    return _wrapped(text, "  ", "- ")


def _total(report: VerificationReport, over: str) -> pd.Series:
    totals = report.totals
    return totals[(totals["over"] == over) & (totals["group_kind"] == "all")].iloc[0]


def _summary(report: VerificationReport) -> list[str]:
    """What came out over all stations, in sentences."""
    n = int(report.stations["verified"].sum())
    if not n:
        return [_wrapped(unverifiable(report))]
    singled = int(report.stations["singled_out"].sum())
    whole = _total(report, "all")
    told = (
        f"Each of {n} stations was hidden in turn, estimated from the others as a field is, and "
        f"held against what it measured, {int(whole['n_hours']):,} hours in all."
    )
    if singled == n:
        told += " All are singled out below, so the figures say little."
    elif singled:
        told += (
            f" {singled} of them {'is' if singled == 1 else 'are'} singled out below; figures are "
            f"means over the other {n - singled}, and in brackets over all {n}."
        )
    means = [whole] if singled in (0, n) else [_total(report, "kept"), whole]
    return [_wrapped(told), "\n".join(map(_bullet, _score_sentences(means, report)))]


def _figure(means: list[pd.Series], name: str, decimals: int, sign: str = "") -> str:
    """A figure of the first mean, and of the second in brackets; shares in per cent."""
    scale = 100.0 if name.startswith(("skill", "coverage")) or name.endswith("_rate") else 1.0
    # Adding zero turns a negative zero into a plain one.
    texts = [format(round(scale * m[name], decimals) + 0.0, f"{sign}.{decimals}f") for m in means]
    return texts[0] if len(texts) == 1 else f"{texts[0]} [{texts[1]}]"


def _score_sentences(means: list[pd.Series], report: VerificationReport) -> list[str]:
    def say(name: str, decimals: int, sign: str = "") -> str:
        return _figure(means, name, decimals, sign)

    lines = [
        f"Temperature is off by {say('mae_k', 2)} K on average, whatever the sign (root mean "
        f"square {say('rmse_k', 2)} K); its bias, estimated minus measured, is "
        f"{say('bias_k', 2, '+')} K.",
        f"Skill, the share of the error saved (negative: worse): {say('skill_fixed', 1, '+')} % "
        "against carrying the same stations at 6.5 K/km, "
        f"{say('skill_nearest', 1, '+')} % against the nearest station taken as it is.",
    ]
    if pd.notna(means[0]["mae_ft"]):
        lines.append(
            f"Density altitude is off by {say('mae_ft', 0)} ft (root mean square "
            f"{say('rmse_ft', 0)} ft), bias {say('bias_ft', 0, '+')} ft."
        )
    if pd.notna(means[0]["hit_rate"]):
        lines.append(
            f"Of the hours above {_limit_words(report)}, {say('hit_rate', 0)} % were estimated so; "
            f"of the hours estimated above it, {say('false_alarm_rate', 0)} % were not."
        )
    if pd.notna(means[0]["dew_point_mae_k"]):
        lines.append(
            f"The dew point is off by {say('dew_point_mae_k', 1)} K, bias "
            f"{say('dew_point_bias_k', 1, '+')} K."
        )
    lines.append(
        f"The 80 % interval held {say('coverage_80', 0)} % of the hidden hours (80 % is right; "
        "less means that the stated error is too small)."
    )
    if pd.notna(means[0]["cell_median_mae_k"]):
        lines.append(
            f"In month x hour cells the median is off by {say('cell_median_mae_k', 2)} K and the "
            f"90th percentile by {say('cell_p90_mae_k', 2)} K, with a bias of "
            f"{say('cell_p90_bias_k', 2, '+')} K once the error distribution is applied and "
            f"{say('cell_p90_bias_k_central', 2, '+')} K without it."
        )
    return lines


def _limit_words(report: VerificationReport) -> str:
    if report.limit_ft is None:
        return f"each station's own {100 * LIMIT_SHARE:.0f}th percentile of density altitude"
    return f"a density altitude of {report.limit_ft:,.0f} ft"


def field_words(row: pd.Series) -> str:
    """How far to trust a field's air, in plain words.

    Parameters
    ----------
    row : Series
        A row of `VerificationReport.fields`.
    """
    name = f"{clean(row['field'])} {clean(row['name'])}: "
    caution = f" {clean(row['caution'])}" if row["caution"] else ""
    if not row["has_air"]:
        return name + caution.strip()
    own, n = float(row["own_station"]), int(row["stations"])
    if own == 1.0:
        return name + "its own station gives every hour; nothing is estimated." + caution
    lead = (
        "estimated"
        if own == 0.0
        else f"its own station gives {100 * own:.0f} % of its hours; the others are estimated"
    )
    hidden = int(row["verified_stations"])
    ground = (
        f"learned by hiding {hidden} station{'s' if hidden != 1 else ''}"
        if hidden
        else "a planning value, since no station could be hidden"
    )
    lapse = int(row["lapse_stations"])
    profile = f"fitted from {lapse} stations" if lapse else "the day/night table"
    return (
        f"{name}{lead} from {n} station{'s' if n != 1 else ''}, "
        f"+-{row['transfer_error_k']:.1f} K = +-{row['transfer_error_ft']:.0f} ft of density "
        f"altitude (one standard deviation, {ground}); lapse: {profile}.{caution}"
    )


def _station_words(report: VerificationReport) -> str:
    """Stations singled out and stations that cannot be verified, one sentence each."""
    told = []
    for _, s in report.stations.iterrows():
        name = f"{clean(s['station'])} {clean(s['name'])}"
        if s["singled_out"]:
            told.append(_bullet(f"Singled out: {name}: {clean(s['reason'])}."))
        elif not s["verified"]:
            told.append(_bullet(f"Cannot be verified: {name}: {clean(s['reason'])}."))
    return "\n".join(told) or "None is singled out, and all could be verified."


def _station_lines(report: VerificationReport) -> str:
    """A table of the verified stations, worst first."""
    scores = report.scores[report.scores["group_kind"] == "all"]
    table = scores.merge(report.stations, on="station").sort_values(
        ["mae_k", "station"], ascending=[False, True], kind="stable"
    )
    width = max(7, *(len(clean(s)) for s in table["station"]))
    lines = [
        f"{'station':{width}} elevation carried     MAE    bias     MAE    bias  hits false  80 %",
        f"{'':{width}}         m       m       K       K      ft      ft     %     %     %",
    ]
    for _, s in table.iterrows():
        numbers = [
            f"{s['elevation_m']:9.0f}",
            f"{s['carried_m']:7.0f}",
            f"{s['mae_k']:7.2f}",
            f"{s['bias_k']:+7.2f}",
            f"{s['mae_ft']:7.0f}",
            f"{s['bias_ft']:+7.0f}",
            *(f"{100 * s[c]:5.0f}" for c in ("hit_rate", "false_alarm_rate", "coverage_80")),
        ]
        mark = " *" if s["singled_out"] else ""
        line = f"{clean(s['station']):{width}} {' '.join(numbers)}{mark}"
        lines.append(line.replace("+nan", "   -").replace("nan", "  -"))
    if table["singled_out"].any():
        lines.append("* singled out")
    return "\n".join(lines)


def _limits() -> str:
    lines = [
        "Differences are estimated minus measured. Both density altitudes of an hour use the same "
        "pressure, so the error of the pressure is not in them; hours without a measured humidity "
        "have none.",
        "A hidden station is not a field: a strip in a closed valley or on a ridge may be further "
        "off, most of all at night.",
        "Hits and false alarms are those of the central estimate. The intervals come from the "
        "errors of the other stations, which were estimated with this one's help.",
        f"Percentiles of cells are compared where at least {CELL_HOURS} hours are common. A "
        "station is singled out when its dates look wrong or its error is more than "
        f"{SINGLED_OUT_FACTOR:g} times the median of the others.",
    ]
    return "\n".join(map(_bullet, lines))
