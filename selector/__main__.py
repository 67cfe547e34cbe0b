"""``python -m selector``."""

from .cli import main

main()
