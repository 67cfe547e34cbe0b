"""The integer model: options of the axes on each bus, feeds, and the rows that couple them.

Each bus has its rail and the lowest driver limit it is to respect (a cell, see ``bounds``), so the
energy a farad takes up is a number and every row is linear: CP-SAT, HiGHS and an exhaustive search
can be given the same model. It is written over a set of buses; the search uses one so far.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np

from ..domain.parts import Part
from ..physics.braking import CAPACITOR_SHARE
from .model import Model
from .offers import (
    AMOUNTS,
    CAPACITANCE_SCALE,
    ENERGY_SCALE,
    MASS_SCALE,
    MONEY_SCALE,
    POWER_SCALE,
    VOLUME_SCALE,
    Feed,
    Offers,
    down,
    up,
)
from .options import Options
from .reduce import by_stock, undominated

Array = Any
SUPPLY, BRAKING, STOCK, STARTUP = ("supply power", "braking rise", "stock", "start-up capacitance")
LIMITS = ("the price limit", "the volume limit", "the mass limit")
RULES = (SUPPLY, BRAKING, STOCK, STARTUP, *LIMITS)


@dataclass
class Bus:
    """What one bus may take: adequate options by axis, feeds of one rail, and its driver limit."""

    options: list[Options]
    feeds: list[Feed]
    limit: float


@dataclass
class Choice:
    """A design in the search's own terms: an option row per axis and a feed."""

    options: list[Options]  # one row each
    feed: Feed
    values: list[int]  # of the goals, in steps

    def order(self, offers: Offers) -> tuple[Any, ...]:
        """Place among all designs: goals, trims, mean power, voltage, then names."""
        t = offers.tables
        power = sum(int(up(o.mean, POWER_SCALE)[0]) for o in self.options)
        names = [
            (
                int(t["winding_place"][o.winding[0]]),
                int(t["driver_place"][o.driver[0]]),
                float(o.setting[0]),
            )
            for o in self.options
        ]
        feed = self.feed
        volts = offers.rails[feed.rail].voltage
        return (*self.values, feed.trimmed, power, volts, names, feed.supply.part, feed.count)


def feed_room(offers: Offers, feed: Feed, limit: float) -> float:
    """Energy a farad takes up between the highest steady and the allowed voltage. [J/F]"""
    trip = feed.supply.overvoltage_trip
    allowed = limit if trip is None else min(limit, trip)
    highest = offers.rails[feed.rail].highest
    return max(0.0, 0.5 * CAPACITOR_SHARE * (allowed**2 - highest**2))


def reduced_feeds(offers: Offers, feeds: list[Feed]) -> list[Feed]:
    """The feeds of one rail that can matter, in canonical order."""
    feeds = sorted(feeds, key=lambda f: (f.supply.part, f.count))
    if not feeds:
        return []
    key = [[*(f.count * g.of(f.supply) for g in offers.goals), int(f.trimmed)] for f in feeds]
    others = [_feed_figures(offers, f) for f in feeds]
    rows = undominated(np.array(key, dtype=np.int64), np.array(others))
    return [feeds[k] for k in rows]


def _feed_figures(offers: Offers, feed: Feed) -> list[float]:
    """Everything a row sees of a feed, smaller being better: its integer, or the figure itself."""
    supply = feed.supply
    startup, trip = supply.largest_startup_capacitance, supply.overvoltage_trip
    return [
        *(feed.count * amount(supply) for amount in AMOUNTS),
        -usable_power(offers, feed),
        -feed.count * (supply.output_capacitance or 0.0),
        -np.inf if trip is None else -trip,
        -np.inf if startup is None else -int(down(feed.count * startup, CAPACITANCE_SCALE)),
        -int(supply.absorbs_energy),
    ]


def usable_power(offers: Offers, feed: Feed) -> int:
    """Power a feed may be asked for: derated, less the margin, in steps."""
    margin = 1.0 + offers.problem.machine.margins.supply
    return int(down(feed.power / margin, POWER_SCALE))


def reduced_options(offers: Offers, options: Options, startup: bool) -> Options:
    """The adequate options of an axis at one rail that can matter, in canonical order.

    ``startup`` says whether a supply limits the capacitance it starts into. Limits of drivers are
    those of the cell, so they need no comparing.
    """
    t = offers.tables
    place = (
        options.setting,
        t["driver_place"][options.driver],
        t["winding_place"][options.winding],
    )
    options = options.pick(np.lexsort(place))
    goals = t["winding_goals"][options.winding] + t["driver_goals"][options.driver]
    key = np.column_stack([goals, up(options.mean, POWER_SCALE)])
    held = t["C"][options.driver]
    others = np.column_stack(
        [
            t["winding_amounts"][options.winding] + t["driver_amounts"][options.driver],
            up(options.peak, POWER_SCALE),
            up(options.energy, ENERGY_SCALE, 0.0),
            -held,
            held if startup else np.zeros_like(held),
        ]
    )
    motor = t["motor"][options.winding]
    stands_in = by_stock(motor, options.driver, t["ample_motor"], t["ample_driver"])
    return options.pick(undominated(key, others, stands_in))


