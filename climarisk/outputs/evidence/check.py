"""The check of an evidence: its digests, its numbers, and the study once more.

The folder may come from anywhere, so nothing in its manifest is followed out of it: names that
leave the folder, links and odd files are told and never opened.
"""

from __future__ import annotations

import json
import os
import platform
import sqlite3
import stat
import tempfile
import tomllib
import zipfile
import zlib
from collections.abc import Mapping
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from climarisk.errors import ClimariskError, InputError
from climarisk.evidence import is_inside
from climarisk.outputs.evidence.folder import (
    INPUTS,
    KIND,
    MANIFEST,
    ZIP,
    digest_of,
    files_in,
    libraries,
    make_evidence,
)
from climarisk.outputs.evidence.numbers import number_problems
from climarisk.outputs.layers import LAYER
from climarisk.progress import Progress, quiet
from climarisk.provenance import program_version
from climarisk.store import Store

#: A manifest, and a file of the evidence, larger than this is not read.
_MAX_MANIFEST_BYTES, _MAX_FILE_BYTES = 20_000_000, 2_000_000_000
_MOST_FILES = 10_000
_MOST_TOLD = 20
_BLOCK = 1 << 20


@dataclass(frozen=True)
class _Listed:
    """A file as the manifest tells it."""

    n_bytes: int
    sha256: str


def check_evidence(
    folder: Path | str,
    study: Path | str | None = None,
    store: Store | None = None,
    progress: Progress = quiet,
    rerun: bool = True,
) -> list[str]:
    """What is wrong with an evidence, as sentences; none where it holds.

    Parameters
    ----------
    folder : Path or str
    study : Path or str, optional
        The study to run again; default the copy in the evidence, where it runs by itself.
    store : Store or None
        Where parsed hours are kept; the network is never touched.
    progress : callable
    rerun : bool
        Whether to run the study again.

    Raises
    ------
    InputError
        The folder is no evidence folder.
    ClimariskError
        The study named cannot be run.
    """
    folder = Path(folder)
    manifest = _manifest(folder)
    listed = _listed(manifest, folder)
    problems = _file_problems(folder, listed)
    if not problems and _has_zip(folder):
        problems = _zip_problems(folder, [*listed, MANIFEST])
    if problems:
        return _few(problems)
    problems = number_problems(folder)
    if rerun and study is not None:
        problems += _run_again(folder, manifest, Path(study), store, progress)
    elif rerun and manifest.get("runnable") is True:
        problems += _run_copy(folder, manifest, list(listed), progress)
    return _few(problems)


def is_repeatable(folder: Path | str) -> bool:
    """Whether the copied study of an evidence runs by itself, so that no other is needed.

    Raises
    ------
    InputError
        The folder is no evidence folder.
    """
    return _manifest(Path(folder)).get("runnable") is True


def _few(problems: list[str]) -> list[str]:
    if len(problems) <= _MOST_TOLD:
        return problems
    return [*problems[:_MOST_TOLD], f"{len(problems) - _MOST_TOLD} problems more."]


def _refused(folder: Path, why: str) -> InputError:
    return InputError(
        f"{folder}: this is no evidence folder ({why}); name one that climarisk evidence wrote."
    )


def _manifest(folder: Path) -> dict[str, Any]:
    """The manifest of a folder, its shape checked."""
    path = folder / MANIFEST
    if folder.is_file():
        packed = folder.suffix.lower() == ".zip"
        advice = "unpack it and name the folder" if packed else "name the folder that holds it"
        raise InputError(f"{folder}: this is a file, and what is checked is a folder; {advice}.")
    if not folder.is_dir():
        raise _refused(folder, "there is no such folder")
    if _odd(folder, MANIFEST):
        raise _refused(folder, f"it has no {MANIFEST}")
    try:
        if path.stat().st_size > _MAX_MANIFEST_BYTES:
            raise _refused(folder, f"its {MANIFEST} is larger than {_MAX_MANIFEST_BYTES:,} bytes")
        manifest = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError, RecursionError):
        raise _refused(folder, f"its {MANIFEST} cannot be read") from None
    if not isinstance(manifest, dict) or manifest.get("kind") != KIND:
        raise _refused(folder, f"its {MANIFEST} is of another kind")
    return manifest


