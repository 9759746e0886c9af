"""climarisk: seasonal density-altitude and humidity risk of airfields.

The public names load on first use, so that importing the package costs nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

_PUBLIC = {
    "ClimariskError": "climarisk.errors",
    "Store": "climarisk.store",
    "StudyResult": "climarisk.results",
    "read_study": "climarisk.study",
    "run_study": "climarisk.pipeline",
    "write_outputs": "climarisk.outputs.tables",
}
__all__ = sorted(_PUBLIC)


def __getattr__(name: str) -> Any:
    if name in _PUBLIC:
        return getattr(import_module(_PUBLIC[name]), name)
    raise AttributeError(f"module 'climarisk' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted([*globals(), *_PUBLIC])
