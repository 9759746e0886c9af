"""The commands."""

from __future__ import annotations

import io
import os
import sys
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Literal

import typer

from climarisk.errors import ClimariskError
from climarisk.terminal import Bars, escaped, notes, print_findings, results

if TYPE_CHECKING:
    from climarisk.results import StudyResult
    from climarisk.store import Store
    from climarisk.study import Study

#: Where the findings are of commands that write no study.json.
_CHECK_TELLS = "what climarisk check tells"

app = typer.Typer(
    name="climarisk",
    help="Seasonal density-altitude and humidity risk of airfields: which months and hours "
    "suit which aircraft, from past weather.",
    no_args_is_help=True,
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
)
_StudyPath = Annotated[
    Path, typer.Argument(metavar="STUDY.toml", help="The study file, or the folder that holds it.")
]
_Out = Annotated[
    Path | None, typer.Option("--out", help="Output folder; default maps/<study folder name>.")
]
_StoreFolder = Annotated[
    Path | None,
    typer.Option("--store", help="Folder that keeps parsed hours; default the user's cache."),
]
_Warmer = Annotated[
    list[float] | None,
    typer.Option(
        "--warmer",
        metavar="K",
        help="Also with the air K kelvins warmer, in scenarios.csv; repeatable.",
    ),
]
_WarmerHolds = Annotated[
    Literal["relative-humidity", "vapour-pressure"],
    typer.Option("--warmer-holds", help="What stays unchanged when the air is warmer."),
]
_Years = Annotated[
    list[str] | None,
    typer.Option(
        "--years", metavar="A-B", help="Also for these years alone, in scenarios.csv; repeatable."
    ),
]
_Limit = Annotated[
    float | None,
    typer.Option(
        "--limit-ft",
        help="Density altitude whose exceedance is scored; default each station's own 90th "
        "percentile.",
    ),
]
_Year = Annotated[
    int | None,
    typer.Option(
        "--year", help="The year whose calendar and clock count; default the study's planning year."
    ),
]
_EvidenceStudy = Annotated[
    Path | None,
    typer.Argument(
        metavar="STUDY.toml",
        help="The study file, or the folder that holds it.",
        show_default=False,
    ),
]
_EvidenceOut = Annotated[
    Path | None,
    typer.Option("--out", help="Evidence folder of its own; default evidence/<study folder name>."),
]
_Check = Annotated[
    Path | None,
    typer.Option("--check", metavar="DIR", help="Check an evidence folder instead of writing one."),
]
_CheckStudy = Annotated[
    Path | None,
    typer.Option(
        "--study",
        metavar="STUDY.toml",
        help="With --check: run this study again; default the copy, where its weather is invented.",
    ),
]
_Offline = Annotated[bool, typer.Option("--offline", help="Never touch the network.")]


@app.command(epilog="Example: climarisk demo")
def demo(out: _Out = None) -> None:
    """Run the invented demo study, without a network."""
    _run(_demo_study(), out, None, offline=True)


@app.command(
    epilog="Example: climarisk run strips/study.toml --out maps/strips --warmer 2 --years 2015-2024"
)
def run(
    study: _StudyPath,
    out: _Out = None,
    store: _StoreFolder = None,
    offline: _Offline = False,
    warmer: _Warmer = None,
    warmer_holds: _WarmerHolds = "relative-humidity",
    years: _Years = None,
) -> None:
    """Run a study: write the map and the tables."""
    asked = _Asked(tuple(warmer or ()), warmer_holds.replace("-", " "), tuple(years or ()))
    _run(study, out, store, offline, asked)


@app.command(epilog="Example: climarisk check strips/study.toml")
def check(study: _StudyPath, store: _StoreFolder = None) -> None:
    """Say what a run would do, and every problem at once."""
    from climarisk.pipeline import evaluate
    from climarisk.study import read_study
    from climarisk.weather import load_weather

    read = read_study(study)
    _print_plan(read, _output_folder(read, None))
    if read.source == "meteostat":
        results.print("The weather comes from the online archive; climarisk fetch reads it.")
        return
    with Bars() as progress:
        weather = load_weather(read, _read_only_store(store), progress, offline=True)
        result = evaluate(read, weather, progress)
    for finding in result.findings:
        notes.print(escaped(str(finding)))
    results.print(escaped(_coverage_line(result)))


