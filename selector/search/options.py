"""Options of one axis as arrays, and the formulas of every rule over rows of them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..domain.machine import Point
from ..physics import power, thermal, torque

if TYPE_CHECKING:
    from .candidates import AxisTable

Array = Any
GUARD = 1e-9  # the search asks this much more than the judge, so float dust never divides them


@dataclass
class Options:
    """Adequate options of one axis, as parallel arrays (one row an option)."""

    winding: Array
    driver: Array
    rail: Array
    setting: Array
    rest_share: Array
    microsteps: Array
    peak: Array
    mean: Array
    energy: Array

    @classmethod
    def none(cls) -> Options:
        """No option yet."""
        ints, floats = np.zeros(0, dtype=np.int64), np.zeros(0)
        return cls(ints, ints, ints, floats, floats, ints, floats, floats, floats)

    def __len__(self) -> int:
        return len(self.winding)

    def pick(self, rows: Array) -> Options:
        """Some of the rows."""
        return Options(*(getattr(self, name)[rows] for name in self.__dataclass_fields__))

    @classmethod
    def joined(cls, parts: list[Options]) -> Options:
        """The rows of several, one after another."""
        names = cls.__dataclass_fields__
        return cls(*(np.concatenate([getattr(part, name) for part in parts]) for name in names))


@dataclass
class Combos:
    """Rows being judged: indices into windings, drivers and rails, and the setting tried."""

    winding: Array
    driver: Array
    rail: Array
    rank: Array  # of the setting among the driver's

    def pick(self, rows: Array) -> Combos:
        """Some of the rows."""
        return Combos(self.winding[rows], self.driver[rows], self.rail[rows], self.rank[rows])

    def __len__(self) -> int:
        return len(self.winding)


class Judged:
    """One round of judging: the rows with every figure of the formulas beside them."""

    def __init__(self, table: AxisTable, rows: Combos) -> None:
        offers = table.offers
        t, machine = offers.tables, offers.problem.machine
        self.table, self.rows, self.machine, self.axis = table, rows, machine, table.axis
        self.T_h, self.I_r, self.R_25, self.L, self.K, self.N, self.J = (
            t[name][rows.winding] for name in ("T_h", "I_r", "R_25", "L", "K", "N", "J")
        )
        self.R_b, self.idle, self.t_r = (t[name][rows.driver] for name in ("R_b", "idle", "t_r"))
        stated = self.axis.damping_ratio
        self.damping = t["damping"][rows.driver] if stated is None else np.full(len(rows), stated)
        rails = t["V"], t["spread"]
        self.V, self.spread = (column[rows.rail] for column in rails)
        self.I = table.settings[rows.driver, rows.rank]
        self.detent, self.rise, self.heat_limit = (
            t[name][rows.winding] for name in ("detent", "rise", "heat_limit")
        )
        self.microsteps = table.microsteps[rows.winding, rows.driver]
        self.alive = np.ones(len(rows), dtype=bool)
        self.hopeless = np.zeros(len(rows), dtype=bool)

    def outcome(self) -> tuple[Array, Array, Options]:
        """Which rows are adequate, which no larger setting can mend, and the adequate ones."""
        self.rest()
        self.heat()
        self.warm_holding()
        self.torque()
        keep = self.alive
        return keep, self.hopeless, self.options()

    def fail(self, rule: str, failed: Array, needs: Array, best: Array, ratio: Array) -> None:
        failed = failed & self.alive
        where = np.flatnonzero(failed)
        if len(where):
            k = int(where[np.argmin(ratio[where])])
            self.table.note(rule, self.rows, len(where), k, needs[k], best[k], ratio[k])
        self.alive &= ~failed

    def rest(self) -> None:
        """Share of current at rest: the smallest that holds, if the axis allows a lower one."""
        margin = 1.0 + self.machine.margins.torque
        need = (self.axis.holding_torque or 0.0) * margin
        self.rest_share = np.ones(len(self.I))
        full = torque.standstill_torque(self.K, self.I)
        if self.axis.reduce_at_rest:
            for index in np.unique(self.rows.driver):
                mine = self.rows.driver == index
                for share in reversed(self.table.offers.drivers[index].hold_shares):
                    holds = full[mine] * share >= need * (1 + GUARD)
                    self.rest_share[mine] = np.where(holds, share, self.rest_share[mine])
        held = full * self.rest_share
        with np.errstate(divide="ignore"):
            miss = need / np.maximum(held, 1e-12)
        bare = np.full_like(held, self.axis.holding_torque or 0.0)
        self.fail("holding", held < need * (1 + GUARD), bare, held, miss)
        if not self.axis.above_rated_at_rest:
            at_rest = self.rest_share * self.I
            too_much = at_rest > self.I_r * (1 + GUARD)
            self.fail("rest current", too_much, at_rest, self.I_r, at_rest / self.I_r)
            if not self.axis.reduce_at_rest:
                self.hopeless |= too_much

    def warm_holding(self) -> None:
        """Holding again, with what the supply's low end drives through the warm winding."""
        need = (self.axis.holding_torque or 0.0) * (1.0 + self.machine.margins.torque)
        if need <= 0.0:
            return
        R = torque.winding_resistance(self.R_25, self.temperature) + self.R_b
        flows = np.minimum(self.rest_share * self.I, self.V * (1.0 - self.spread) / R)
        held = torque.standstill_torque(self.K, flows)
        ratio = need / np.maximum(held, 1e-12)
        bare = np.full_like(held, self.axis.holding_torque or 0.0)
        self.fail("holding", held < need * (1 + GUARD), bare, held, ratio)

    def currents(self, point: Point, R: Array, rows: Array) -> power.Currents:
        asked = self.signed_torque(point)[rows]
        return power.phase_currents(
            point.speed,
            asked,
            self.V[rows],
            self.I[rows],
            R,
            self.L[rows],
            self.K[rows],
            self.N[rows],
        )

    def signed_torque(self, point: Point) -> Array:
        inertia = self.J + (self.axis.load_inertia or 0.0)
        return point.torque + inertia * point.acceleration

    def heat(self) -> None:
        """Steady winding temperature: of the duty, else the worst of each point and rest."""
        self.temperature = np.full(len(self.I), self.machine.ambient)
        rows = np.flatnonzero(self.alive)
        if not len(rows):
            return
        scenes: list[list[tuple[float, Point | None]]]
        if self.axis.has_duty:
            duty = [(p.share or 0.0, p) for p in self.axis.points]
            scenes = [[*duty, (self.axis.rest_share, None)]]
        else:
            scenes = [[(1.0, p)] for p in (*self.axis.points, None)]
        worst = np.max([self.settled(scene, rows) for scene in scenes], axis=0)
        self.temperature[rows] = worst
        limit = self.heat_limit
        too_hot = self.temperature > limit - 1e-6
        rise = self.temperature - self.machine.ambient
        ratio = rise / np.maximum(limit - self.machine.ambient, 1e-9)
        self.hopeless |= too_hot & self.alive & self.reached()
        self.fail("winding temperature", too_hot, self.temperature, limit, ratio)

    def reached(self) -> Array:
        """Rows whose points are in reach of 4/π of the voltage with the winding at its limit.

        Only of these is a larger setting hotter for sure: where a point is out of reach the full
        setting is counted, and a larger one may reach it with less.
        """
        hot = torque.winding_resistance(self.R_25, self.heat_limit) + self.R_b
        reached = np.ones(len(self.I), dtype=bool)
        for point in self.axis.points:
            most = torque.pullout_torque(
                point.speed, power.SQUARE_WAVE * self.V, self.I, hot, self.L, self.K, self.N
            )
            reached &= most >= np.abs(self.signed_torque(point))
        return reached

    def full_flow(self) -> Array:
        """Rows in which the full current flows at every point, with the winding at its limit."""
        hot = torque.winding_resistance(self.R_25, self.heat_limit) + self.R_b
        flows = np.ones(len(self.I), dtype=bool)
        for point in self.axis.points:
            at = self.signed_torque(point)
            i_q = np.clip(at / self.K, -self.I, self.I)
            i_d = np.sqrt(np.maximum(self.I**2 - i_q**2, 0.0))
            volts = power.SQUARE_WAVE * self.V
            kink = torque.corner_speed(volts, i_d, i_q, hot, self.L, self.K, self.N)
            flows &= (at >= 0.0) & (kink >= point.speed)
        return flows

    def settled(self, scene: list[tuple[float, Point | None]], rows: Array) -> Array:
        to_air = self.axis.mounting_factor * thermal.thermal_resistance(
            self.rise[rows], self.I_r[rows], self.R_25[rows]
        )
        temperature = np.full(len(rows), self.machine.ambient)
        for step in range(60):
            R = torque.winding_resistance(self.R_25[rows], temperature) + self.R_b[rows]
            copper, iron = np.zeros(len(rows)), np.zeros(len(rows))
            for share, point in scene:
                if point is None:
                    copper += share * self.R_25[rows] * (self.rest_share * self.I)[rows] ** 2
                    continue
                i_d, i_q = self.currents(point, R, rows)
                copper += share * self.R_25[rows] * (i_d**2 + i_q**2)
                iron += share * power.iron_loss(
                    point.speed,
                    i_d,
                    i_q,
                    self.T_h[rows],
                    self.L[rows],
                    self.K[rows],
                    self.N[rows],
                    power.IRON_LOSS_LOW,
                )
            before = temperature
            temperature = thermal.steady_temperature(self.machine.ambient, to_air, copper, iron)
            apart = np.abs(temperature - before) >= 1e-8
            if not apart.any():
                break
            if step >= thermal.PLAIN_STEPS:  # two states take turns: close in on the middle
                temperature = np.where(apart, (temperature + before) / 2.0, temperature)
        return temperature

    def torque(self) -> None:
        """Usable torque at every judged speed: each point's own first, as it mostly decides,
        and that without tolerances first, as those never add any."""
        margin = 1.0 + self.machine.margins.torque
        stated = self.machine.tolerances.combine
        own, lower = slice(-1, None), slice(None, -1)
        for part, combine in ((own, "nominal"), (own, stated), (lower, stated)):
            for point in self.axis.points:
                rows = np.flatnonzero(self.alive)
                speeds = self.speeds(point, rows)[part]
                if not len(rows) or not speeds:
                    continue
                need = np.abs(self.signed_torque(point)) * margin
                usable = np.zeros(len(self.I))
                usable[rows] = self.usable(np.stack(speeds), rows, combine).min(axis=0)
                short = self.alive & (usable < need * (1 + GUARD))
                if point.speed > 0:  # without any torque left the motor does not turn at all
                    short |= self.alive & (usable <= 0.0)
                if combine != stated and short.any():  # say what the nearest miss really has
                    near = np.flatnonzero(short)
                    near = near[[np.argmax(usable[near] / np.maximum(need[near], 1e-12))]]
                    at = np.stack(self.speeds(point, near)[part])
                    usable[near] = self.usable(at, near, stated).min(axis=0)
                    usable[np.setdiff1d(np.flatnonzero(short), near)] = 0.0
                ratio = need / np.maximum(usable, 1e-9)
                self.fail("torque", short, need / margin, usable, ratio)

    def speeds(self, point: Point, rows: Array) -> list[Array]:
        """Speeds a point is judged at, one array over the rows for each."""
        R = torque.winding_resistance(self.R_25[rows], self.temperature[rows]) + self.R_b[rows]
        K, L, N, V, I = (a[rows] for a in (self.K, self.L, self.N, self.V, self.I))
        corner = torque.corner_speed(V, 0.0, I, R, L, K, N)
        return torque.judged_speeds(point.speed, point.from_rest, corner)

    def usable(self, speeds: Array, rows: Array, combine: str) -> Array:
        """Usable torque, speeds (one row each) by options (one column each).

        Nominal tolerances bound it from above in a ninth of the work.
        """
        tolerances = self.machine.tolerances
        widths = torque.Tolerances(
            tolerances.resistance, tolerances.inductance, tolerances.torque, self.spread[rows]
        )
        warm = torque.winding_resistance(self.R_25[rows], self.temperature[rows])
        return torque.torque_chain(
            speeds,
            self.V[rows],
            self.I[rows],
            warm,
            self.R_b[rows],
            self.L[rows],
            self.K[rows],
            self.N[rows],
            self.t_r[rows],
            self.detent[rows],
            self.damping[rows],
            self.microsteps[rows],
            widths,
            combine,
        ).usable

    def options(self) -> Options:
        """The adequate rows with their power and returned energy."""
        rows = np.flatnonzero(self.alive)
        R = torque.winding_resistance(self.R_25[rows], self.temperature[rows]) + self.R_b[rows]
        resting = power.holding_power(
            self.V[rows], (self.rest_share * self.I)[rows], R, self.idle[rows]
        )
        peak, mean = resting.copy(), self.axis.rest_share * resting
        for point in self.axis.points:
            at = (
                self.signed_torque(point)[rows],
                self.V[rows],
                self.I[rows],
                R,
                self.L[rows],
                self.K[rows],
                self.N[rows],
                self.T_h[rows],
                self.idle[rows],
            )
            peak = np.maximum(peak, power.peak_bus_power(point.speed, point.from_rest, *at))
            own = power.bus_power(point.speed, *at)
            mean = mean + (point.share or 0.0) * np.maximum(own, 0.0)
        picked = self.rows.pick(rows)
        return Options(
            picked.winding,
            picked.driver,
            picked.rail,
            self.I[rows],
            self.rest_share[rows],
            self.microsteps[rows],
            peak,
            mean if self.axis.has_duty else peak,
            self.table.energy[picked.winding, picked.driver],
        )
