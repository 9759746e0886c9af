"""The commands.  The only module that prints."""

from __future__ import annotations

import io
import os
import sys
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Literal

import typer
from rich.console import Console
from rich.markup import escape
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TaskID, TextColumn

from climarisk.errors import ClimariskError

if TYPE_CHECKING:
    from collections.abc import Callable

    from climarisk.findings import Finding
    from climarisk.results import StudyResult
    from climarisk.store import Store
    from climarisk.study import Study

app = typer.Typer(
    name="climarisk",
    help="Seasonal density-altitude and humidity risk of airfields: which months and hours "
    "suit which aircraft, from past weather.",
    no_args_is_help=True,
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
)
#: Findings that a run prints; study.json and `climarisk check` have them all.
_MOST_FINDINGS = 20
_notes = Console(stderr=True, soft_wrap=True, highlight=False)
_results = Console(soft_wrap=True, highlight=False)

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
        _results.print("The weather comes from the online archive; climarisk fetch reads it.")
        return
    with _bar() as progress:
        weather = load_weather(read, _read_only_store(store), progress, offline=True)
        result = evaluate(read, weather, progress)
    for finding in result.findings:
        _notes.print(_escaped(str(finding)))
    _results.print(_escaped(_coverage_line(result)))


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
    with _bar() as progress:
        weather = load_weather(read, kept, progress, offline)
        report = verify_study(read, weather, progress, limit_ft)
        folder = _output_folder(read, out)
        files = write_verification(report, folder)
    _print_findings([f for f in weather.findings if f.severity != "note"])
    for line in plain_text(report).splitlines():
        _results.print(_escaped(line))
    _results.print(_escaped(f"Verification: {', '.join(f.name for f in files)} in {folder}"))


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
    with _bar() as progress:
        stations = fetch_stations(read, _store(store), progress, offline=False)
    for item in stations:
        _results.print(
            _escaped(f"{item.station.id} {item.station.name}: {len(item.files)} years in the store")
        )
    _print_findings([f for item in stations for f in item.findings])


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
    with _bar() as progress:
        weather = load_weather(read, kept, progress, offline)
        result = evaluate(read, weather, progress)
        if variants:
            result = replace(result, scenarios=compare(result, variants, weather, progress))
        progress("writing results", 0, 1)
        files = write_outputs(result, folder)
        progress("writing results", 1, 1)
    if kept is not None and kept.damaged:
        _notes.print(f"note: {len(kept.damaged)} damaged entries of the store were rebuilt.")
    _print_findings(result.findings)
    for line in summary_lines(result, folder, files):
        _results.print(_escaped(line))


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


class _bar:
    """Progress bars on stderr; silent where stderr is no terminal."""

    def __enter__(self) -> Callable[[str, int, int], None]:
        self._progress = Progress(
            TextColumn("{task.description}"),
            BarColumn(),
            MofNCompleteColumn(),
            console=_notes,
            transient=True,
            disable=not _notes.is_terminal,
        )
        self._tasks: dict[str, TaskID] = {}
        self._progress.start()
        return self._show

    def _show(self, message: str, done: int, total: int) -> None:
        if message not in self._tasks:
            self._tasks[message] = self._progress.add_task(escape(message), total=total)
        self._progress.update(self._tasks[message], completed=done, total=total)

    def __exit__(self, *_: object) -> None:
        self._progress.stop()


def _escaped(text: str) -> str:
    """Text that neither the console's markup nor a control character in it can change."""
    return escape("".join(c if c.isprintable() else "\N{REPLACEMENT CHARACTER}" for c in text))


def _print_findings(findings: list[Finding] | tuple[Finding, ...]) -> None:
    """The findings that are more than notes, on stderr; of very many the first."""
    serious = [finding for finding in findings if finding.severity != "note"]
    for finding in serious[:_MOST_FINDINGS]:
        _notes.print(_escaped(str(finding)))
    if len(serious) > _MOST_FINDINGS:
        _notes.print(f"{len(serious) - _MOST_FINDINGS} cautions and rejections more in study.json.")
    notes = len(findings) - len(serious)
    if notes:
        _notes.print(f"{notes} notes more in study.json.")


def _print_plan(study: Study, folder: Path) -> None:
    lines = [
        f"Study: {study.title}",
        f"Period: {study.first_year}-{study.last_year}; hours window: {study.window}",
        f"Fields: {len(study.fields)}; aircraft: {len(study.aircraft)}; "
        f"stations: {len(study.stations)} ({study.source})",
        f"A run would write to: {folder}",
    ]
    for line in lines:
        _results.print(_escaped(line))


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
            _notes.print(_escaped(f"error: {line}"))
        sys.exit(error.exit_code)
    except Exception as error:  # a defect of ours: still one sentence, unless asked for more
        if os.environ.get("CLIMARISK_TRACEBACK"):
            raise
        _notes.print(
            _escaped(
                f"error: climarisk met something it did not expect ({type(error).__name__}: "
                f"{error}); this is a defect. Set CLIMARISK_TRACEBACK=1 and report what it prints."
            )
        )
        sys.exit(ClimariskError.exit_code)
