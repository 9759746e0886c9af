"""What the tests of the archive readers share."""

from __future__ import annotations

from pathlib import Path

import pytest


@pytest.fixture(scope="session")
def stations(shared: Path) -> Path:
    """The folder of real station files beside the checkout; skips where it is absent."""
    folder = shared / "stations"
    if not folder.is_dir():
        pytest.skip(f"the real station files are not here ({folder})")
    return folder
