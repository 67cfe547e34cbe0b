"""The choice: which rails and options are looked at, the solves, the order among equals.

Best first. Each rail has a lower bound of the first goal (see ``bounds``). The rails of least bound
are judged, as far as the best design so far leaves room; a rail that was judged has its cells
solved, each for something better than the best so far. When the least bound lies above the best
design, that design is proved: every cell was either solved or bounded out. A second pass over the
cells whose bound does not lie above it orders the designs that share its value.
"""

from __future__ import annotations

import heapq
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from ..domain.machine import Problem
from ..domain.parts import AS_WOUND
from ..domain.results import AxisChoice, BusChoice, Design
from ..errors import WrongVerdict
from . import milp
from .bounds import Bounds, CellBound
from .bus_model import RULES, Bus, BusModel, Choice, feed_room, reduced_feeds, reduced_options
from .candidates import AxisTable
from .cpsat import CpSat, Deadline
from .offers import MASS_SCALE, MONEY_SCALE, VOLUME_SCALE, Offers, down, offers_of
from .options import Options

Array = Any
BATCH = 64  # rails judged at once
GUESS = 0.10  # how far above the least bound the first goal is guessed, step by step
FEW, FEW_RAILS = 2, 4  # options for each pair of prices, and rails, of a design to begin with
PATIENT_ROWS = 200_000  # rows judged before a first design is sought in full
DUST = 1.0  # a step of the goal, for float dust in bounds
PATIENCE = 10  # steps before they double: a machine without any design must not take for ever
Progress = Callable[[str], None]


@dataclass
class Result:
    """What the search found, for the workflow to put into records."""

    offers: Offers
    tables: list[AxisTable]
    verdict: str = "none exists"
    choice: Choice | None = None
    bound: int | None = None  # of the first goal, proved
    solves: int = 0
    reasons: list[str] = field(default_factory=list)
    relaxed: dict[str, Choice] = field(default_factory=dict)  # designs that break one rule only
    second_route: str = ""


def choose(
    problem: Problem, seconds: float | None = None, progress: Progress = lambda _: None
) -> Result:
    """Find the best design of a problem, with proof unless ``seconds`` run out.

    Ctrl-C ends the search and keeps the best design so far.
    """
    name, limit = _limit_on_first_goal(problem)
    search = _Search(_without(problem, name), Deadline(seconds), progress)
    result = search.result
    try:
        search.run()
    except (KeyboardInterrupt, _StopSearch):
        result.verdict = "not proved"
    if limit is not None and result.choice is not None and result.choice.values[0] > limit:
        if result.verdict == "proved":
            result.verdict = "none exists"
            result.relaxed[f"the {name} limit"] = result.choice
            result.second_route = "the best design without that limit is proved, and lies beyond it"
        result.choice = None
    return result


def _limit_on_first_goal(problem: Problem) -> tuple[str, int | None]:
    """The limit that can be left out of the rows, as it only forbids the best design or does not.

    Returns the limit's name and its steps; an empty name if there is none on the first goal.
    """
    minimise, limits = problem.machine.minimise, problem.machine.limits
    first = minimise[0] if isinstance(minimise, tuple) else ""
    if first == "cost" and limits.price is not None:
        return "price", int(limits.price.amount * MONEY_SCALE)
    if first == "volume" and limits.volume is not None:
        return first, int(down(limits.volume, VOLUME_SCALE))
    if first == "mass" and limits.mass is not None:
        return first, int(down(limits.mass, MASS_SCALE))
    return "", None


def _without(problem: Problem, limit: str) -> Problem:
    if not limit:
        return problem
    limits = problem.machine.limits.model_copy(update={limit: None})
    machine = problem.machine.model_copy(update={"limits": limits})
    return problem.model_copy(update={"machine": machine})


class _StopSearch(Exception):
    """The time limit or Ctrl-C ended the search."""


