"""What the program has to say about its own input: notes, cautions, rejections."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import asdict, dataclass
from typing import Literal

Severity = Literal["note", "caution", "reject"]
Subject = Literal["station", "field", "aircraft", "study"]

_SEVERITY_ORDER = {"reject": 0, "caution": 1, "note": 2}


@dataclass(frozen=True)
class Finding:
    """One thing the quality control or a completeness rule has to say.

    Parameters
    ----------
    severity : {"note", "caution", "reject"}
        ``reject`` means that data were not used because of it.
    subject : {"station", "field", "aircraft", "study"}
    id : str
        Identifier of the station, field or aircraft profile; the study's title otherwise.
    check : str
        Short stable name of the check, lower case with hyphens.
    message : str
        One sentence for the user.
    """

    severity: Severity
    subject: Subject
    id: str
    check: str
    message: str

    def as_dict(self) -> dict[str, str]:
        """The five keys of the ``findings`` list of ``study.json``."""
        return asdict(self)

    def __str__(self) -> str:
        return f"{self.severity}: {self.subject} {self.id}: {self.message}"


def sort_findings(findings: Iterable[Finding]) -> tuple[Finding, ...]:
    """Findings without repeats, worst first, then by subject and id: a stable order."""
    return tuple(
        sorted(
            set(findings),
            key=lambda f: (_SEVERITY_ORDER[f.severity], f.subject, f.id, f.check, f.message),
        )
    )
