"""What need not be judged: lower bounds of the first goal, with watts and joules at a price.

A cell is a rail with the lowest driver limit L of the bus. Take any prices λ of a watt and μ of a
joule, zero or more. A design of goal at most U in the cell takes no more power than its feed
gives, and returns no more energy than its capacitors take up, room·C, so that

    Σ_axes (goal + λ·power + μ·(energy - room·own C))
      + feed's goal - λ·(feed's power - fixed loads) - μ·room·(feed's C + bus C)   ≤   U.

Grant every axis its least such sum in the cell, and the feed its least: whatever option or feed
exceeds U with all the others granted so is in no design that good, nor in a tie with it, whatever
else couples the axes. Options not yet judged count with a power no setting of them goes below;
their energy needs no judging. Any prices give a valid bound; several are tried and each cell uses
the pair that bounds it best.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from typing import Any

import numpy as np

from ..physics.braking import CAPACITOR_SHARE
from .candidates import AxisTable
from .offers import Offers

Array = Any
WATT_PRICES = (0.0, 0.5, 1.0, 2.0)  # of the median goal per watt of the feeds
JOULE_PRICES = (0.0, 0.15, 0.5, 1.5)  # of the median goal of the feeds per usual energy
NONE, HUGE = np.inf, 1e30


@dataclass
class CellBound:
    """Bound of one cell: what it leaves room for, given a ceiling of the first goal."""

    rail: int
    level: int
    floor: float
    watt: float
    joule: float
    axes: dict[int, float]  # least sum by axis table
    feed: float  # least sum of the feeds


class Bounds:
    """Floors of the first goal in each cell, from what has been judged so far."""

    def __init__(self, offers: Offers, tables: list[AxisTable]) -> None:
        self.offers, self.tables = offers, tables
        self.unique = list({id(table): table for table in tables}.values())
        self.times = {id(t): sum(t is u for u in tables) for t in self.unique}
        t, machine, feeds = offers.tables, offers.problem.machine, offers.feeds
        first = offers.goals[0].of
        self.pair_goal = (t["winding_goals"][:, :1] + t["driver_goals"][:, 0]).astype(float)
        self.feed_goal = np.array([f.count * first(f.supply) for f in feeds], dtype=float)
        self.feed_rail = np.array([f.rail for f in feeds], dtype=np.int64)
        gives = np.array([f.power for f in feeds]) / (1.0 + machine.margins.supply)
        self.feed_power = gives - machine.fixed_power
        self.feed_held = machine.bus_capacitance + np.array(
            [f.count * (f.supply.output_capacitance or 0.0) for f in feeds]
        )
        self.levels = np.unique(t["V_limit"])
        room = 0.5 * CAPACITOR_SHARE * (self.levels**2 - t["V_high"][:, None] ** 2)
        self.exists = room > -1e-6  # rail × level
        self.room = np.maximum(room, 0.0)
        absorbing = {f.rail for f in feeds if f.supply.absorbs_energy}
        self.brakes = np.array([r not in absorbing for r in range(len(offers.rails))], dtype=float)
        self.allowed = t["V_limit"] >= self.levels[:, None]  # level × driver
        self.prices = self._prices(gives)

    def _prices(self, gives: Array) -> Array:
        """Pairs of prices to try: columns of a watt and of a joule."""
        if not len(gives):
            return np.zeros((1, 2))
        watt = float(np.median(self.feed_goal / np.maximum(gives, 1e-9)))
        energy = sum(float(np.median(t.energy)) for t in self.tables if t.energy.size)
        joule = float(np.median(self.feed_goal)) / energy if energy > 1e-6 else 0.0
        joules = JOULE_PRICES if joule else (0.0,)
        return np.array(list(itertools.product(WATT_PRICES, joules))) * (watt, joule)

    def cells(self, rail: int) -> list[CellBound]:
        """The cells of a rail in which a design could be, with their bounds."""
        watt, joule = self.prices[:, 0], self.prices[:, 1] * self.brakes[rail]
        axes = {id(t): self._axis_floors(t, rail, watt, joule) for t in self.unique}
        here = self.feed_rail == rail
        taken_up = self.room[rail][:, None] * self.feed_held[here]  # level × feed
        feeds = (self.feed_goal[here] - watt[:, None] * self.feed_power[here])[:, None, :]
        feed = (feeds - joule[:, None, None] * taken_up).min(axis=2, initial=NONE)
        whole = feed + sum(self.times[key] * floor for key, floor in axes.items())
        cells = []
        for level in np.flatnonzero(self.exists[rail] & np.isfinite(whole).all(axis=0)):
            best = int(np.argmax(whole[:, level]))
            cells.append(
                CellBound(
                    rail,
                    int(level),
                    float(whole[best, level]),
                    watt[best],
                    joule[best],
                    {key: float(floor[best, level]) for key, floor in axes.items()},
                    float(feed[best, level]),
                )
            )
        return cells

    def _axis_floors(self, table: AxisTable, rail: int, watt: Array, joule: Array) -> Array:
        """Least sum of an axis at a rail: prices × levels."""
        power, prices = table.power[:, :, rail], (len(watt), 1, 1)
        sums = self.pair_goal + watt.reshape(prices) * np.minimum(power, HUGE)
        sums = sums + joule.reshape(prices) * table.energy
        least = np.where(np.isfinite(power), sums, NONE).min(axis=1, initial=NONE)
        room = self.room[rail][:, None] * self.offers.tables["C"]  # levels × drivers
        sums = least[:, None, :] - joule.reshape(prices) * room
        return np.where(self.allowed, sums, NONE).min(axis=2, initial=NONE)

    def _left(self, cell: CellBound, least: float, ceiling: float) -> float:
        """What one axis or feed may take when all the others take their least."""
        return ceiling + 1.0 - (cell.floor - least)  # one step for float dust

    def pairs(self, cell: CellBound, table: AxisTable, ceiling: float) -> Array:
        """Pairs of an axis that could be in a design of the cell at or below a ceiling."""
        own = cell.joule * self.room[cell.rail, cell.level] * self.offers.tables["C"]
        sums = self.pair_goal + cell.watt * table.power_floor + cell.joule * table.energy - own
        fits = sums <= self._left(cell, cell.axes[id(table)], ceiling)
        return fits & self.allowed[cell.level]

    def options(self, cell: CellBound, table: AxisTable, ceiling: float) -> Array:
        """Adequate options of an axis that could be in such a design."""
        o = table.at_rail[cell.rail]
        own = cell.joule * self.room[cell.rail, cell.level] * self.offers.tables["C"]
        sums = self.pair_goal[o.winding, o.driver] + cell.watt * o.peak
        sums = sums + cell.joule * table.energy[o.winding, o.driver] - own[o.driver]
        fits = sums <= self._left(cell, cell.axes[id(table)], ceiling)
        return fits & self.allowed[cell.level][o.driver]

    def feeds(self, cell: CellBound, ceiling: float) -> Array:
        """Feeds, by number, that could be in such a design."""
        here = np.flatnonzero(self.feed_rail == cell.rail)
        taken_up = self.room[cell.rail, cell.level] * self.feed_held[here]
        sums = self.feed_goal[here] - cell.watt * self.feed_power[here] - cell.joule * taken_up
        return here[sums <= self._left(cell, cell.feed, ceiling)]

    def few(self, cell: CellBound, table: AxisTable, count: int) -> Array:
        """The ``count`` best adequate options of an axis at a rail, for each pair of prices."""
        o = table.at_rail[cell.rail]
        keep = np.zeros(len(o), dtype=bool)
        allowed = self.allowed[cell.level][o.driver]
        goal, energy = self.pair_goal[o.winding, o.driver], table.energy[o.winding, o.driver]
        for watt, joule in self.prices:
            sums = np.where(allowed, goal + watt * o.peak + joule * energy, NONE)
            keep[np.argsort(sums, kind="stable")[:count]] = True
        return keep & allowed
