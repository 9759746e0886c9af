"""The one exception tree of the program.

Every error that a user can cause is a sentence: where it is, what came, what is
allowed, what to do.  The exit code belongs to the exception.
"""

from __future__ import annotations

from collections.abc import Iterable


class ClimariskError(Exception):
    """Base of every error that climarisk raises on purpose; exit code 1."""

    exit_code = 1


class InputError(ClimariskError):
    """One or more things are wrong in the files a user gave.

    Parameters
    ----------
    problems : str or iterable of str
        One sentence each.  All of them are shown, not only the first.
    """

    def __init__(self, problems: str | Iterable[str]) -> None:
        self.problems: tuple[str, ...] = (
            (problems,) if isinstance(problems, str) else tuple(problems)
        )
        super().__init__("\n".join(self.problems))


class ArchiveError(ClimariskError):
    """An archive file cannot be read as the format it is said to be."""


class FetchError(ClimariskError):
    """The online archive could not be read, or gave less than was asked for."""


class StoreError(ClimariskError):
    """The store of parsed hours cannot be read or written."""


class OutputError(ClimariskError):
    """A result file cannot be written."""
