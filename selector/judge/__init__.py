"""The independent judge: problem and design to findings, recomputed in floats.

It never sees the search; it shares the physics with it, which is why the physics has referees of
its own. One function per rule, each giving limit, actual and headroom.
"""

from __future__ import annotations

from ..domain.machine import Problem
from ..domain.results import Design, Finding, Judgement, NextSetting
from . import axis_rules, bus_rules
from .bus_case import BusCase
from .figures import axis_figures, bus_figures, order_lines, totals
from .remarks import assumptions, cautions

__all__ = ["judge", "next_settings"]


def judge(problem: Problem, design: Design) -> Judgement:
    """Judge a design whose parts and axes exist in the problem.

    Raises
    ------
    KeyError
        If a part or axis of the design is not in the problem; load designs with
        ``inputs.design_file`` to have that said with file and line.
    """
    bus = BusCase.of(problem, design)
    findings = findings_of(bus)
    lines = order_lines(bus)
    return Judgement(
        design=design,
        verdict="fails" if any(f.state == "fails" for f in findings) else "holds",
        findings=findings,
        axes=tuple(axis_figures(case) for case in bus.axes),
        buses=(bus_figures(bus),),
        order=lines,
        totals=totals(bus),
        currency=problem.machine.currency,
        quantity=problem.machine.quantity,
        assumptions=assumptions(bus),
        cautions=cautions(bus),
    )


def findings_of(bus: BusCase) -> tuple[Finding, ...]:
    """Every rule's findings, the axes' first."""
    of_axes = [f for case in bus.axes for rule in axis_rules.RULES for f in rule(case)]
    return (*of_axes, *(f for rule in bus_rules.RULES for f in rule(bus)))


def next_settings(problem: Problem, design: Design) -> tuple[NextSetting, ...]:
    """For each axis, what its driver's next higher setting would give, all else unchanged."""
    now = BusCase.of(problem, design)
    rows = []
    for number, choice in enumerate(design.axes):
        driver = problem.catalogue.find("drivers", choice.driver)
        higher = [s for s in driver.peak_settings if s > choice.peak * (1 + 1e-9)]
        if not higher:
            continue
        update = {"current_peak": higher[0], "current_rms": None, "rest_current_peak": None}
        axes = list(design.axes)
        axes[number] = choice.model_copy(update=update)
        then = BusCase.of(problem, design.model_copy(update={"axes": tuple(axes)}), now)
        case = next(case for case in then.axes if case.axis.axis == choice.axis)
        broken = [f.rule for f in findings_of(then) if f.state == "fails"]
        rows.append(
            NextSetting(
                axis=choice.axis,
                current_peak=higher[0],
                torque_headroom=case.worst.headroom,
                peak_power=case.peak_power,
                winding_temperature=case.temperature,
                holds=not broken,
                breaks=", ".join(dict.fromkeys(broken)),
            )
        )
    return tuple(rows)
