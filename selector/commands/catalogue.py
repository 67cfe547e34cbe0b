"""``selector catalogue``: check and list parts."""

from __future__ import annotations

import sys
from pathlib import Path

from ..reports import listing, tables
from ..workflow import load_catalogue


def run(path: Path, as_json: bool) -> int:
    """Read, check and print; returns the exit code."""
    catalogue = load_catalogue(path)
    if as_json:
        print(tables.as_json(tables.catalogue_data(catalogue)))
    else:
        listing.print_catalogue(catalogue, str(path), sys.stdout)
    return 0
