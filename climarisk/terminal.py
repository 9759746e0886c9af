"""What the commands print with: results to stdout, notes and progress to stderr."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

from rich.console import Console
from rich.markup import escape
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TaskID, TextColumn

if TYPE_CHECKING:
    from climarisk.findings import Finding

#: Findings that a run prints; study.json and `climarisk check` have them all.
_MOST_FINDINGS = 20
notes = Console(stderr=True, soft_wrap=True, highlight=False)
results = Console(soft_wrap=True, highlight=False)


class Bars:
    """Progress bars on stderr; silent where stderr is no terminal."""

    def __enter__(self) -> Callable[[str, int, int], None]:
        self._progress = Progress(
            TextColumn("{task.description}"),
            BarColumn(),
            MofNCompleteColumn(),
            console=notes,
            transient=True,
            disable=not notes.is_terminal,
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


def escaped(text: str) -> str:
    """Text that neither the console's markup nor a control character in it can change."""
    return escape("".join(c if c.isprintable() else "\N{REPLACEMENT CHARACTER}" for c in text))


def print_findings(findings: Sequence[Finding], all_in: str = "study.json") -> None:
    """The findings that are more than notes, on stderr; of very many the first.

    Parameters
    ----------
    findings : sequence of Finding
    all_in : str
        Where the others are.
    """
    serious = [finding for finding in findings if finding.severity != "note"]
    for finding in serious[:_MOST_FINDINGS]:
        notes.print(escaped(str(finding)))
    if len(serious) > _MOST_FINDINGS:
        notes.print(f"{len(serious) - _MOST_FINDINGS} cautions and rejections more in {all_in}.")
    others = len(findings) - len(serious)
    if others:
        notes.print(f"{others} notes more in {all_in}.")
