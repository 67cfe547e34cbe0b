"""The route from files to answers; the only file that knows the order of the steps."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path
from typing import TYPE_CHECKING

from . import __version__
from .domain.machine import Problem, Worth
from .domain.results import Answer, Design, Finding, Goal, Judgement, NextSetting, Proof
from .errors import WrongVerdict
from .inputs.design_file import check_design, load_design, save_design
from .inputs.load import load_catalogue, load_problem

if TYPE_CHECKING:
    from .search.choice import Result

Progress = Callable[[str], None]

__all__ = ["judge_design", "judge_file", "load_catalogue", "load_problem", "pick", "save_design"]


def pick(
    problem: Problem, seconds: float | None = None, progress: Progress = lambda _: None
) -> Answer:
    """Choose the parts of a machine and have the choice judged.

    Parameters
    ----------
    problem : Problem
        From :func:`load_problem`, or made in Python with SI figures.
    seconds : float, optional
        Time limit; when it ends the search the answer is not proved. [s]
    progress : function of str
        Called with what is being done.

    Returns
    -------
    Answer
        Verdict, design with every figure and finding, and how the program knows.

    Raises
    ------
    WrongVerdict
        If two routes that must agree do not.
    """
    from .judge import next_settings
    from .search.choice import choose, design_of

    result = choose(problem, seconds, progress)
    design = None if result.choice is None else design_of(result.offers, result.choice)
    judgement = None
    following: tuple[NextSetting, ...] = ()
    if design is not None:
        progress("judging the design")
        judgement = judge_design(problem, design)
        _agree(result, judgement)
        following = next_settings(problem, design)
    return Answer(
        verdict=result.verdict,
        machine=problem.machine_file,
        goals=_goals(result),
        judgement=judgement,
        next_settings=following,
        rejections=tuple(
            row.model_copy(update={"axis": axis.axis})
            for axis, table in zip(problem.machine.axes, result.tables, strict=True)
            for row in table.rejections()
        ),
        reasons=(*result.reasons, *_reasons(problem, result)),
        proof=_proof(result),
        sources=problem.sources,
        version=__version__,
    )


def judge_design(problem: Problem, design: Design) -> Judgement:
    """Recompute a design from catalogue and machine, without the search.

    Raises
    ------
    InputFaults
        If the design names an axis or part that the problem does not have.
    """
    from .judge import judge

    check_design(problem, design)
    return judge(problem, design)


def judge_file(path: str | Path) -> Judgement:
    """Judge a saved or hand-written design file."""
    problem, design, changed = load_design(path)
    return judge_design(problem, design).model_copy(update={"changed": changed})


def _reasons(problem: Problem, result: Result) -> Iterator[str]:
    """What each rule that stands in the way lacks, in the judge's words and figures."""
    from .search.choice import design_of

    for about, choice in result.relaxed.items():
        judgement = judge_design(problem, design_of(result.offers, choice))
        broken = [f for f in judgement.findings if f.state == "fails"]
        yield f"without the rule on {about} there would be a design; it breaks: " + "; ".join(
            _lack(f) for f in broken
        )


def _lack(finding: Finding) -> str:
    figures = ""
    if finding.actual is not None and finding.limit is not None:
        figures = f" {finding.actual.value:.5g} against {finding.limit.value:.5g} "
        figures += finding.limit.unit if finding.limit.unit != "1" else ""
    margin = f", margin {100 * finding.margin:g} %" if finding.margin else ""
    note = f" ({finding.note})" if finding.note else ""
    return f"{finding.rule} of {finding.subject}{figures.rstrip()}{margin}{note}"


def _agree(result: Result, judgement: Judgement) -> None:
    """The judge must let the search's design stand and come to the same goals."""
    failing = [f for f in judgement.findings if f.state == "fails"]
    if failing:
        said = ", ".join(f"{f.rule} of {f.subject}" for f in failing)
        raise WrongVerdict(f"the judge fails the design that was chosen ({said}); it is withheld")
    assert result.choice is not None
    totals, worth = judgement.totals, result.offers.problem.machine.minimise
    figures = totals.model_dump()
    if isinstance(worth, Worth) and totals.cost is not None:
        extra = worth.volume * (totals.volume or 0.0) + worth.mass * (totals.mass or 0.0)
        figures["cost with worths"] = totals.cost + extra
    units = sum(line.quantity for line in judgement.order)  # each may be rounded by a step
    for goal, value in zip(result.offers.goals, result.choice.values, strict=True):
        figure = figures.get(goal.name)
        if figure is not None and abs(figure - value / goal.scale) > (units + 1) / goal.scale:
            raise WrongVerdict(f"search and judge differ on {goal.name}; the design is withheld")


def _goals(result: Result) -> tuple[Goal, ...]:
    choice = result.choice
    if choice is None:
        return ()
    rows = []
    for number, (goal, value) in enumerate(zip(result.offers.goals, choice.values, strict=True)):
        bound = result.bound if number == 0 else None
        if result.verdict == "proved":
            bound = value
        rows.append(
            Goal(
                name=goal.name,
                value=value / goal.scale,
                unit=goal.unit,
                step=1.0 / goal.scale,
                proved_bound=None if bound is None else bound / goal.scale,
            )
        )
    return tuple(rows)


def _proof(result: Result) -> Proof:
    offers, unique = result.offers, {id(t): t for t in result.tables}.values()
    gap = None
    if result.choice is not None and result.bound is not None and result.choice.values[0] > 0:
        gap = max(0.0, 1.0 - result.bound / result.choice.values[0])
    pairs = len(offers.windings) * len(offers.drivers)
    return Proof(
        method="options bounded and judged in arrays; CP-SAT by voltage and driver limit; "
        "recomputed by the judge",
        pairs=pairs,
        voltages=tuple(sorted({rail.voltage for rail in offers.rails})),
        options=pairs * len(offers.rails) * len(result.tables),
        judged=sum(t.tried for t in unique),
        adequate=sum(len(o) for t in unique for o in t.at_rail.values()),
        solves=result.solves,
        exclusions=tuple(offers.exclusions),
        gap=0.0 if result.verdict == "proved" else gap,
        second_route=result.second_route,
    )
