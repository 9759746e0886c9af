"""Writing a set of files as one: complete before the first replaces an old one."""

from __future__ import annotations

import shutil
import tempfile
from collections.abc import Callable
from pathlib import Path

from climarisk.errors import OutputError


def write_files(folder: Path, write: Callable[[Path], list[str]]) -> list[Path]:
    """Write files beside a folder and move them in when the last one is complete.

    Parameters
    ----------
    folder : Path
        Made if absent; other files in it stay.
    write : callable
        Given a folder to write to, returns the names written.

    Returns
    -------
    list of Path
        The files in their place.

    Raises
    ------
    OutputError
        The folder cannot be written; what was there stands as it was.
    """
    folder = Path(folder)
    staging = None
    try:
        folder.parent.mkdir(parents=True, exist_ok=True)
        staging = Path(tempfile.mkdtemp(prefix=".climarisk-", dir=folder.parent))
        names = write(staging)
        folder.mkdir(exist_ok=True)
        _move_in(staging, folder, names)
    except OSError as error:
        raise OutputError(
            f"{folder}: the results cannot be written ({error.strerror or error}); what was "
            "there stands as it was. Free some space, close the files, or choose another folder "
            "with --out."
        ) from None
    finally:
        if staging is not None:
            shutil.rmtree(staging, ignore_errors=True)
    return [folder / name for name in names]


def write_texts(folder: Path, texts: dict[str, str]) -> list[str]:
    """Write texts as UTF-8 with plain line ends and return their names."""
    for name, text in texts.items():
        (folder / name).write_text(text, encoding="utf-8", newline="\n")
    return list(texts)


def _move_in(staging: Path, folder: Path, names: list[str]) -> None:
    """Move the files into the folder; where one cannot be, put the old ones back."""
    old = staging / "old"
    old.mkdir()
    for name in names:
        if (folder / name).is_dir():
            raise IsADirectoryError(f"{name} is a folder there")
        if (folder / name).exists():
            shutil.copy2(folder / name, old / name)
    moved: list[str] = []
    try:
        for name in names:
            (staging / name).replace(folder / name)
            moved.append(name)
    except BaseException:
        for name in moved:
            if (old / name).exists():
                shutil.copy2(old / name, folder / name)
            else:
                (folder / name).unlink(missing_ok=True)
        raise