class BusModel:
    """The model of a set of buses; an axis is on one of them."""

    def __init__(self, offers: Offers, buses: list[Bus]) -> None:
        self.offers, self.machine, self.buses = offers, offers.problem.machine, buses
        self.model = Model()
        self.numbers: list[list[Array]] = [[] for _ in buses]  # by bus, then axis
        for axis in range(len(self.machine.axes)):
            group = self.model.add_group(sum(len(bus.options[axis]) for bus in buses))
            start = 0
            for mine, bus in zip(self.numbers, buses, strict=True):
                end = start + len(bus.options[axis])
                mine.append(np.array(group[start:end], dtype=np.int64))
                start = end
        self.feed_numbers = [self.model.add_group(len(bus.feeds)) for bus in buses]
        self.complete = all(self.model.groups)
        if self.complete:
            for number in range(len(buses)):
                self._supply_rows(number)
                self._startup_row(number)
                self._braking_rows(number)
            self._stock_rows()
            self._limit_rows()
        self.goals = [self._goal(k) for k in range(len(offers.goals))]

    def _over_axes(self, figure: Callable[[Options], Array], bus: int) -> dict[int, int]:
        """Terms of one figure over the options of every axis on a bus."""
        terms: dict[int, int] = {}
        pairs = zip(self.numbers[bus], self.buses[bus].options, strict=True)
        for numbers, options in pairs:
            terms.update(zip(numbers.tolist(), figure(options).tolist(), strict=True))
        return terms

    def _over_feeds(self, figure: Callable[[Feed], int], bus: int) -> dict[int, int]:
        pairs = zip(self.feed_numbers[bus], self.buses[bus].feeds, strict=True)
        return {number: figure(feed) for number, feed in pairs}

    # -- rows -------------------------------------------------------------------------------

    def _supply_rows(self, bus: int) -> None:
        """Mean power, and the peak of each stage, within the derated rating less its margin."""
        fixed = int(up(self.machine.fixed_power, POWER_SCALE))
        gives = self._over_feeds(lambda f: -usable_power(self.offers, f), bus)
        mean = self._over_axes(lambda o: up(o.mean, POWER_SCALE), bus)
        self.model.add_row(mean | gives, -fixed, None, SUPPLY)
        names = [axis.axis for axis in self.machine.axes]
        peak = self._over_axes(lambda o: up(o.peak, POWER_SCALE), bus)
        for stage in self.machine.stages:
            numbers = [self.numbers[bus][names.index(name)].tolist() for name in stage.axes]
            working = {n: peak[n] for mine in numbers for n in mine}
            self.model.add_row(working | gives, -fixed, None, SUPPLY)

    def _startup_row(self, bus: int) -> None:
        """Capacitance of drivers and bus within what the supply starts into, where stated."""
        feeds = self.buses[bus].feeds
        if all(f.supply.largest_startup_capacitance is None for f in feeds):
            return
        held = up(self.offers.tables["C"], CAPACITANCE_SCALE)
        fixed = int(up(self.machine.bus_capacitance, CAPACITANCE_SCALE))
        most = int(held.max(initial=0)) * len(self.machine.axes) + fixed

        def allowed(feed: Feed) -> int:
            one = feed.supply.largest_startup_capacitance
            return -(most if one is None else int(down(feed.count * one, CAPACITANCE_SCALE)))

        terms = self._over_axes(lambda o: held[o.driver], bus) | self._over_feeds(allowed, bus)
        self.model.add_row(terms, -fixed, None, STARTUP)

    def _braking_rows(self, bus: int) -> None:
        """Energy of an emergency stop of all axes within what the capacitors take up.

        A supply's trip below the drivers' limit leaves less room, for the drivers' capacitors
        too; so one row for the feeds of each room, slack unless one of them is taken.
        """
        classes: dict[float, dict[int, Feed]] = {}
        for number, feed in zip(self.feed_numbers[bus], self.buses[bus].feeds, strict=True):
            if not feed.supply.absorbs_energy:
                room = feed_room(self.offers, feed, self.buses[bus].limit)
                classes.setdefault(room, {})[number] = feed
        for room, feeds in classes.items():
            own = down(room * self.offers.tables["C"], ENERGY_SCALE)

            def beyond(o: Options, own: Array = own) -> Array:
                return up(o.energy, ENERGY_SCALE, 0.0) - own[o.driver]

            terms = self._over_axes(beyond, bus)
            most = sum(
                max([0, *(terms[n] for n in numbers.tolist())]) for numbers in self.numbers[bus]
            )
            for number, feed in feeds.items():
                held = feed.count * (feed.supply.output_capacitance or 0.0)
                held += self.machine.bus_capacitance
                terms[number] = most - int(down(room * held, ENERGY_SCALE))
            self.model.add_row(terms, most, None, BRAKING)

    def _stock_rows(self) -> None:
        """Stock of each motor and driver over all buses, where it can run out."""
        t, drivers = self.offers.tables, self.offers.drivers
        motors = zip(t["motor"].tolist(), (w.motor for w in self.offers.windings), strict=True)
        for number, motor in sorted(dict(motors).items()):
            self._stock_row(motor.stock, lambda o, n=number: t["motor"][o.winding] == n)  # type: ignore[misc]
        for number, driver in enumerate(drivers):
            self._stock_row(driver.stock, lambda o, n=number: o.driver == n)  # type: ignore[misc]

    def _stock_row(self, stock: int | None, uses: Callable[[Options], Array]) -> None:
        quantity = self.machine.quantity
        if stock is not None and stock < quantity * len(self.machine.axes):
            used: dict[int, int] = {}
            for bus in range(len(self.buses)):
                used |= self._over_axes(lambda o: quantity * uses(o), bus)
            self.model.add_row(used, stock, None, STOCK)

    def _limit_rows(self) -> None:
        limits = self.machine.limits
        price = None if limits.price is None else float(limits.price.amount)
        bounds = ((price, MONEY_SCALE), (limits.volume, VOLUME_SCALE), (limits.mass, MASS_SCALE))
        for k, (limit, scale) in enumerate(bounds):
            if limit is not None:
                amounts = "winding_amounts", "driver_amounts"
                terms = self._summed(*amounts, k, AMOUNTS[k])
                self.model.add_row(terms, int(down(limit, scale)), None, LIMITS[k])

    def _summed(
        self, windings: str, drivers: str, column: int, of: Callable[[Part], int]
    ) -> dict[int, int]:
        """Terms of a figure that adds up over parts: a column of two tables, and the supplies'."""
        motor = self.offers.tables[windings][:, column]
        driver = self.offers.tables[drivers][:, column]
        terms: dict[int, int] = {}
        for bus in range(len(self.buses)):
            terms |= self._over_axes(lambda o: motor[o.winding] + driver[o.driver], bus)
            terms |= self._over_feeds(lambda f: f.count * of(f.supply), bus)
        return terms

    # -- goals and ties ---------------------------------------------------------------------

    def _goal(self, k: int) -> dict[int, int]:
        return self._summed("winding_goals", "driver_goals", k, self.offers.goals[k].of)

    def ties(self) -> Iterator[dict[int, int]]:
        """What orders equals at one voltage: trims and mean power, then names, a few at a time."""
        power: dict[int, int] = {}
        feeds: dict[int, int] = {}
        for bus in range(len(self.buses)):
            power |= self._over_axes(lambda o: up(o.mean, POWER_SCALE), bus)
            feeds |= self._over_feeds(lambda f: int(f.trimmed), bus)
        most = sum(max(power[n] for n in group) for group in self.model.groups if group[0] in power)
        yield power | {n: v * (most + 1) for n, v in feeds.items()}
        yield from self._packed([*self._axis_names(), self._feed_names()])

    def _axis_names(self) -> Iterator[dict[int, int]]:
        t = self.offers.tables
        for axis in range(len(self.machine.axes)):
            numbers = np.concatenate([mine[axis] for mine in self.numbers])
            o = Options.joined([bus.options[axis] for bus in self.buses])
            table = np.column_stack(
                [t["winding_place"][o.winding], t["driver_place"][o.driver], o.setting]
            )
            _, place = np.unique(table, axis=0, return_inverse=True)
            yield dict(zip(numbers.tolist(), place.ravel().tolist(), strict=True))

    def _feed_names(self) -> dict[int, int]:
        keys = sorted({(f.supply.part, f.count) for bus in self.buses for f in bus.feeds})
        terms: dict[int, int] = {}
        for bus in range(len(self.buses)):
            terms |= self._over_feeds(lambda f: keys.index((f.supply.part, f.count)), bus)
        return terms

    @staticmethod
    def _packed(orders: list[dict[int, int]], most: int = 2**40) -> Iterator[dict[int, int]]:
        """Several objectives in order as few: each weighs more than all those after it."""
        packed: dict[int, int] = {}
        span = 1
        for order in orders:
            size = max(order.values(), default=0) + 1
            if span * size > most and packed:
                yield packed
                packed, span = {}, 1
            packed = {n: v * size for n, v in packed.items()} | order
            span *= size
        yield packed

    def choice(self, taken: tuple[int, ...]) -> Choice:
        """The design behind a solution (of one bus)."""
        rows = [
            options.pick(np.flatnonzero(np.isin(numbers, taken)))
            for numbers, options in zip(self.numbers[0], self.buses[0].options, strict=True)
        ]
        feed = self.buses[0].feeds[
            next(k for k, n in enumerate(self.feed_numbers[0]) if n in set(taken))
        ]
        values = [sum(goal.get(n, 0) for n in taken) for goal in self.goals]
        return Choice(rows, feed, values)
