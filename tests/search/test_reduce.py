"""Dominance against brute force: the first design in order survives it, stock rows and all."""

from __future__ import annotations

import itertools
from random import Random

import numpy as np
import pytest

from selector.search.reduce import by_stock, undominated


class Instance:
    """Axes with options of small integers, capacities, and parts of which few are in stock."""

    def __init__(self, seed: int) -> None:
        random = Random(seed)
        self.parts, self.axes = 3, random.choice((1, 2, 3))
        self.stock = {
            kind: [random.choice((1, 2, self.axes, 9)) for _ in range(self.parts)]
            for kind in ("motor", "driver")
        }
        self.options = [self.axis(random) for _ in range(self.axes)]
        sums = [
            sum(random.choice(options)[1][k] for options in self.options) for k in range(3)
        ]  # a choice that fits, so that most instances have a design
        self.capacity = [total + random.choice((-1, 0, 0, 2)) for total in sums]

    def axis(self, random: Random) -> list[tuple]:
        """Options in order of name: key, other figures, motor, driver."""
        count, largest = random.randint(2, 7), random.choice((2, 4))
        names = sorted({
            (random.randrange(self.parts), random.randrange(self.parts), random.randrange(3))
            for _ in range(count)
        })  # fmt: skip
        return [
            (tuple(random.randrange(largest) for _ in range(2)),
             tuple(random.randrange(largest) for _ in range(3)), motor, driver)
            for motor, driver, _ in names
        ]  # fmt: skip

    def fits(self, taken: list[tuple]) -> bool:
        within = all(sum(option[1][k] for option in taken) <= self.capacity[k] for k in range(3))
        return within and all(
            sum(option[place] == part for option in taken) <= self.stock[kind][part]
            for place, kind in ((2, "motor"), (3, "driver"))
            for part in range(self.parts)
        )

    def first(self, kept: list[list[int]]):
        """First design in order among those of the rows kept: key figures, then names."""
        best = None
        for rows in itertools.product(*kept):
            taken = [self.options[axis][row] for axis, row in enumerate(rows)]
            if self.fits(taken):
                place = tuple(sum(option[0][k] for option in taken) for k in range(2)), rows
                best = place if best is None else min(best, place)
        return best

    def reduced(self) -> list[list[int]]:
        ample = {kind: np.array(stock) >= self.axes for kind, stock in self.stock.items()}
        kept = []
        for options in self.options:
            key, others = (np.array([option[k] for option in options]) for k in (0, 1))
            motor, driver = (np.array([option[k] for option in options]) for k in (2, 3))
            stands_in = by_stock(motor, driver, ample["motor"], ample["driver"])
            kept.append(undominated(key, others, stands_in).tolist())
        return kept


@pytest.mark.parametrize("first", range(0, 3000, 100))
def test_the_first_design_in_order_survives(first):
    for seed in range(first, first + 100):
        instance = Instance(seed)
        everything = [list(range(len(options))) for options in instance.options]
        assert instance.first(instance.reduced()) == instance.first(everything), seed


def test_instances_are_worth_trying():
    """Most have a design, dominance drops much, and stock often forbids the best of all."""
    instances = [Instance(seed) for seed in range(300)]
    everything = [[list(range(len(axis))) for axis in i.options] for i in instances]
    feasible = [i.first(rows) for i, rows in zip(instances, everything, strict=True)]
    assert sum(best is not None for best in feasible) > 150
    kept = sum(len(rows) for i in instances for rows in i.reduced())
    assert kept < 0.8 * sum(len(axis) for i in instances for axis in i.options)


def test_without_stock_only_rows_that_no_other_covers_stay():
    key = np.array([[1, 1], [1, 1], [2, 0], [0, 5], [3, 3]])
    others = np.array([[4], [4], [4], [4], [4]])
    # Row 1 equals row 0 and stands after it; row 4 is worse than row 0 in all.
    assert undominated(key, others).tolist() == [0, 2, 3]


def test_a_scarce_part_stands_in_for_nothing_but_itself():
    key, others = np.array([[1], [2], [2]]), np.zeros((3, 1), dtype=int)
    motor, driver = np.array([0, 1, 0]), np.array([0, 0, 0])
    scarce = by_stock(motor, driver, np.array([False, True]), np.array([True]))
    assert undominated(key, others, scarce).tolist() == [0, 1]


def test_nothing_gives_nothing():
    empty = np.zeros((0, 2), dtype=int)
    assert undominated(empty, empty).tolist() == []