class _Search:
    def __init__(self, problem: Problem, deadline: Deadline, progress: Progress) -> None:
        self.problem, self.machine = problem, problem.machine
        self.deadline, self.progress = deadline, progress
        self.offers = offers_of(problem)
        shared: dict[str, AxisTable] = {}  # axes that ask the same are judged once
        self.tables: list[AxisTable] = []
        for axis in self.machine.axes:
            key = axis.model_copy(update={"axis": ""}).model_dump_json()
            if key not in shared:
                shared[key] = AxisTable(axis, self.offers)
            self.tables.append(shared[key])
        self.bounds = Bounds(self.offers, self.tables)
        self.result = Result(self.offers, self.tables)
        self.cells: dict[int, list[CellBound]] = {}
        self.judged_to = np.zeros(0)

    @property
    def ceiling(self) -> float:
        """Value of the first goal in the best design so far."""
        return self.result.choice.values[0] if self.result.choice else np.inf

    def run(self) -> None:
        """The route above."""
        if not (self.offers.feeds and self.offers.windings and self.offers.drivers):
            self._nothing_offered()
            return
        self._best_first()
        if self.result.choice is None:
            self._confirm_none()
            return
        self.result.bound = int(self.ceiling)
        self._first_in_order()
        self.result.verdict = "proved"

    def _nothing_offered(self) -> None:
        for name, offered in (
            ("motor", self.offers.windings),
            ("driver", self.offers.drivers),
            ("supply voltage", self.offers.feeds),
        ):
            if not offered:
                why = self._why_no_voltage() if offered is self.offers.feeds else ""
                self.result.reasons.append(f"no {name} is left that may be chosen{why}")
        self.result.second_route = "nothing is on offer, so nothing can be chosen"

    def _why_no_voltage(self) -> str:
        """What bounds the bus voltage from outside."""
        limits, bounds = self.machine.limits.voltage, []
        if limits.min is not None or limits.max is not None:
            low = "" if limits.min is None else f" from {limits.min:g} V"
            high = "" if limits.max is None else f" up to {limits.max:g} V"
            bounds.append(f"limits of the bus{low}{high}")
        bounds += [
            f"{load.load} {load.supply_voltage.min:g} to {load.supply_voltage.max:g} V"
            for load in self.machine.loads
        ]
        return f" ({'; '.join(bounds)})" if bounds else ""

    # -- judging and solving, best rails first ----------------------------------------------

    def _best_first(self) -> None:
        """Rails in order of bound, under a guess of the first goal that rises until it is true.

        A guess keeps the first rails from being judged in full before any design is known. Below
        the guess nothing is left out: a rail comes back when the guess has risen past its key.
        """
        rails = range(len(self.offers.rails))
        self.cells = {rail: self.bounds.cells(rail) for rail in rails}
        self.judged_to = np.full(len(rails), -np.inf)
        solved_to = np.full(len(rails), -np.inf)  # no design at or below, proved
        heap = [(self._key(rail, solved_to), rail) for rail in rails if self.cells[rail]]
        heapq.heapify(heap)
        step, raises, hurried = GUESS, 0, False
        guess = heap[0][0] * (1.0 + step) if heap else np.inf
        highest = len(self.tables) * float(self.bounds.pair_goal.max()) + float(
            self.bounds.feed_goal.max()
        )
        while heap:
            self._prove_bound(heap[0][0])
            if heap[0][0] > min(guess, self.ceiling):
                if heap[0][0] >= self.ceiling + DUST:
                    return
                guess = max(guess, heap[0][0]) * (1.0 + step) + 1.0
                raises += 1
                step = step if raises < PATIENCE else 2.0 * step
                guess = guess if guess < highest else np.inf
            ceiling = min(guess, self.ceiling)
            batch = [heapq.heappop(heap)[1]]
            if self.judged_to[batch[0]] >= ceiling:
                for cell in sorted(self.cells[batch[0]], key=lambda c: c.floor):
                    self._solve_cell(cell, min(guess, self.ceiling - 1))
                solved_to[batch[0]] = ceiling
                if np.isfinite(ceiling):
                    heapq.heappush(heap, (ceiling + 1.0, batch[0]))
                continue
            while heap and len(batch) < BATCH and heap[0][0] <= ceiling:
                if self.judged_to[heap[0][1]] >= ceiling:
                    break
                batch.append(heapq.heappop(heap)[1])
            self._judge(batch, ceiling)
            for rail in batch:
                self.cells[rail] = self.bounds.cells(rail)
                if self.cells[rail]:
                    heapq.heappush(heap, (self._key(rail, solved_to), rail))
            if self.result.choice is None:
                self._first_design([rail for _, rail in heapq.nsmallest(FEW_RAILS, heap)])
            if self.result.choice is None and not hurried and self._tried() > PATIENT_ROWS:
                hurried = True
                self._hurry([rail for _, rail in sorted(heap)])

    def _key(self, rail: int, solved_to: Array) -> float:
        """What no design at a rail goes below: its bound, or what was solved without one."""
        return max(min(c.floor for c in self.cells[rail]), float(solved_to[rail]) + 1.0)

    def _prove_bound(self, least: float) -> None:
        """Keep the best bound proved so far; leave when the time is up."""
        if np.isfinite(bound := min(least, self.ceiling)):
            self.result.bound = max(self.result.bound or 0, int(bound))
        self._check_time()

    def _check_time(self) -> None:
        if self.deadline.left() == 0.0:
            raise _StopSearch

    def _tried(self) -> int:
        return sum(table.tried for table in self.bounds.unique)

    def _hurry(self, rails: list[int]) -> None:
        """A long search without a design: judge a few nominal voltages in full and take one there.

        Counted in rows and not in seconds, so that the same input takes the same way.
        """
        nominal = {f.rail for f in self.offers.feeds if not f.trimmed}
        chosen = [rail for rail in rails if rail in nominal][:FEW_RAILS]
        self._judge(chosen, np.inf)
        for rail in chosen:
            self.cells[rail] = self.bounds.cells(rail)
        self._first_design(chosen)

    def _first_design(self, rails: list[int]) -> None:
        """A design to begin with, from the few best options at the rails of least bound."""
        for rail in rails:
            for cell in self.cells[rail]:
                model = self._model(cell, np.inf, FEW)
                if model is not None:
                    self._take(model, np.inf)

    def _judge(self, rails: list[int], ceiling: float) -> None:
        """Judge all that could be in a design at these rails at or below a ceiling."""
        for table in self.bounds.unique:
            self._check_time()
            self.progress(f"judging parts for axis {table.axis.axis}")
            wanted = np.zeros_like(table.judged)
            for rail in rails:
                for cell in self.cells[rail]:
                    wanted[:, :, rail] |= self.bounds.pairs(cell, table, ceiling)
            table.judge(wanted)
        self.judged_to[rails] = ceiling

    def _solve_cell(self, cell: CellBound, ceiling: float) -> None:
        """Look for a design at or below a ceiling in one cell."""
        model = self._model(cell, ceiling)
        if model is not None:
            self._take(model, ceiling)

    def _take(self, model: BusModel, ceiling: float) -> None:
        """Solve a model for something better than the best design, and not above a ceiling."""
        self._check_time()
        self.progress("solving")
        solver = CpSat(model.model)
        most = min(ceiling, self.ceiling - 1)
        if np.isfinite(most):
            solver.add(model.goals[0], int(most))
        outcome = solver.minimise(model.goals[0], self.deadline)
        self.result.solves += 1
        if outcome.taken is not None:
            self.result.choice = model.choice(outcome.taken)
        if outcome.status in ("feasible", "unknown"):
            raise _StopSearch

    def _model(self, cell: CellBound, ceiling: float, few: int | None = None) -> BusModel | None:
        """The model of one cell, of what could be at or below a ceiling; None if empty.

        ``few`` keeps only that many options of an axis for each pair of prices.
        """
        if cell.floor > ceiling + DUST or self._needless(cell):
            return None
        feeds = [self.offers.feeds[k] for k in self.bounds.feeds(cell, ceiling)]
        feeds = reduced_feeds(self.offers, feeds)
        startup = any(f.supply.largest_startup_capacitance is not None for f in feeds)
        kept: dict[int, Options] = {}
        for table in self.bounds.unique:
            rows = self.bounds.options(cell, table, ceiling)
            if few is not None:
                rows &= self.bounds.few(cell, table, few)
            options = table.at_rail[cell.rail].pick(np.flatnonzero(rows))
            kept[id(table)] = reduced_options(self.offers, options, startup)
        limit = float(self.bounds.levels[cell.level])
        bus = Bus([kept[id(table)] for table in self.tables], feeds, limit)
        model = BusModel(self.offers, [bus])
        return model if model.complete else None

    def _needless(self, cell: CellBound) -> bool:
        """Whether a lower driver limit at the same rail cannot bind, so this cell adds nothing.

        Every option of this cell is in that one too; if even the options that return most stay
        within what the least of its feeds takes up, braking is no rule there.
        """
        for level in range(cell.level):
            if not self.bounds.exists[cell.rail, level]:
                continue
            limit = float(self.bounds.levels[level])
            feeds = [f for f in self.offers.feeds if f.rail == cell.rail]
            spare = np.inf
            for feed in feeds:
                if feed.supply.absorbs_energy:
                    continue
                room = feed_room(self.offers, feed, limit)
                held = feed.count * (feed.supply.output_capacitance or 0.0)
                least = 0.0
                for table in self.tables:
                    o = table.at_rail[cell.rail]
                    energy = table.energy[o.winding, o.driver]
                    own = room * self.offers.tables["C"][o.driver]
                    allowed = self.bounds.allowed[level][o.driver]
                    least += float(np.max((energy - own)[allowed], initial=0.0))
                spare = min(spare, room * (held + self.machine.bus_capacitance) - least)
            if spare > 0.01:  # J; far above the rounding of integers
                return True
        return False

    # -- order among equals -----------------------------------------------------------------

    def _first_in_order(self) -> None:
        """With the first goal at its best: the other goals, then trims, power, volts, names."""
        value = int(self.ceiling)
        best: Choice | None = None
        for cell in self._cells_at(value):
            model = self._model(cell, value)
            if model is None:
                continue
            found = self._first_of_cell(model, value)
            if found is not None and (
                best is None or found.order(self.offers) < best.order(self.offers)
            ):
                best = found
        if best is None:
            raise WrongVerdict("a design was found and then not found again; no verdict is given")
        self.result.choice = best

    def _cells_at(self, value: int) -> Iterator[CellBound]:
        for rail in range(len(self.offers.rails)):
            for cell in self.bounds.cells(rail):
                if cell.floor <= value + DUST:
                    yield cell

    def _first_of_cell(self, model: BusModel, value: int) -> Choice | None:
        """The first design in order of one cell, among those with that value of the first goal."""
        solver = CpSat(model.model)
        solver.add(model.goals[0], value)
        taken: tuple[int, ...] = ()
        for number, objective in enumerate((*model.goals[1:], *model.ties())):
            outcome = solver.minimise(objective, self.deadline, taken)
            self.result.solves += 1
            if outcome.status in ("feasible", "unknown"):
                raise _StopSearch
            if outcome.taken is None:
                return None
            taken = outcome.taken
            solver.add(objective, outcome.value)
            if number == len(model.goals) - 1 and self._only_one(solver, taken):
                break  # the goals and the first tie left one design
        return model.choice(taken)

    def _only_one(self, solver: CpSat, taken: tuple[int, ...]) -> bool:
        most = len(taken) - 1
        outcome = solver.feasible_with(dict.fromkeys(taken, 1), most, self.deadline)
        return outcome.status == "infeasible"

    # -- no design --------------------------------------------------------------------------

    def _confirm_none(self) -> None:
        empty = {id(table) for table in self.bounds.unique if self._has_none(table)}
        names = [
            axis.axis
            for axis, table in zip(self.machine.axes, self.tables, strict=True)
            if id(table) in empty
        ]
        if names:
            self.result.second_route = (
                "every option of the axis was judged by itself, at every voltage on offer"
            )
            self.result.reasons += [f"no option fits axis {name}" for name in names]
            return
        models = [m for m in self._all_models() if m.complete]
        if not models:
            self.result.second_route = "no voltage on offer has an option for every axis"
            self.result.reasons.append("no voltage on offer has an option for every axis")
            return
        for model in models:
            self.progress("confirming by the second solver")
            second = milp.minimise(model.model, {}).status
            if second != "infeasible":
                said = "cannot confirm it" if second == "unknown" else "finds one"
                raise WrongVerdict(f"CP-SAT finds no design, HiGHS {said}; no verdict is given")
        self.result.second_route = f"HiGHS on the same rows, {len(models)} models: infeasible"
        self._what_clashes(models)

    def _has_none(self, table: AxisTable) -> bool:
        """Whether an axis has no adequate option at all, every one of them judged."""
        if not any(len(o) for o in table.at_rail.values()):
            self.progress(f"judging parts for axis {table.axis.axis}")
            table.judge(np.ones_like(table.judged))
        return not any(len(o) for o in table.at_rail.values())

    def _all_models(self) -> Iterator[BusModel]:
        for rail in range(len(self.offers.rails)):
            for cell in self.bounds.cells(rail):
                model = self._model(cell, np.inf)
                if model is not None:
                    yield model

    def _what_clashes(self, models: list[BusModel]) -> None:
        """Rules without which there would be a design, each found by new solves."""
        for about in RULES:
            for model in models:
                if not any(row.about == about for row in model.model.rows):
                    continue
                outcome = CpSat(model.model.without(about)).minimise(model.goals[0], self.deadline)
                if outcome.taken is not None:
                    self.result.relaxed[about] = model.choice(outcome.taken)
                    break
        if not self.result.relaxed:
            self.result.reasons.append(
                "each axis has options by itself, but no choice of them fits together"
            )


def design_of(offers: Offers, choice: Choice) -> Design:
    """The design record of a choice."""
    machine = offers.problem.machine
    axes = []
    for axis, option in zip(machine.axes, choice.options, strict=True):
        winding = offers.windings[option.winding[0]]
        setting = float(option.setting[0])
        axes.append(
            AxisChoice(
                axis=axis.axis,
                motor=winding.motor.part,
                driver=offers.drivers[option.driver[0]].part,
                joining=None if winding.joining == AS_WOUND else winding.joining,
                current_peak=setting,
                rest_current_peak=setting * float(option.rest_share[0]),
                microsteps=int(option.microsteps[0]),
            )
        )
    bus = BusChoice(
        voltage=offers.rails[choice.feed.rail].voltage,
        supply=choice.feed.supply.part,
        count=choice.feed.count,
        axes=tuple(a.axis for a in machine.axes),
    )
    return Design(machine=offers.problem.machine_file, axes=tuple(axes), buses=(bus,))
