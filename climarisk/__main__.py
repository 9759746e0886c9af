"""``python -m climarisk``."""

from climarisk.cli import main

main()
