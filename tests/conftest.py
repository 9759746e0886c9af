"""Fixtures for all tests: shared data, a small study, a private store, the command line."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

import pytest
from study_maker import StudyFolder, make_study

ROOT = Path(__file__).parents[1]


@pytest.fixture(scope="session", autouse=True)
def _private_store(tmp_path_factory: pytest.TempPathFactory) -> Iterator[None]:
    """No test ever reads or writes the user's own cache."""
    before = os.environ.get("CLIMARISK_STORE")
    os.environ["CLIMARISK_STORE"] = str(tmp_path_factory.mktemp("store"))
    yield
    if before is None:
        del os.environ["CLIMARISK_STORE"]
    else:
        os.environ["CLIMARISK_STORE"] = before


@pytest.fixture(scope="session")
def shared() -> Path:
    """The folder of shared real data beside the checkout; the test skips where it is absent."""
    folder = ROOT.parent / "shared"
    if not folder.is_dir():
        pytest.skip(f"the shared data folder {folder.name!r} beside the checkout is absent")
    return folder


@pytest.fixture
def store_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """An empty store of this test alone, set as the default one; the folder is not made."""
    folder = tmp_path / "private store"
    monkeypatch.setenv("CLIMARISK_STORE", str(folder))
    return folder


@pytest.fixture
def study_folder(tmp_path: Path) -> Callable[..., StudyFolder]:
    """A factory of small valid studies: ``study_folder(source="files", name="study")``."""

    def make(source: str = "synthetic", name: str = "study") -> StudyFolder:
        return make_study(tmp_path / name, source)

    return make


@dataclass(frozen=True)
class Outcome:
    """What one command gave."""

    code: int
    out: str
    err: str

    @property
    def errors(self) -> list[str]:
        """The error sentences on stderr."""
        return [line for line in self.err.splitlines() if line.startswith("error: ")]


@pytest.fixture
def command(
    tmp_path: Path,
    store_folder: Path,
    monkeypatch: pytest.MonkeyPatch,
    capfd: pytest.CaptureFixture[str],
) -> Callable[..., Outcome]:
    """Run the command line in this process, from `tmp_path`: ``command("run", path)``."""
    from climarisk.cli import main

    monkeypatch.chdir(tmp_path)
    # A defect shows as itself instead of as the sentence that users get.
    monkeypatch.setenv("CLIMARISK_TRACEBACK", "1")

    def run(*arguments: object) -> Outcome:
        monkeypatch.setattr(sys, "argv", ["climarisk", *map(str, arguments)])
        capfd.readouterr()
        with pytest.raises(SystemExit) as stop:
            main()
        out, err = capfd.readouterr()
        return Outcome(int(stop.value.code or 0), out, err)

    return run
