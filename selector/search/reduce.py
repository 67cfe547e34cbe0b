"""Dominance: drops options and feeds that cannot matter, with the argument.

An option p of an axis stands in for an option o of the same axis in the same cell (rail and lowest
driver limit, which both respect) when p is no worse in every figure that a row, a goal or a
tie-break can see. Take any design with o and put p in its place. The voltage is the same, so the
bus keeps its feed. Power, returned energy, price, volume and mass do not grow, and the bus
capacitance that takes up braking does not shrink (it is equal where a supply limits it). Stock is
the one coupling that could break: p's motor (and driver) is either o's own, or in stock for every
axis of every machine, so that no number of exchanges runs it out. And p comes strictly before o in
the key that orders designs (goals, mean power, names): it is no worse in each figure of the key,
and where all are equal its name comes first. So each exchange lowers the key, exchanging ends, and
it ends at the very design the tie-break asks for. In a feed the same holds with trims in the key;
only one bus takes feeds, and each feed's own stock was checked before, so nothing couples.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

Array = Any
BLOCK = 256  # rows compared at once with all before them


def undominated(
    key: Array, others: Array, stands_in: Callable[[Array, Array], Array] | None = None
) -> Array:
    """Rows that no other row stands in for.

    Parameters
    ----------
    key : array, rows × figures
        What orders designs, integers, smaller is better; rows of equal key go by their number,
        so the caller gives them in order of name.
    others : array, rows × figures
        Everything else a row of the model sees, smaller is better: its integers, or the figures
        they are made of.
    stands_in : function of (column of rows, rows), optional
        Which of the second may replace which of the first as far as stock goes; all if not given.

    Returns
    -------
    array
        Indices of the rows kept, in rising order.

    Notes
    -----
    A row is compared with every earlier one, kept or not: standing in is transitive, so if a
    dropped row stands in for it, a kept one does too.
    """
    count = len(key)
    order = np.lexsort((np.arange(count), *key.T[::-1]))
    figures = np.hstack([key, others])[order]
    kept = np.ones(count, dtype=bool)
    for start in range(0, count, BLOCK):
        rows = np.arange(start, min(start + BLOCK, count))
        earlier = np.arange(rows[-1] + 1)
        beaten = np.ones((len(rows), len(earlier)), dtype=bool)
        for column in figures.T:
            beaten &= column[earlier] <= column[rows][:, None]
        beaten &= earlier < rows[:, None]
        if stands_in is not None:
            beaten &= stands_in(order[rows][:, None], order[earlier])
        kept[rows] = ~beaten.any(axis=1)
    return np.sort(order[kept])


def by_stock(
    motor: Array, driver: Array, ample_motor: Array, ample_driver: Array
) -> Callable[[Array, Array], Array]:
    """The stock half of the argument, as ``stands_in`` for :func:`undominated`.

    Parameters
    ----------
    motor, driver : arrays of rows
        Which part each row uses.
    ample_motor, ample_driver : boolean arrays over parts
        Whether the part is in stock for every axis of every machine.
    """

    def stands_in(row: Array, rows: Array) -> Array:
        return (ample_motor[motor[rows]] | (motor[rows] == motor[row])) & (
            ample_driver[driver[rows]] | (driver[rows] == driver[row])
        )

    return stands_in
