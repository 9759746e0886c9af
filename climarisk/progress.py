"""How long work reports where it stands."""

from __future__ import annotations

from collections.abc import Callable

#: Called with what is being done, how many are done and how many there are.
Progress = Callable[[str, int, int], None]


def quiet(message: str, done: int, total: int) -> None:
    """Say nothing."""
