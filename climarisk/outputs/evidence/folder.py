"""The evidence of a study: a folder, and a zip of it, that a reviewer can file and check.

It holds what a run writes, the sensitivity, the verification, the study's own files, what was
read and how much of it counts, the method with its sources, and a manifest with the digest of
every file.  The same input gives the same bytes: no clock, no absolute path.
"""

from __future__ import annotations

import errno
import hashlib
import json
import os
import platform
import shutil
import tempfile
import zipfile
import zlib
from collections.abc import Callable
from dataclasses import replace
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

import pandas as pd

from climarisk.errors import OutputError
from climarisk.evidence import coverage_table, input_table, is_runnable, study_inputs
from climarisk.outputs.evidence.method import method_page
from climarisk.outputs.evidence.words import readme_text
from climarisk.outputs.tables import csv_text, write_outputs
from climarisk.outputs.verification import write_verification
from climarisk.outputs.writing import write_texts
from climarisk.pipeline import evaluate
from climarisk.progress import Progress, quiet
from climarisk.provenance import program_version
from climarisk.results import StudyResult
from climarisk.scenarios import compare, sensitivity
from climarisk.store import Store
from climarisk.study import Study, read_study
from climarisk.verification import VerificationReport, verify_study
from climarisk.weather import Weather, load_weather

MANIFEST, ZIP, INPUTS = "manifest.json", "evidence.zip", "inputs"
#: What a manifest calls itself.
KIND = "climarisk evidence"
#: Libraries that shape the numbers or the bytes.
LIBRARIES = (
    "folium",
    "geopandas",
    "numpy",
    "pandas",
    "pyarrow",
    "pydantic",
    "pyogrio",
    "pyproj",
    "scipy",
    "shapely",
    "timezonefinder",
    "tzdata",
    "XlsxWriter",
    "XStatic-Leaflet",
)
_NOTE = (
    "The bytes of fields.gpkg and tables.xlsx also depend on the libraries named here; where they "
    "differ, the check compares rows and parts instead of bytes."
)
_FREE = "Free some space, or choose another folder"
_ANOTHER = "The folder may be in use or not be yours to replace: choose another"
#: A zip knows no time before this one.
_FIXED_TIME = (1980, 1, 1, 0, 0, 0)


def make_evidence(
    path: Path | str,
    folder: Path,
    store: Store | None = None,
    progress: Progress = quiet,
    offline: bool = False,
) -> tuple[StudyResult, list[Path]]:
    """Run a study, verify its transfer, try its sensitivity, and write the evidence.

    Parameters
    ----------
    path : Path or str
        The study TOML, or its folder.
    folder : Path
    store : Store or None
        Where parsed hours are kept.
    progress : callable
    offline : bool
        Never touch the network.

    Returns
    -------
    result : StudyResult
    files : list of Path

    Raises
    ------
    InputError, ArchiveError, FetchError, StoreError, OutputError
        As for a run; the folder holds something else.
    """
    study = read_study(path)
    refuse_foreign(folder)
    weather = load_weather(study, store, progress, offline)
    result = evaluate(study, weather, progress)
    report = verify_study(study, weather, progress)
    return result, write_evidence(study, weather, result, report, folder, progress)


def write_evidence(
    study: Study,
    weather: Weather,
    result: StudyResult,
    report: VerificationReport,
    folder: Path,
    progress: Progress = quiet,
) -> list[Path]:
    """Write the evidence of a study; an earlier evidence in the folder is replaced as a whole.

    Everything is written beside the folder first and moved into place when the last file is
    complete.

    Parameters
    ----------
    study : Study
    weather : Weather
    result : StudyResult
        Of that study with that weather.
    report : VerificationReport
    folder : Path
        Absent, empty, or an earlier evidence with nothing else in it; a link is written through.
    progress : callable

    Returns
    -------
    list of Path
        The files in their place.

    Raises
    ------
    OutputError
        The folder holds something else, or cannot be written.
    """
    folder = Path(folder)
    refuse_foreign(folder)
    table = compare(result, sensitivity(study), weather, progress)
    progress("writing evidence", 0, 1)

    def write(new: Path) -> list[str]:
        plain = replace(result, scenarios=None)
        write_outputs(plain, new)
        write_verification(report, new)
        inputs = study_inputs(study, weather)
        for item in inputs:
            if item.data is not None:
                target = new / INPUTS / item.name
                target.parent.mkdir(parents=True, exist_ok=True)
                target.write_bytes(item.data)
        runnable = is_runnable(study, inputs)
        texts = {
            "scenarios.csv": csv_text(table),
            "inputs.csv": input_table(inputs).to_csv(index=False, lineterminator="\n"),
            "coverage.csv": csv_text(coverage_table(study, weather, result.station_use)),
            "station_use.csv": _use_text(result.station_use),
            "method.html": method_page(study, result),
        }
        write_texts(new, texts)
        names = files_in(new)
        write_texts(new, {"README.txt": readme_text(study, names, runnable)})
        manifest = _manifest(study, new, runnable)
        text = json.dumps(manifest, indent=1, ensure_ascii=False) + "\n"
        write_texts(new, {MANIFEST: text})
        write_zip(new)
        return files_in(new)

    names = _replace_folder(folder, write)
    progress("writing evidence", 1, 1)
    return [folder / name for name in names]


