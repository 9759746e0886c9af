"""The demo as a newcomer runs it, and the map of it that is kept in the repository."""

import csv
import subprocess
import sys
from pathlib import Path

import pytest

from climarisk.outputs.tables import OUTPUT_FILES

ROOT = Path(__file__).resolve().parent.parent
CONTRACT = {
    "map.html",
    "distributions_monthly.csv",
    "distributions_hourly.csv",
    "distributions_seasonal.csv",
    "risk_monthly.csv",
    "risk_hourly.csv",
    "risk_seasonal.csv",
    "risk_yearly.csv",
    "margins_monthly.csv",
    "near_saturation_monthly.csv",
    "near_saturation_hourly.csv",
    "near_saturation_seasonal.csv",
    "trends.csv",
    "extremes.csv",
    "fields.gpkg",
    "fields.geojson",
    "study.json",
}
#: What a run without scenarios writes: the contract, which is named here, and all that came since.
FILES = set(OUTPUT_FILES) - {"scenarios.csv"}


@pytest.fixture(scope="module")
def demo(tmp_path_factory):
    folder = tmp_path_factory.mktemp("newcomer")
    done = subprocess.run(
        [sys.executable, "-W", "error", "-m", "climarisk", "demo"],
        cwd=folder,
        capture_output=True,
        text=True,
        env={"PATH": "", "PYTHONPATH": str(ROOT), "HOME": str(folder)},
        check=False,
    )
    return folder / "maps" / "demo_fields", done


def test_demo_writes_every_file_of_the_contract_and_says_where(demo):
    folder, done = demo
    assert done.returncode == 0, done.stderr
    assert {p.name for p in folder.iterdir()} == FILES >= CONTRACT
    assert str(Path("maps/demo_fields/map.html")) in done.stdout


def test_demo_cautions_are_about_its_steep_strips_only(demo):
    cautions = [line for line in demo[1].stderr.splitlines() if not line.endswith("study.json.")]
    assert cautions
    assert all("site-specific procedure" in line for line in cautions)


def test_demo_has_summer_shortfall_at_some_strips_and_none_in_the_cold(demo):
    rows = list(
        csv.DictReader((demo[0] / "risk_monthly.csv").read_text(encoding="utf-8").splitlines())
    )
    july = [float(r["shortfall"]) for r in rows if r["month"] == "7"]
    january = [float(r["shortfall"]) for r in rows if r["month"] == "1"]
    assert max(july) > 0.2
    assert min(july) < 0.01
    assert max(january) < 0.01


def test_demo_map_in_the_repository_is_current(demo):
    kept = ROOT / "maps" / "demo_fields" / "map.html"
    assert kept.stat().st_size < 1_000_000
    assert kept.read_bytes() == (demo[0] / "map.html").read_bytes(), (
        "the kept map is old; run climarisk demo in the checkout and commit the new one"
    )
