"""The README of an evidence folder: what each file is, how to repeat it, how to check it."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

from climarisk.outputs.texts import CAUTIONS
from climarisk.provenance import program_version
from climarisk.study import Study
from climarisk.verification import clean

#: What each file of an evidence is.
FILES = {
    "README.txt": "this text",
    "manifest.json": "versions, settings, and the size and SHA-256 of every file",
    "method.html": "the method: equations, sources, decisions, factors, limits",
    "inputs.csv": "what was read: SHA-256 and size, and whether it is copied here",
    "coverage.csv": "each station's record: hours, completeness, pressure",
    "station_use.csv": "each field's stations: distance, height, coverage, share",
    "scenarios.csv": "sensitivity: warmer air, other masses, other factors",
    "verification.txt": "each station hidden and estimated from the others, in words",
    "verification.csv": "the same in numbers",
    "verification.svg": "the same as a picture",
    "study.json": "provenance: settings, rules, inputs, stations, every finding",
    "report.html": "the report, made to be printed",
    "map.html": "the interactive map; needs no other file",
    "tables.xlsx": "the workbook",
    "fields.gpkg": "the fields with headline figures, GeoPackage",
    "fields.geojson": "the same as GeoJSON",
    "distributions_monthly.csv": "percentiles of the air by month, inside the hours window",
    "distributions_hourly.csv": "percentiles of the air by month and hour",
    "distributions_seasonal.csv": "percentiles of the air by season, inside the hours window",
    "risk_monthly.csv": "shortfall shares by month, inside the hours window",
    "risk_hourly.csv": "shortfall shares by month and hour",
    "risk_seasonal.csv": "shortfall shares by season, inside the hours window",
    "risk_yearly.csv": "hours and shortfall hours of each month of each year",
    "margins_monthly.csv": "margin and shortfall share of each check by month",
    "near_saturation_monthly.csv": "hours with temperature and dew point close, by month",
    "near_saturation_hourly.csv": "the same by month and hour",
    "near_saturation_seasonal.csv": "the same by season",
    "weights_monthly.csv": "the largest mass that holds, by month",
    "weights_hourly.csv": "the same by month and hour",
    "weights_seasonal.csv": "the same by season",
    "windows_monthly.csv": "hours of the day below the target, and usable daylight hours",
    "icing_monthly.csv": "exposure to carburettor icing in daylight, by month",
    "icing_hourly.csv": "the same by month and hour",
    "power_monthly.csv": "engine power that the air leaves, and what humidity takes",
    "bases.html": "the fields side by side as bases, made to be printed",
    "bases.csv": "the fields ranked for the fleet",
    "base_differences.csv": "differences between them, with paired intervals",
    "schedule.html": "the schedule, made to be printed",
    "schedule_flights.csv": "the schedule flight by flight",
    "schedule_seasons.csv": "affected flights by season",
    "schedule_days.csv": "affected flights by day of the schedule",
    "trends.csv": "trends by season, with the test for a step",
    "extremes.csv": "return levels of density altitude",
}
#: What the check does not reckon again but holds by its digest alone.
HELD_BY_DIGEST = (
    "pages, workbook, layers and pictures, and the tables of trends, extremes, station use and "
    "verification"
)
_WIDTH = 92


def check_words(repeated: bool) -> str:
    """What was checked of an evidence that holds, without the stop at the end.

    Parameters
    ----------
    repeated : bool
        The study was run again.
    """
    held = (
        "every file has the size and SHA-256 listed, and the tables reckoned again from one "
        "another agree"
    )
    if repeated:
        return f"{held}; run again, the study gives the same files"
    return (
        f"{held}; {HELD_BY_DIGEST} are held by their SHA-256 alone, since the study was not run "
        "again: name it with --study"
    )


def readme_text(study: Study, names: Sequence[str], runnable: bool) -> str:
    """The README of an evidence.

    Parameters
    ----------
    study : Study
    names : sequence of str
        Files of the evidence, relative to its folder.
    runnable : bool
        The copied study runs by itself.
    """
    title = clean(study.title)
    blocks = [
        f"Evidence: {title}, {study.first_year}-{study.last_year}",
        _wrapped(CAUTIONS[0]),
        "FILES",
        _file_list(names),
        "TO REPEAT IT, BYTE FOR BYTE",
        _wrapped(_repeat(study, runnable)),
        f"    {_command(study, runnable)}",
        _wrapped(
            f"climarisk {program_version()} with the library versions of manifest.json gives the "
            "same bytes. With other versions the bytes of fields.gpkg, tables.xlsx and the last "
            "digits of numbers may differ; the check then says what differs."
        ),
        "TO CHECK IT",
        "    climarisk evidence --check ." + ("" if runnable else " --study STUDY.toml"),
        _wrapped(
            "The check holds every file against its digest in manifest.json and against the zip "
            "where it is there, reckons the tables again from one another by a routine of its own, "
            "and runs the study again "
            + ("from inputs/" if runnable else "where it is given")
            + f". Without that run, {HELD_BY_DIGEST} are held by their digest alone."
            + " A digest shows that nothing changed since the evidence was written, not who wrote "
            "it: file the SHA-256 of evidence.zip where it cannot be changed."
        ),
    ]
    return "\n\n".join(blocks) + "\n"


def _wrapped(text: str) -> str:
    return textwrap.fill(text, _WIDTH, break_long_words=False, break_on_hyphens=False)


def _file_list(names: Sequence[str]) -> str:
    copied = [name for name in names if name.startswith("inputs/")]
    made = {*names, "README.txt", "manifest.json"} - set(copied)
    ordered = [name for name in FILES if name in made] + sorted(made - set(FILES))
    lines = [f"{name:28} {FILES.get(name, '')}".rstrip() for name in ordered]
    lines.append(f"{'inputs/':28} the study's own files as they were read: {len(copied)}")
    lines.append(f"{'evidence.zip':28} all of the above in one file")
    return "\n".join(lines)


def _repeat(study: Study, runnable: bool) -> str:
    if runnable:
        return "The weather is invented from a seed, so the copied study runs by itself:"
    if study.source == "files":
        return (
            "The station archives are not copied: their names, sizes and SHA-256 stand in "
            "inputs.csv. Where inputs/ lies alone, the files that its stations.csv names are "
            "therefore missing. Put the archives back beside the study under the names of "
            "inputs.csv, or use the original study, and run:"
        )
    if study.source == "meteostat":
        return (
            "The weather came from the online archive, which may revise it: inputs.csv holds a "
            "digest of each station's checked hours, so that a repetition shows whether it did. "
            "Keep the store of parsed hours for the same bytes, and run:"
        )
    return (
        "A file of the study lies outside its folder and is not copied: inputs.csv tells which. "
        "Use the original study, and run:"
    )


def _command(study: Study, runnable: bool) -> str:
    where = f"inputs/{clean(study.path.name)}" if runnable else "STUDY.toml"
    return f"climarisk evidence {where} --out ../again"