def _listed(manifest: Mapping[str, Any], folder: Path) -> dict[str, _Listed]:
    """The files that a manifest lists, every name staying in the folder."""
    items = manifest.get("files")
    if not isinstance(items, list) or not 0 < len(items) <= _MOST_FILES:
        raise _refused(folder, f"its {MANIFEST} lists no files, or more than {_MOST_FILES:,}")
    found: dict[str, _Listed] = {}
    for item in items:
        try:
            name, size, digest = item["file"], item["bytes"], item["sha256"]
        except (TypeError, KeyError):
            raise _refused(folder, f"its {MANIFEST} lists a file without name or digest") from None
        if not (isinstance(name, str) and type(size) is int and isinstance(digest, str)):
            raise _refused(folder, f"its {MANIFEST} lists a file without name or digest")
        if not is_inside(name) or name in (MANIFEST, ZIP) or name in found:
            raise _refused(folder, f"its {MANIFEST} lists {_shown(name)}, which cannot be")
        found[name] = _Listed(size, digest)
    return found


def _has_zip(folder: Path) -> bool:
    """Whether the zip is there; of an unpacked one it is not."""
    return os.path.lexists(folder / ZIP)


def _shown(name: str) -> str:
    return repr(name if len(name) <= 80 else name[:77] + "...")


def _odd(folder: Path, name: str) -> str:
    """Why a file cannot be opened without leaving the folder; empty where it can."""
    path = folder
    for part in name.split("/"):
        path = path / part
        try:
            mode = path.lstat().st_mode
        except (OSError, ValueError):
            return "is missing"
        if stat.S_ISLNK(mode):
            return "is a link, which is not followed"
    return "" if stat.S_ISREG(mode) else "is no regular file"


def _file_problems(folder: Path, listed: Mapping[str, _Listed]) -> list[str]:
    """Files that are missing, odd, changed, or not listed."""
    known = {*listed, MANIFEST, ZIP}
    problems = [
        f"{_shown(name)} is no part of the evidence."
        for name in files_in(folder)
        if name not in known
    ]
    found = {name: _file_problem(folder, name, told) for name, told in listed.items()}
    if _has_zip(folder):
        found[ZIP] = _odd(folder, ZIP)
    return problems + [f"{_shown(name)} {problem}." for name, problem in found.items() if problem]


def _file_problem(folder: Path, name: str, told: _Listed) -> str:
    """What is wrong with a listed file; empty where nothing is."""
    odd = _odd(folder, name)
    if odd:
        return odd
    try:
        size = (folder / name).stat().st_size
        if size > _MAX_FILE_BYTES:
            return f"has {size:,} bytes, too many to be checked"
        if size != told.n_bytes:
            return f"has {size:,} bytes, listed are {told.n_bytes:,}"
        if digest_of(folder / name) != told.sha256:
            return "was changed: its SHA-256 is not the one listed"
    except OSError as error:
        return f"cannot be read ({error.strerror or error})"
    return ""


def _zip_problems(folder: Path, names: list[str]) -> list[str]:
    """What in the zip is not as in the folder."""
    try:
        with zipfile.ZipFile(folder / ZIP) as archive:
            members = archive.infolist()
            if len(members) > _MOST_FILES or sorted(m.filename for m in members) != sorted(names):
                return [f"{ZIP} does not hold the files of the folder once each."]
            return [
                f"{ZIP}: {_shown(member.filename)} is not as in the folder."
                for member in members
                if not _same_member(archive, member, folder / member.filename)
            ]
    except (OSError, zipfile.BadZipFile, NotImplementedError, RuntimeError, ValueError) as error:
        return [f"{ZIP} cannot be read ({error})."]


def _same_member(archive: zipfile.ZipFile, member: zipfile.ZipInfo, path: Path) -> bool:
    """Whether a member of a zip is a file, read no further than they agree."""
    plain_kind = member.compress_type in (zipfile.ZIP_DEFLATED, zipfile.ZIP_STORED)
    if not plain_kind or member.file_size != path.stat().st_size:
        return False
    try:
        with archive.open(member) as packed, path.open("rb") as plain:
            while block := plain.read(_BLOCK):
                if packed.read(len(block)) != block:
                    return False
            return not packed.read(1)
    except (zipfile.BadZipFile, EOFError, zlib.error):
        return False


