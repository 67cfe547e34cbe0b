"""The independent judge: problem and design to findings, recomputed in floats.

It never sees the search; it shares the physics with it, which is why the physics has referees of
its own. One function per rule, each giving limit, actual and headroom.
"""

from __future__ import annotations

from ..domain.machine import Problem
from ..domain.results import Design, Judgement
from . import axis_rules, bus_rules
from .cases import BusCase
from .figures import axis_figures, bus_figures, order_lines, totals
from .remarks import assumptions, cautions

__all__ = ["judge"]


def judge(problem: Problem, design: Design) -> Judgement:
    """Judge a design whose parts and axes exist in the problem.

    Raises
    ------
    KeyError
        If a part or axis of the design is not in the problem; load designs with
        ``inputs.design_file`` to have that said with file and line.
    """
    bus = BusCase.of(problem, design)
    findings = [finding for case in bus.axes for rule in axis_rules.RULES for finding in rule(case)]
    findings += [finding for rule in bus_rules.RULES for finding in rule(bus)]
    lines = order_lines(bus)
    return Judgement(
        design=design,
        verdict="fails" if any(f.state == "fails" for f in findings) else "holds",
        findings=tuple(findings),
        axes=tuple(axis_figures(case) for case in bus.axes),
        buses=(bus_figures(bus),),
        order=lines,
        totals=totals(bus),
        currency=problem.machine.currency,
        assumptions=assumptions(bus),
        cautions=cautions(bus),
    )