def _use_text(table: pd.DataFrame) -> str:
    decimals = {"distance_km": 3, "height_difference_m": 1, "share_of_hours": 6}
    return csv_text(table.round(decimals))


def files_in(folder: Path) -> list[str]:
    """Names of everything below a folder that is no folder, relative with ``/``, sorted."""
    found = []
    for path in folder.rglob("*"):
        if path.is_symlink() or not path.is_dir():
            found.append(path.relative_to(folder).as_posix())
    return sorted(found)


def digest_of(path: Path) -> str:
    """Hexadecimal SHA-256 of a file."""
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def _manifest(study: Study, folder: Path, runnable: bool) -> dict[str, Any]:
    return {
        "kind": KIND,
        "program": "climarisk",
        "version": program_version(),
        "python": platform.python_version(),
        "libraries": libraries(),
        "note": _NOTE,
        "title": study.title,
        "study": f"{INPUTS}/{study.path.name}",
        "runnable": runnable,
        "settings": study.settings(),
        "files": [
            {
                "file": name,
                "bytes": (folder / name).stat().st_size,
                "sha256": digest_of(folder / name),
            }
            for name in files_in(folder)
        ],
    }


def libraries() -> dict[str, str]:
    """Versions of the libraries that shape numbers or bytes, GDAL's and zlib's among them."""
    import pyogrio

    found = {}
    for name in LIBRARIES:
        try:
            found[name] = version(name)
        except PackageNotFoundError:
            found[name] = "not installed"
    found["GDAL"] = pyogrio.__gdal_version_string__
    return found | {"zlib": zlib.ZLIB_RUNTIME_VERSION}


def write_zip(folder: Path) -> None:
    """Write a zip of all files of a folder into it: sorted, with fixed dates and modes."""
    names = [name for name in files_in(folder) if name != ZIP]
    with zipfile.ZipFile(folder / ZIP, "w", zipfile.ZIP_DEFLATED) as archive:
        for name in names:
            info = zipfile.ZipInfo(name, _FIXED_TIME)
            info.compress_type, info.create_system = zipfile.ZIP_DEFLATED, 3
            info.external_attr = 0o100644 << 16
            archive.writestr(info, (folder / name).read_bytes())


def refuse_foreign(folder: Path) -> None:
    """Refuse a folder that holds anything but an earlier evidence.

    Parameters
    ----------
    folder : Path

    Raises
    ------
    OutputError
        It is a file, something in it is not part of an evidence, or it is worked in.
    """
    folder = Path(folder)
    if _is_worked_in(folder):
        raise OutputError(
            f"{folder}: the folder is replaced as a whole, which cannot be while it is or holds "
            "the one this command runs in; choose another with --out, or run it from elsewhere."
        )
    if folder.exists() and not folder.is_dir():
        raise OutputError(f"{folder}: this is a file; name a folder for the evidence with --out.")
    if not folder.is_dir():
        return
    names = files_in(folder)
    known = {MANIFEST, ZIP, *_listed(folder)}
    foreign = [name for name in names if name not in known]
    if foreign or (names and MANIFEST not in names):
        raise OutputError(
            f"{folder}: the folder holds {foreign[0] if foreign else names[0]!r}, which is no part "
            "of an earlier evidence; evidence needs a folder of its own: choose another with --out."
        )


def _is_worked_in(folder: Path) -> bool:
    """Whether the folder is, or holds, the current one."""
    try:
        return Path(os.path.realpath(Path.cwd())).is_relative_to(os.path.realpath(folder))
    except OSError:  # the current folder is gone
        return False


def _listed(folder: Path) -> set[str]:
    """Files that the manifest of an earlier evidence names; none where there is no such thing."""
    try:
        manifest = json.loads((folder / MANIFEST).read_text(encoding="utf-8"))
        if manifest["kind"] != KIND:
            return set()
        return {str(item["file"]) for item in manifest["files"]}
    except (OSError, ValueError, TypeError, KeyError, RecursionError):
        return set()


def _replace_folder(folder: Path, write: Callable[[Path], list[str]]) -> list[str]:
    """Write a folder beside its place and put it there whole; on failure the old one stays.

    A link to a folder stays: the folder that it names is replaced.
    """
    staging, told = None, folder
    try:
        folder = Path(os.path.realpath(folder))
        folder.parent.mkdir(parents=True, exist_ok=True)
        staging = Path(tempfile.mkdtemp(prefix=".climarisk-", dir=folder.parent))
        new, old = staging / "new", staging / "old"
        new.mkdir()
        names = write(new)
        if folder.exists():
            folder.rename(old)
        try:
            new.rename(folder)
        except BaseException:
            if old.exists():
                old.rename(folder)
            raise
    except OSError as error:
        full = error.errno in (errno.ENOSPC, errno.EDQUOT)
        raise OutputError(
            f"{told}: the evidence cannot be written ({error.strerror or error}); what was there "
            f"stands as it was. {_FREE if full else _ANOTHER} with --out."
        ) from None
    finally:
        if staging is not None:
            shutil.rmtree(staging, ignore_errors=True)
    return names