def _run_copy(
    folder: Path, manifest: Mapping[str, Any], names: list[str], progress: Progress
) -> list[str]:
    """Run the copied study again, in a copy of its own that can name nothing outside."""
    name = str(manifest.get("study", ""))
    if name not in names or not name.startswith(f"{INPUTS}/"):
        return [f"{MANIFEST} names {_shown(name)} as the study, which is no file of the evidence."]
    problem = _leaves(folder / name)
    if problem:
        return [f"{_shown(name)} {problem}; it is not run."]
    with tempfile.TemporaryDirectory(prefix="climarisk-") as place:
        for item in (n for n in names if n.startswith(f"{INPUTS}/")):
            target = Path(place) / item
            target.parent.mkdir(parents=True, exist_ok=True)
            target.write_bytes((folder / item).read_bytes())
        try:
            return _run_again(folder, manifest, Path(place) / name, None, progress)
        except ClimariskError as error:
            told = str(error).replace(f"{place}/", "")
            return [f"The copied study cannot be run: {told}"]


def _leaves(path: Path) -> str:
    """Why a copied study must not be run: it is no invented weather or names files elsewhere."""
    try:
        content = tomllib.loads(path.read_text(encoding="utf-8-sig"))
        weather = content.get("weather", {})
        files = [content["fields"], content["runways"], *content["aircraft"], weather["stations"]]
        files += [content["schedule"]] if "schedule" in content else []
        source = weather["source"]
    except (OSError, ValueError, RecursionError, KeyError, TypeError, AttributeError):
        return "is no study with invented weather"
    if source != "synthetic":
        return "is no study with invented weather"
    outside = [name for name in files if not (isinstance(name, str) and is_inside(name))]
    return f"names {_shown(str(outside[0]))}, outside its folder" if outside else ""


def _run_again(
    folder: Path,
    manifest: Mapping[str, Any],
    study: Path,
    store: Store | None,
    progress: Progress,
) -> list[str]:
    """Write the evidence of a study anew and tell the files that come out otherwise."""
    with tempfile.TemporaryDirectory(prefix="climarisk-") as place:
        again = Path(place) / "again"
        make_evidence(study, again, store, progress, offline=True)
        versions = _other_versions(manifest)
        made, filed = (set(files_in(f)) - {ZIP, MANIFEST} for f in (again, folder))
        problems = [f"Run again, the study also gives {_shown(n)}." for n in sorted(made - filed)]
        problems += [f"Run again, the study gives no {_shown(n)}." for n in sorted(filed - made)]
        for name in sorted(made & filed):
            if not _same_file(again / name, folder / name, bool(versions)):
                problems.append(f"Run again, the study gives another {_shown(name)}.")
        if not problems and not versions and not _same_bytes(again / MANIFEST, folder / MANIFEST):
            problems.append(f"Run again, the study gives another {MANIFEST}.")
        if problems and versions:
            problems.append(f"Versions differ: {versions}. With the same ones the bytes may agree.")
        return problems


def _other_versions(manifest: Mapping[str, Any]) -> str:
    """Versions in which the evidence and this program differ, in words."""
    now = {"climarisk": program_version(), "python": platform.python_version(), **libraries()}
    told = manifest.get("libraries")
    then = dict(told) if isinstance(told, dict) else {}
    then |= {"climarisk": manifest.get("version"), "python": manifest.get("python")}
    differing = [name for name in now if str(then.get(name)) != now[name]]
    return ", ".join(f"{n} {str(then.get(n))[:40]} then, {now[n]} now" for n in differing)


def _same_bytes(first: Path, second: Path) -> bool:
    return digest_of(first) == digest_of(second)


def _same_file(made: Path, filed: Path, other_versions: bool) -> bool:
    """Whether two files hold the same: the same bytes, or with other versions the same content."""
    if _same_bytes(made, filed):
        return True
    if other_versions and made.suffix == ".gpkg":
        return _layer_rows(made) == _layer_rows(filed)
    if other_versions and made.suffix == ".xlsx":
        return _parts(made) == _parts(filed)
    return False


def _layer_rows(path: Path) -> object:
    """The rows of a GeoPackage's layer; the path itself where it cannot be read."""
    try:
        with closing(sqlite3.connect(f"{path.resolve().as_uri()}?mode=ro", uri=True)) as base:
            return base.execute(f'SELECT * FROM "{LAYER}" ORDER BY 1').fetchall()
    except sqlite3.Error:
        return path


def _parts(path: Path) -> object:
    """The parts of a workbook, unpacked; the path itself where it cannot be read."""
    try:
        with zipfile.ZipFile(path) as book:
            return {name: book.read(name) for name in sorted(book.namelist())}
    except (OSError, zipfile.BadZipFile, RuntimeError):
        return path
