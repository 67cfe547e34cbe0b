"""``selector pick``: choose the parts of a machine."""

from __future__ import annotations

import sys
from pathlib import Path

from ..reports import tables, terminal
from ..workflow import load_problem, pick, save_design
from .progress import shown

CODES = {"proved": 0, "none exists": 1, "not proved": 3}


def run(machine: Path, save: Path | None, as_json: bool, seconds: float | None) -> int:
    """Choose, print, and keep the design if asked; returns the exit code."""
    problem = load_problem(machine)
    with shown() as progress:
        answer = pick(problem, seconds, progress)
    if save is not None and answer.design is not None:
        data = tables.answer_data(answer)
        record = {key: data[key] for key in ("verdict", "goals", "totals", "findings", "proof")}
        save_design(answer, save, record)
    if as_json:
        print(tables.as_json(tables.answer_data(answer)))
    else:
        terminal.print_answer(answer, sys.stdout)
    if save is not None and answer.design is not None:
        print(f"design kept in {save}", file=sys.stderr)
    return CODES[answer.verdict]
