"""``selector judge``: recompute a saved or hand-written design."""

from __future__ import annotations

import sys
from pathlib import Path

from ..reports import tables, terminal
from ..workflow import judge_file


def run(design: Path, as_json: bool) -> int:
    """Judge and print; returns the exit code."""
    judgement = judge_file(design)
    if as_json:
        print(tables.as_json(tables.judged_data(judgement)))
    else:
        terminal.print_judgement(judgement, sys.stdout, str(design))
    return 0 if judgement.verdict == "holds" else 1
