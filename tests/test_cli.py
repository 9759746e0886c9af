"""The commands: exit codes, what goes to which stream, and that a failure writes nothing."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest
from study_maker import FIELDS, ONLY_WHERE_ASKED, RUNWAYS, SYNTHETIC_STATIONS

import climarisk.cli
from climarisk import study as study_module
from climarisk.outputs.tables import OUTPUT_FILES

COMMANDS = ("demo", "run", "check", "fetch", "schedule", "bases", "evidence")
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
FILES = set(OUTPUT_FILES) - ONLY_WHERE_ASKED


def tree(folder: Path) -> set[str]:
    return {p.relative_to(folder).as_posix() for p in folder.rglob("*")}


def subprocess_of(
    tmp_path: Path, *arguments: object, **environment: str
) -> subprocess.CompletedProcess[str]:
    """``python -m climarisk`` for real."""
    return subprocess.run(
        [sys.executable, "-m", "climarisk", *map(str, arguments)],
        cwd=tmp_path,
        env={
            **os.environ,
            "PYTHONPATH": str(Path(climarisk.cli.__file__).parents[1]),
            "CLIMARISK_STORE": str(tmp_path / "store"),
            **environment,
        },
        capture_output=True,
        text=True,
    )


# ---------------------------------------------------------------- run


@pytest.mark.parametrize("source", ["synthetic", "files"])
def test_run_writes_the_contract_and_says_where(study_folder, command, tmp_path, source):
    done = command("run", study_folder(source).file, "--out", "results")
    assert done.code == 0
    assert tree(tmp_path / "results") == FILES >= CONTRACT
    assert "Map: results/map.html" in done.out
    assert "report.html (to print), bases.html (bases), tables.xlsx (workbook)" in done.out
    assert "caution: aircraft tourer" in done.err, "findings go to stderr"
    assert "%|" not in done.err, "no progress bar where stderr is no terminal"


def test_run_takes_the_folder_and_writes_to_maps_by_default(study_folder, command, tmp_path):
    done = command("run", study_folder(name="strips 1").folder)
    assert done.code == 0
    assert tree(tmp_path / "maps" / "strips 1") == FILES


def test_run_keeps_synthetic_weather_out_of_the_store(study_folder, command, store_folder):
    assert command("run", study_folder("synthetic").file).code == 0
    assert not store_folder.exists()


def test_run_uses_the_folder_of_the_store_option(study_folder, command, tmp_path, store_folder):
    assert command("run", study_folder("files").file, "--store", "mine").code == 0
    assert len(list((tmp_path / "mine").rglob("*.parquet"))) == 3
    assert not store_folder.exists()


def test_run_tells_that_a_damaged_entry_was_rebuilt(study_folder, command, store_folder):
    study = study_folder("files")
    command("run", study.file)
    next(store_folder.rglob("*.parquet")).write_bytes(b"junk")
    done = command("run", study.file)
    assert done.code == 0
    assert "note: 1 damaged entries of the store were rebuilt." in done.err


# ---------------------------------------------------------------- bad input


def far_stations(s):
    s.write("fields.csv", FIELDS.replace("VALE", ""))
    return s.write("stations.csv", SYNTHETIC_STATIONS.replace("46.5", "-46.5"))


def other_years(s):
    s.change("study.toml", "first_year = 2021", "first_year = 1991")
    return s.change("study.toml", "last_year = 2022", "last_year = 1992")


#: Source, how the study is spoilt, and what the one sentence must name: file, place, value.
BAD = {
    "missing column": (
        "synthetic",
        lambda s: s.write("runways.csv", RUNWAYS.replace("heading_deg,", "").replace(",90,", ",")),
        ("runways.csv", "'heading_deg' is missing"),
    ),
    "wrong unit": (
        "synthetic",
        lambda s: s.change("fields.csv", "elevation_m", "elevation_km"),
        ("fields.csv", "'elevation_km' is not known", "'elevation_m'"),
    ),
    "both units": (
        "synthetic",
        lambda s: s.change("fields.csv", "timezone", "elevation_ft"),
        ("fields.csv", "exactly one of elevation_m and elevation_ft"),
    ),
    "unknown key": (
        "synthetic",
        lambda s: s.change("study.toml", "radius_km", "radius"),
        ("study.toml", "'weather.radius' is not known", "'radius_km'"),
    ),
    "unknown key of an aircraft": (
        "synthetic",
        lambda s: s.change("aircraft/trainer.toml", "speed_kt", "speed"),
        ("aircraft/trainer.toml", "'climb.0.speed' is not known", "'speed_kt'"),
    ),
    "unknown field in runways": (
        "synthetic",
        lambda s: s.change("runways.csv", "MID,21", "MIDD,21"),
        ("runways.csv, line 5", "'MIDD'", "'MID'"),
    ),
    "non-monotonic table": (
        "synthetic",
        lambda s: s.change("aircraft/trainer.toml", "[160, 190, 235]", "[160, 240, 235]"),
        ("aircraft/trainer.toml", "[[takeoff]] block 1", "ground_roll_m", "row 1, column 2"),
    ),
    "empty archive": (
        "files",
        lambda s: s.write("archive/vale_2022.csv", ""),
        ("archive", "vale_2022.csv", "is empty"),
    ),
    "archive of a header only": (
        "files",
        lambda s: s.write("archive/vale_2022.csv", "station,valid,tmpc,dwpc,alti\n"),
        ("archive", "vale_2022.csv", "no line of data"),
    ),
    "archive of another format": (
        "files",
        lambda s: s.change("stations.csv", "asos", "inmet").write("archive/vale_2022.csv", "x\n"),
        None,
    ),
    "archive without a mapped column": (
        "files",
        lambda s: s.change("archive/pass.txt", "air", "luft"),
        ("pass.txt", "'air'", "not in the header"),
    ),
    "no station near": ("synthetic", far_stations, ("study.toml", "usable station")),
    "no station in the years": ("files", other_years, ("study.toml", "usable", "1991-1992")),
    "no such study": (
        "synthetic",
        lambda s: s.file.unlink(),
        ("study.toml", "there is no such file"),
    ),
    "not TOML": ("synthetic", lambda s: s.write("study.toml", "x\n"), ("study.toml", "line 1")),
    "not UTF-8": (
        "synthetic",
        lambda s: s.write("fields.csv", FIELDS.replace("Top", "Tõp").encode("latin-1")),
        ("fields.csv, line 4", "not UTF-8"),
    ),
}


def parsed_only(store: Path) -> bool:
    """Whether the store holds nothing but whole entries."""
    return all(p.suffix == ".parquet" or p.is_dir() for p in store.rglob("*"))


@pytest.mark.parametrize("name", BAD)
def test_bad_input_is_one_sentence_exit_1_and_nothing_written(
    study_folder, command, tmp_path, store_folder, name
):
    source, spoil, parts = BAD[name]
    study = study_folder(source)
    spoil(study)
    before = tree(tmp_path)
    done = command("run", study.file, "--out", "out/deeper")
    assert done.code == 1
    assert done.out == ""
    assert "Traceback" not in done.err
    assert done.err.splitlines() == done.errors, "only error sentences"
    assert len(done.errors) >= 1
    if parts is not None:
        assert len(done.errors) == 1, done.err
        assert all(part in done.err for part in parts), done.err
    after = {p for p in tree(tmp_path) if not p.startswith(store_folder.name)}
    assert after == before
    assert parsed_only(store_folder)


@pytest.mark.parametrize("name", ["wrong unit", "empty archive", "no station near"])
def test_bad_input_in_a_real_process(study_folder, tmp_path, name):
    source, spoil, parts = BAD[name]
    study = study_folder(source)
    spoil(study)
    done = subprocess_of(tmp_path, "run", study.file)
    assert done.returncode == 1
    assert done.stdout == ""
    assert done.stderr.startswith("error: ")
    assert done.stderr.count("\n") == 1
    assert all(part in done.stderr for part in parts)
    assert not (tmp_path / "maps").exists()


def test_a_failed_run_leaves_the_earlier_results(study_folder, command, tmp_path):
    study = study_folder()
    assert command("run", study.file, "--out", "out").code == 0
    before = {p.name: p.read_bytes() for p in (tmp_path / "out").iterdir()}
    study.change("fields.csv", "elevation_m", "elevation")
    assert command("run", study.file, "--out", "out").code == 1
    assert {p.name: p.read_bytes() for p in (tmp_path / "out").iterdir()} == before


@pytest.mark.parametrize("option", ["--out", "--store"])
def test_a_file_in_place_of_a_folder_is_one_sentence(study_folder, command, tmp_path, option):
    (tmp_path / "file").write_text("mine")
    done = command("run", study_folder("files").file, option, "file")
    assert done.code == 1
    assert len(done.errors) == 1
    assert "file: the " in done.err
    assert "cannot be written" in done.err
    assert (tmp_path / "file").read_text() == "mine"
    assert not (tmp_path / "maps").exists()


# ---------------------------------------------------------------- check


@pytest.mark.parametrize("source", ["synthetic", "files"])
def test_check_says_what_a_run_would_do_and_writes_nothing(
    study_folder, command, tmp_path, store_folder, source
):
    study = study_folder(source)
    before = tree(tmp_path)
    done = command("check", study.file)
    assert done.code == 0
    assert "Study: Small study (invented)" in done.out
    assert "Fields: 3; aircraft: 2; stations: 2" in done.out
    assert "A run would write to: maps/study" in done.out
    assert "1728 of 1728 month x hour cells have figures" in done.out
    assert "caution: field TOP: runway direction 12 slopes 8 %" in done.err
    assert tree(tmp_path) == before
    assert not store_folder.exists()


def test_check_and_run_find_the_same(study_folder, command):
    study = study_folder("files")
    checked, ran = command("check", study.file), command("run", study.file)
    # A check has no study.json to put the notes in, so it shows them too.
    cautions = [line for line in ran.err.splitlines() if not line.endswith("study.json.")]
    assert [x for x in checked.err.splitlines() if not x.startswith("note:")] == cautions
    assert "1728 of 1728 month x hour cells have figures" in checked.out
    assert "1,728 of 1,728 month x hour cells, from" in ran.out


def test_check_tells_every_problem_at_once(study_folder, command, tmp_path):
    study = study_folder("files")
    study.change("study.toml", '["06-15", "09-15"]', '["06-31", "09-15"]')
    study.change("runways.csv", "1.5,grass", "1.5,tarmac")
    study.change("aircraft/trainer.toml", "[160, 190, 235]", "[160, 240, 235]")
    study.change("stations.csv", "archive/pass.txt", "archive/paß.txt")
    before = tree(tmp_path)
    done = command("check", study.file)
    assert done.code == 1
    assert done.out == ""
    for name in ("study.toml: ", "runways.csv, line 4", "trainer.toml: ", "stations.csv, line 3"):
        assert sum(name in e for e in done.errors) == 1, done.err
    assert tree(tmp_path) == before


def test_two_damaged_archives_are_both_told(study_folder, command):
    study = study_folder("files")
    study.write("archive/vale_2021.csv", "").write("archive/pass.txt", "")
    done = command("check", study.file)
    assert done.code == 1
    assert [name in done.err for name in ("vale_2021.csv", "pass.txt")] == [True, True]
    assert len(done.errors) == 2


# ---------------------------------------------------------------- usage, help, interruption


@pytest.mark.parametrize(
    "arguments",
    [
        (),
        ("fly",),
        ("run",),
        ("run", "a", "b"),
        ("run", "--nope"),
        ("run", "a", "--out"),
        ("check", "a", "--out", "b"),
        ("demo", "a"),
        ("fetch",),
    ],
    ids=" ".join,
)
def test_wrong_usage_exits_2(command, arguments):
    done = command(*arguments)
    assert done.code == 2
    assert "Traceback" not in done.err


def test_wrong_usage_exits_2_in_a_real_process(tmp_path):
    assert subprocess_of(tmp_path, "run").returncode == 2
    assert tree(tmp_path) == set()


@pytest.mark.parametrize("name", COMMANDS)
def test_help_has_an_example_of_the_command(command, name):
    done = command(name, "--help")
    assert done.code == 0
    assert f"Example: climarisk {name}" in done.out
    assert done.err == ""


def test_help_names_every_command_that_there_is(command):
    registered = {c.callback.__name__ for c in climarisk.cli.app.registered_commands}
    assert registered >= set(COMMANDS)
    out = command("--help").out
    assert all(f"  {name} " in out for name in registered)


def test_fetch_refuses_a_study_that_needs_no_fetching(study_folder, command, store_folder):
    done = command("fetch", study_folder().file)
    assert done.code == 1
    assert len(done.errors) == 1
    assert 'source = "meteostat"' in done.err
    assert not store_folder.exists()


def test_an_interruption_exits_130_and_writes_nothing(study_folder, command, tmp_path, monkeypatch):
    def interrupt(_):
        raise KeyboardInterrupt

    study = study_folder()
    monkeypatch.setattr(study_module, "read_study", interrupt)
    done = command("run", study.file)
    assert done.code == 130
    assert "Traceback" not in done.err
    assert not (tmp_path / "maps").exists()


def test_a_defect_of_ours_is_still_one_sentence_and_exit_1(
    study_folder, command, tmp_path, monkeypatch
):
    def break_(_):
        raise RuntimeError("odd\nthing")

    study = study_folder()
    monkeypatch.setattr(study_module, "read_study", break_)
    monkeypatch.delenv("CLIMARISK_TRACEBACK")
    done = command("run", study.file)
    assert done.code == 1
    assert len(done.err.splitlines()) == 1
    assert "this is a defect" in done.err
    assert tree(tmp_path) == {"study", *(f"study/{p}" for p in tree(study.folder))}


# ---------------------------------------------------------------- text from files on a console


def test_markup_and_control_signs_in_a_title_are_shown_as_text(study_folder, command):
    title = "[red]x[/red] [/] \\u001b".replace("\\u001b", "\\u202e\\u009b31m")
    study = study_folder().change("study.toml", "Small study (invented)", title)
    done = command("run", study.file)
    assert done.code == 0
    assert "[red]x[/red] [/]" in done.out
    assert not {"\x1b", "\x9b", "\u202e"} & set(done.out + done.err)


def test_markup_in_a_path_is_shown_as_text(command):
    done = command("run", "[bold]no[/bold] [/].toml")
    assert done.code == 1
    assert "[bold]no[/bold] [/].toml: there is no such file" in done.err


@pytest.mark.parametrize("encoding", ["ascii", "cp1252"])
def test_a_title_beyond_the_encoding_of_the_stream_does_not_fail_the_run(
    study_folder, tmp_path, encoding
):
    # Redirected output on a Windows console has the code page of the system, such as cp1252.
    study = study_folder().change("study.toml", "Small study", "Łąka 日本")
    done = subprocess_of(tmp_path, "check", study.file, PYTHONIOENCODING=encoding)
    assert done.returncode == 0


# ---------------------------------------------------------------- the user's own files


def test_a_run_never_overwrites_a_file_of_the_study(study_folder, command):
    import geopandas
    import pandas as pd

    study = study_folder()
    table = pd.read_csv(study.folder / "fields.csv").drop(columns=["timezone", "stations"])
    points = geopandas.points_from_xy(table.pop("longitude"), table.pop("latitude"))
    layer = geopandas.GeoDataFrame(table, geometry=points, crs=4326)
    layer.to_file(study.folder / "fields.geojson", driver="GeoJSON")
    study.change("study.toml", "fields.csv", "fields.geojson")
    before = (study.folder / "fields.geojson").read_bytes()
    command("run", study.file, "--out", study.folder)
    assert (study.folder / "fields.geojson").read_bytes() == before


# ---------------------------------------------------------------- schedule, bases, evidence

FLIGHTS = """\
flight,field,aircraft,operation,season,weekdays,time
morning,LOW,trainer,both,summer,Mon-Fri,08:00
noon,TOP,trainer,takeoff,summer,,12:30
"""


def with_flights(study_folder, text: str = FLIGHTS):
    study = study_folder("synthetic")
    season = next(s.name for s in study_module.read_study(study.file).seasons)
    return study.write("flights.csv", text.replace("summer", season))


def test_schedule_writes_its_page_and_tables_and_tells_how_many_fall_short(
    study_folder, command, tmp_path
):
    study = with_flights(study_folder)
    done = command("schedule", study.file, study.folder / "flights.csv", "--out", "planned")
    assert done.code == 0, done.err
    assert tree(tmp_path / "planned") == ONLY_WHERE_ASKED - {"scenarios.csv"}
    assert "flights" in done.out
    assert "planned" in done.out


def test_a_run_whose_study_names_a_schedule_writes_it_too(study_folder, command, tmp_path):
    study = with_flights(study_folder)
    study.change("study.toml", "[period]", 'schedule = "flights.csv"\n[period]')
    assert command("run", study.file, "--out", "results").code == 0
    alone = command("schedule", study.file, study.folder / "flights.csv", "--out", "alone")
    assert alone.code == 0
    assert tree(tmp_path / "results") == set(OUTPUT_FILES) - {"scenarios.csv"}
    for name in tree(tmp_path / "alone"):
        assert (tmp_path / "alone" / name).read_bytes() == (
            tmp_path / "results" / name
        ).read_bytes(), name


def test_the_year_of_the_call_counts_for_the_schedule(study_folder, command, tmp_path):
    study = with_flights(study_folder)
    for year in ("2027", "2028"):
        arguments = (study.file, study.folder / "flights.csv", "--out", year, "--year", year)
        assert command("schedule", *arguments).code == 0
        assert f"{year}-" in (tmp_path / year / "schedule_days.csv").read_text()


def test_a_schedule_with_problems_is_refused_whole(study_folder, command, tmp_path):
    study = with_flights(study_folder, FLIGHTS.replace("TOP", "TIP").replace("08:00", "25:00"))
    done = command("schedule", study.file, study.folder / "flights.csv", "--out", "planned")
    assert done.code == 1
    assert len(done.errors) == 2, "both problems, a line each"
    assert not (tmp_path / "planned").exists()


def test_bases_writes_its_page_and_tables_and_names_the_best(study_folder, command, tmp_path):
    done = command("bases", study_folder().file, "--out", "sides")
    assert done.code == 0
    assert tree(tmp_path / "sides") == {"bases.html", "bases.csv", "base_differences.csv"}
    assert "Low meadow" in done.out


def test_evidence_is_written_and_holds_when_checked(command, study_folder, tmp_path):
    study = study_folder()
    told = command("evidence", study.file, "--out", tmp_path / "filed")
    assert told.code == 0
    assert "SHA-256 of evidence.zip: " in told.out
    checked = command("evidence", "--check", tmp_path / "filed")
    assert checked.code == 0
    assert "run again, the study gives the same" in checked.out
    (tmp_path / "filed" / "trends.csv").write_text("")
    spoilt = command("evidence", "--check", tmp_path / "filed")
    assert (spoilt.code, len(spoilt.errors)) == (1, 1)
    assert "trends.csv" in spoilt.out


@pytest.mark.parametrize("arguments", [(), ("--study", "x.toml"), ("x.toml", "--check", "y")])
def test_evidence_with_the_wrong_arguments_is_a_usage_error(command, arguments):
    assert command("evidence", *arguments).code == 2
