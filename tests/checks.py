"""Run every check: lint, format, types, tests.  ``python -m tests.checks``."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent

CHECKS = [
    ["-m", "ruff", "check", "."],
    ["-m", "ruff", "format", "--check", "."],
    ["-m", "mypy", "climarisk"],
    # Each file in one process, so that what its tests share is made once.
    ["-m", "pytest", "-n", "auto", "--dist", "loadfile"],
]


def main() -> int:
    """Run the checks in order; stop at the first that fails and return its exit code."""
    for arguments in CHECKS:
        print("$ python", *arguments, flush=True)
        code = subprocess.call([sys.executable, *arguments], cwd=ROOT)
        if code:
            return code
    return 0


if __name__ == "__main__":
    sys.exit(main())
