"""The generic model on HiGHS: the second route that confirms a verdict of no design."""

from __future__ import annotations

from collections.abc import Mapping

from .model import Model, Outcome


def minimise(model: Model, objective: Mapping[int, int]) -> Outcome:
    """Solve a model with scipy's HiGHS; the same contract as CP-SAT's, without a time limit."""
    import numpy as np
    from scipy.optimize import Bounds, LinearConstraint, milp
    from scipy.sparse import csr_array

    rows: list[tuple[dict[int, int], int | None, int | None]]
    rows = [(dict.fromkeys(group, 1), 1, 1) for group in model.groups]
    rows += [(dict(row.terms), row.most, row.least) for row in model.rows]
    entries = [(r, k, v) for r, (terms, _, _) in enumerate(rows) for k, v in terms.items()]
    at, columns, values = zip(*entries, strict=True) if entries else ((), (), ())
    matrix = csr_array((np.array(values, float), (at, columns)), shape=(len(rows), model.size))
    most = np.array([np.inf if m is None else m for _, m, _ in rows], dtype=float)
    least = np.array([-np.inf if b is None else b for _, _, b in rows], dtype=float)
    # Divide each row by its largest coefficient: HiGHS judges rows to an absolute 1e-6.
    scale = np.ones(len(rows))
    if entries:
        peaks = np.asarray(abs(matrix).max(axis=1).todense()).ravel()
        scale = np.where(peaks > 0, peaks, 1.0)
    matrix = csr_array(matrix.multiply(1.0 / scale[:, None]))
    cost = np.zeros(model.size)
    for k, v in objective.items():
        cost[k] = v
    found = milp(
        cost,
        constraints=LinearConstraint(matrix, least / scale, most / scale),
        integrality=np.ones(model.size),
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