@app.command(epilog="Example: climarisk verify strips/study.toml --limit-ft 6000")
def verify(
    study: _StudyPath,
    out: _Out = None,
    limit_ft: _Limit = None,
    store: _StoreFolder = None,
    offline: _Offline = False,
) -> None:
    """Hide each station in turn: how far to trust each field."""
    from climarisk.outputs.verification import plain_text, write_verification
    from climarisk.study import read_study
    from climarisk.verification import check_limit, verify_study
    from climarisk.weather import load_weather

    check_limit(limit_ft)
    read = read_study(study)
    kept = _store(store) if read.source != "synthetic" else None
    with Bars() as progress:
        weather = load_weather(read, kept, progress, offline)
        report = verify_study(read, weather, progress, limit_ft)
        folder = _output_folder(read, out)
        files = write_verification(report, folder)
    print_findings([f for f in weather.findings if f.severity != "note"])
    for line in plain_text(report).splitlines():
        results.print(escaped(line))
    results.print(escaped(f"Verification: {', '.join(f.name for f in files)} in {folder}"))


@app.command(epilog="Example: climarisk evidence strips/study.toml --out evidence/strips")
def evidence(
    study: _EvidenceStudy = None,
    out: _EvidenceOut = None,
    check: _Check = None,
    again: _CheckStudy = None,
    store: _StoreFolder = None,
    offline: _Offline = False,
) -> None:
    """Write a folder that a reviewer can file, or check one."""
    if check is not None:
        if study is not None or out is not None:
            raise typer.BadParameter("--check takes no other study than --study, and no --out")
        _check_evidence(check, again, store)
        return
    if study is None or again is not None:
        raise typer.BadParameter("give a STUDY.toml to write evidence, or --check DIR")
    from climarisk.outputs.evidence.folder import digest_of, make_evidence
    from climarisk.study import read_study

    read = read_study(study)
    folder = out if out is not None else Path("evidence") / read.name
    kept = _store(store) if read.source != "synthetic" else None
    with Bars() as progress:
        result, files = make_evidence(study, folder, kept, progress, offline)
    print_findings(result.findings)
    results.print(escaped(f"Evidence: {len(files)} files in {folder}"))
    results.print(escaped(f"SHA-256 of evidence.zip: {digest_of(folder / 'evidence.zip')}"))


def _check_evidence(folder: Path, study: Path | None, store: Path | None) -> None:
    from climarisk.outputs.evidence.check import check_evidence, is_repeatable
    from climarisk.outputs.evidence.words import check_words

    with Bars() as progress:
        problems = check_evidence(folder, study, _store(store), progress)
    for problem in problems:
        results.print(escaped(problem))
    if problems:
        raise ClimariskError(f"{folder}: the evidence does not hold; see above.")
    repeated = study is not None or is_repeatable(folder)
    results.print(escaped(f"{folder}: {check_words(repeated)}."))


@app.command(epilog="Example: climarisk fetch strips/study.toml")
def fetch(study: _StudyPath, store: _StoreFolder = None) -> None:
    """Fill the store from the online archive."""
    from climarisk.errors import InputError
    from climarisk.online import fetch_stations
    from climarisk.study import read_study

    read = read_study(study)
    if read.source != "meteostat":
        raise InputError(
            f"{read.path}: the weather source is {read.source!r}, which needs no fetching; "
            'set source = "meteostat" under [weather] to use the online archive.'
        )
    with Bars() as progress:
        stations = fetch_stations(read, _store(store), progress, offline=False)
    for item in stations:
        results.print(
            escaped(f"{item.station.id} {item.station.name}: {len(item.files)} years in the store")
        )
    print_findings([f for item in stations for f in item.findings])


@app.command(epilog="Example: climarisk schedule strips/study.toml summer.csv --year 2027")
def schedule(
    study: _StudyPath,
    flights: Annotated[
        Path, typer.Argument(metavar="FLIGHTS.csv", help="The flights, one row each.")
    ],
    out: _Out = None,
    store: _StoreFolder = None,
    offline: _Offline = False,
    year: _Year = None,
) -> None:
    """Hold a schedule against the record, flight by flight."""
    from climarisk.outputs.summary import schedule_lines
    from climarisk.outputs.tables import write_schedule
    from climarisk.pipeline import evaluate_schedule
    from climarisk.study import read_study
    from climarisk.weather import load_weather

    read = read_study(study, flights, year)
    folder = _output_folder(read, out)
    _refuse_overwriting(read, folder)
    kept = _store(store) if read.source != "synthetic" else None
    with Bars() as progress:
        weather = load_weather(read, kept, progress, offline)
        frames, findings = evaluate_schedule(read, weather, progress)
        files = write_schedule(read, frames, folder)
    print_findings(findings, _CHECK_TELLS)
    for line in schedule_lines(frames, read.confidence, folder, files):
        results.print(escaped(line))


