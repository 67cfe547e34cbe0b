"""The generic model on CP-SAT. The only file that knows that solver."""

from __future__ import annotations

import threading
import time
from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from .model import Model, Outcome

SEED = 7


class Deadline:
    """Seconds left for all solves together; without a limit they are endless."""

    def __init__(self, seconds: float | None) -> None:
        self.end = None if seconds is None else time.monotonic() + seconds

    def left(self) -> float | None:
        """Seconds left, zero at the least; None without limit."""
        return None if self.end is None else max(0.0, self.end - time.monotonic())


def _solve(solver: Any, model: Any) -> tuple[Any, bool]:
    """Solve in a thread, so that Ctrl-C reaches Python at once; the status, and if it did.

    The solver's own handler of the signal is off: it would leave none behind for the next solve.
    """
    solver.parameters.catch_sigint_signal = False
    found: list[Any] = []
    worker = threading.Thread(target=lambda: found.append(solver.solve(model)))
    worker.start()
    try:
        worker.join()
    except KeyboardInterrupt:
        solver.stop_search()
        worker.join()
        return found[0], True
    return found[0], False


class CpSat:
    """A model in CP-SAT that can be solved for one objective after another."""

    def __init__(self, model: Model) -> None:
        from ortools.sat.python import cp_model

        self.model, self.cp = model, cp_model.CpModel()
        self.taken = [self.cp.new_bool_var(f"o{k}") for k in range(model.size)]
        for group in model.groups:
            self.cp.add_exactly_one(self.taken[k] for k in group)
        for row in model.rows:
            self.add(row.terms, row.most, row.least)

    def add(self, terms: Mapping[int, int], most: int | None, least: int | None = None) -> None:
        """One more row."""
        from ortools.sat.python import cp_model

        total = cp_model.LinearExpr.weighted_sum(
            [self.taken[k] for k in terms], list(terms.values())
        )
        if most is not None and least == most:
            self.cp.add(total == most)
            return
        if most is not None:
            self.cp.add(total <= most)
        if least is not None:
            self.cp.add(total >= least)

    def feasible_with(self, terms: Mapping[int, int], most: int, deadline: Deadline) -> Outcome:
        """Whether the model has a solution with one more row, which is not kept."""
        trial = CpSat.__new__(CpSat)
        trial.model, trial.cp = self.model, self.cp.clone()
        trial.taken = [trial.cp.get_bool_var_from_proto_index(v.index) for v in self.taken]
        trial.add(terms, most)
        return trial.minimise({}, deadline)

    def minimise(
        self, objective: Mapping[int, int], deadline: Deadline, hint: tuple[int, ...] = ()
    ) -> Outcome:
        """Solve for the least value of an objective; an empty one asks for any solution."""
        from ortools.sat.python import cp_model

        terms = {k: v for k, v in objective.items() if v}
        total = cp_model.LinearExpr.weighted_sum(
            [self.taken[k] for k in terms], list(terms.values())
        )
        self.cp.clear_objective()
        if terms:
            self.cp.minimize(total)
        self.cp.clear_hints()
        chosen = set(hint)
        for k in range(self.model.size if hint else 0):
            self.cp.add_hint(self.taken[k], k in chosen)
        solver = cp_model.CpSolver()
        solver.parameters.num_workers = 1
        solver.parameters.random_seed = SEED
        left = deadline.left()
        if left is not None:
            solver.parameters.max_time_in_seconds = max(left, 0.001)
        status, stopped = _solve(solver, self.cp)
        outcome = self._outcome(solver, status, terms)
        if stopped and outcome.status == "optimal":  # the user wants out all the same
            return replace(outcome, status="feasible")
        return replace(outcome, status="unknown") if stopped and not outcome.taken else outcome

    def _outcome(self, solver: Any, status: Any, terms: Mapping[int, int]) -> Outcome:
        from ortools.sat.python import cp_model

        if status == cp_model.INFEASIBLE:
            return Outcome("infeasible")
        bound = round(solver.best_objective_bound) if terms else 0
        if status not in (cp_model.OPTIMAL, cp_model.FEASIBLE):
            if status == cp_model.MODEL_INVALID:
                raise ValueError(f"CP-SAT refuses the model: {self.cp.validate()}")
            return Outcome("unknown", bound=bound)
        taken = tuple(k for k, var in enumerate(self.taken) if solver.boolean_value(var))
        value = sum(v for k, v in terms.items() if solver.boolean_value(self.taken[k]))
        done = status == cp_model.OPTIMAL
        return Outcome("optimal" if done else "feasible", taken, value, value if done else bound)
