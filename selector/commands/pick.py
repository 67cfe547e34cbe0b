"""``selector pick``: choose the parts of a machine."""

from __future__ import annotations

import sys
from pathlib import Path

from ..domain.results import Answer
from ..errors import InputFaults
from ..reports import tables, terminal
from ..workflow import load_problem, pick, save_design
from .progress import shown

CODES = {"proved": 0, "none exists": 1, "not proved": 3}


def run(machine: Path, save: Path | None, as_json: bool, seconds: float | None) -> int:
    """Choose, print, and keep the design if asked; returns the exit code."""
    problem = load_problem(machine)
    with shown() as progress:
        answer = pick(problem, seconds, progress)
    unkept = None if save is None else _keep(answer, save)
    if as_json:
        print(tables.as_json(tables.answer_data(answer)))
    else:
        terminal.print_answer(answer, sys.stdout)
    if unkept:
        terminal.print_faults(unkept.faults, sys.stderr, "the design was not kept")
        return unkept.exit_code
    if save is not None:
        kept = f"design kept in {save}" if answer.design else f"no design to keep in {save}"
        print(terminal.visible(kept), file=sys.stderr)
    return CODES[answer.verdict]


def _keep(answer: Answer, save: Path) -> InputFaults | None:
    """Keep the design if there is one; what hinders it must not cost the answer."""
    if answer.design is None:
        return None
    data = tables.answer_data(answer)
    record = {key: data[key] for key in ("verdict", "goals", "totals", "findings", "proof")}
    try:
        save_design(answer, save, record)
    except InputFaults as faults:
        return faults
    return None