@app.command(epilog="Example: climarisk bases strips/study.toml")
def bases(
    study: _StudyPath,
    out: _Out = None,
    store: _StoreFolder = None,
    offline: _Offline = False,
) -> None:
    """Rank the fields as bases for the fleet."""
    from climarisk.outputs.summary import bases_lines
    from climarisk.outputs.tables import write_bases
    from climarisk.pipeline import evaluate
    from climarisk.study import read_study
    from climarisk.weather import load_weather

    read = replace(read_study(study), flights=())
    folder = _output_folder(read, out)
    _refuse_overwriting(read, folder)
    kept = _store(store) if read.source != "synthetic" else None
    with Bars() as progress:
        weather = load_weather(read, kept, progress, offline)
        result = evaluate(read, weather, progress)
        files = write_bases(result, folder)
    print_findings(result.findings, _CHECK_TELLS)
    for line in bases_lines(result, folder, files):
        results.print(escaped(line))


@dataclass(frozen=True)
class _Asked:
    """Scenarios asked for on the command line."""

    warmer_k: tuple[float, ...] = ()
    holds: str = "relative humidity"
    years: tuple[str, ...] = ()


def _run(
    study: Path, out: Path | None, store: Path | None, offline: bool, asked: _Asked = _Asked()
) -> None:
    from climarisk.outputs.summary import summary_lines
    from climarisk.outputs.tables import write_outputs
    from climarisk.pipeline import evaluate
    from climarisk.scenarios import compare, scenarios
    from climarisk.study import read_study
    from climarisk.weather import load_weather

    read = read_study(study)
    variants = scenarios(read, asked.warmer_k, asked.holds, asked.years)
    folder = _output_folder(read, out)
    _refuse_overwriting(read, folder)
    kept = _store(store) if read.source != "synthetic" else None
    with Bars() as progress:
        weather = load_weather(read, kept, progress, offline)
        result = evaluate(read, weather, progress)
        if variants:
            result = replace(result, scenarios=compare(result, variants, weather, progress))
        progress("writing results", 0, 1)
        files = write_outputs(result, folder)
        progress("writing results", 1, 1)
    if kept is not None and kept.damaged:
        notes.print(f"note: {len(kept.damaged)} damaged entries of the store were rebuilt.")
    print_findings(result.findings)
    for line in summary_lines(result, folder, files):
        results.print(escaped(line))


def _demo_study() -> Path:
    """The demo study beside the package when installed, beside the checkout otherwise."""
    package = Path(__file__).parent
    for folder in (package / "demo_fields", package.parent / "demo_fields"):
        if (folder / "study.toml").is_file():
            return folder / "study.toml"
    raise ClimariskError(f"{package}: the demo study is missing; install climarisk again.")


def _output_folder(study: Study, out: Path | None) -> Path:
    return out if out is not None else Path("maps") / study.name


def _refuse_overwriting(study: Study, folder: Path) -> None:
    """Refuse an output folder in which a run would replace a file of the study."""
    from climarisk.errors import InputError
    from climarisk.outputs.tables import OUTPUT_FILES

    read = {path.resolve() for path in study.inputs}
    read |= {path.resolve() for station in study.stations for path in station.files}
    for name in OUTPUT_FILES:
        if (folder / name).resolve() in read:
            raise InputError(
                f"{folder / name}: the run would replace this file, which the study reads; "
                "choose another folder with --out."
            )


def _store(folder: Path | None) -> Store:
    from climarisk.store import Store, default_folder

    return Store(folder if folder is not None else default_folder())


def _read_only_store(folder: Path | None) -> Store:
    """The store without writing to it."""
    from climarisk.store import ReadOnlyStore, default_folder

    return ReadOnlyStore(folder if folder is not None else default_folder())


def _print_plan(study: Study, folder: Path) -> None:
    lines = [
        f"Study: {study.title}",
        f"Period: {study.first_year}-{study.last_year}; hours window: {study.window}",
        f"Fields: {len(study.fields)}; aircraft: {len(study.aircraft)}; "
        f"stations: {len(study.stations)} ({study.source})",
        f"A run would write to: {folder}",
    ]
    for line in lines:
        results.print(escaped(line))


def _coverage_line(result: StudyResult) -> str:
    cells = len(result.risk_hourly)
    known = int(result.risk_hourly["shortfall"].notna().sum())
    return (
        f"{result.title}: {len(result.fields)} fields x {len(result.aircraft)} aircraft; "
        f"{known} of {cells} month x hour cells have figures, the others lack data."
    )


def main() -> None:
    """Run the command line; the exit code belongs to the exception."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="replace")  # a terminal that lacks a letter is no failure
    try:
        app()
    except ClimariskError as error:
        for line in str(error).splitlines() or [""]:
            notes.print(escaped(f"error: {line}"))
        sys.exit(error.exit_code)
    except Exception as error:  # a defect of ours: still one sentence, unless asked for more
        if os.environ.get("CLIMARISK_TRACEBACK"):
            raise
        notes.print(
            escaped(
                f"error: climarisk met something it did not expect ({type(error).__name__}: "
                f"{error}); this is a defect. Set CLIMARISK_TRACEBACK=1 and report what it prints."
            )
        )
        sys.exit(ClimariskError.exit_code)
