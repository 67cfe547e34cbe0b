"""The generic model on HiGHS: the second route that confirms a verdict of no design."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from .model import Model, Outcome, Row

MOST_CUTS = 200


def minimise(model: Model, objective: Mapping[int, int]) -> Outcome:
    """Solve a model with scipy's HiGHS; the same contract as CP-SAT's, without a time limit.

    HiGHS takes a row as kept within 1e-6 of its scale, which can be a whole step of a long row. So
    what it takes is checked in integers, and a choice that breaks a row is cut off and the model
    solved again.
    """
    groups = [Row(dict.fromkeys(group, 1), 1, 1) for group in model.groups]
    rows = [*groups, *model.rows]
    for _ in range(MOST_CUTS):
        outcome = _solve(rows, model.size, objective)
        if outcome.taken is None or _kept(rows, outcome.taken):
            return outcome
        cut = dict.fromkeys(outcome.taken, 1)
        rows.append(Row(cut, len(outcome.taken) - 1))
    return Outcome("unknown")


def _kept(rows: list[Row], taken: tuple[int, ...]) -> bool:
    for row in rows:
        total = sum(row.terms.get(k, 0) for k in taken)
        if row.most is not None and total > row.most:
            return False
        if row.least is not None and total < row.least:
            return False
    return True


def _solve(rows: list[Row], size: int, objective: Mapping[int, int]) -> Outcome:
    import numpy as np
    from scipy.optimize import Bounds, LinearConstraint, milp

    matrix, scale = _matrix(rows, size)
    most = np.array([np.inf if row.most is None else row.most for row in rows], dtype=float)
    least = np.array([-np.inf if row.least is None else row.least for row in rows], dtype=float)
    cost = np.zeros(size)
    for k, v in objective.items():
        cost[k] = v
    found = milp(
        cost,
        constraints=LinearConstraint(matrix, least / scale, most / scale),
        integrality=np.ones(size),
        bounds=Bounds(0, 1),
        options={"mip_rel_gap": 0.0},
    )
    if found.status == 2:
        return Outcome("infeasible")
    if found.x is None:
        return Outcome("unknown")
    taken = tuple(int(k) for k in np.flatnonzero(found.x > 0.5))
    value = sum(objective.get(k, 0) for k in taken)
    return Outcome("optimal" if found.status == 0 else "feasible", taken, value, value)


def _matrix(rows: list[Row], size: int) -> tuple[Any, Any]:
    """Coefficients, each row divided by its largest, and those largest."""
    import numpy as np
    from scipy.sparse import csr_array

    entries = [(r, k, v) for r, row in enumerate(rows) for k, v in row.terms.items()]
    at, columns, values = zip(*entries, strict=True) if entries else ((), (), ())
    matrix = csr_array((np.array(values, float), (at, columns)), shape=(len(rows), size))
    scale = np.ones(len(rows))
    if entries:
        peaks = np.asarray(abs(matrix).max(axis=1).todense()).ravel()
        scale = np.where(peaks > 0, peaks, 1.0)
    return csr_array(matrix.multiply(1.0 / scale[:, None])), scale
