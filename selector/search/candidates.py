"""Every motor × joining × driver × setting × bus voltage of an axis, judged in arrays.

For one pair of motor and driver at one voltage the settings are tried from the smallest that
could do upwards. A row ends at an adequate setting when no larger one can matter: at every point
the full current flows even with the winding at its limit, so a larger setting, whose winding is at
most that hot, makes a current vector at least as long at every speed: no less power, no cooler.
Where the bus cannot drive the full current this is not so (a hotter winding draws less there), nor
where the load drives the motor, nor where the axis may fall to a smaller share at rest; there the
row goes on, and dominance chooses. A setting that runs too hot ends a row whose points are in
reach, for with the winding at its limit a larger one makes at least as much heat.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np

from ..domain.machine import Axis, Point
from ..domain.results import Quantity, Rejection
from ..physics import braking, power, supply, thermal, torque
from .offers import Offers

Array = Any
GUARD = 1e-9  # the search asks this much more than the judge, so float dust never divides them
CHUNK = 6000
AHEAD = 4  # settings of a row judged at once after the first: fewer, larger arrays
RULES = {
    "frame": "m",
    "rotor inertia": "kg*m^2",
    "step rate": "Hz",
    "driver voltage": "V",
    "current setting": "A",
    "speed": "rad/s",
    "rest current": "A",
    "holding": "N*m",
    "winding temperature": "degC",
    "torque": "N*m",
}


@dataclass
class Miss:
    """Options a rule turned away first, and the nearest of them."""

    count: int = 0
    ratio: float = np.inf
    needs: float | None = None
    best: float | None = None
    label: str = ""


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


@dataclass
class AxisTable:
    """What is known of one axis: pairs still possible, rails judged, adequate options."""

    axis: Axis
    offers: Offers
    settings: Array = field(init=False)  # driver × rank, NaN beyond a driver's last
    microsteps: Array = field(init=False)  # winding × driver
    possible: Array = field(init=False)  # winding × driver: passes what no voltage can change
    first_rank: Array = field(init=False)  # winding × driver: of the first strong setting
    least_share: Array = field(init=False)  # by driver: of the setting that may flow at rest
    power_floor: Array = field(init=False)  # winding × driver [W]
    energy: Array = field(init=False)  # winding × driver: returned by a stop from top speed [J]
    reaches: Array = field(init=False)  # winding × driver × rail: could reach every point
    judged: Array = field(init=False)  # winding × driver × rail
    at_rail: dict[int, Options] = field(init=False)  # adequate options by rail
    # Least power of a pair at a rail: a floor until it is judged, then that of its adequate
    # options, infinite where there are none.
    power: Array = field(init=False)
    misses: dict[str, Miss] = field(init=False)
    tried: int = 0

    def __post_init__(self) -> None:
        drivers = self.offers.drivers
        longest = max((len(d.peak_settings) for d in drivers), default=0)
        self.settings = np.full((len(drivers), longest), np.nan)
        for index, driver in enumerate(drivers):
            derated = supply.derated_share(
                self.offers.problem.machine.ambient,
                [(s.at, s.share) for s in driver.derating],
                driver.max_ambient,
            )
            most = driver.peak_settings[-1] * derated * (1 + GUARD)
            allowed = [s for s in driver.peak_settings if s <= most]
            self.settings[index, : len(allowed)] = allowed
        self.misses = {rule: Miss() for rule in RULES}
        self.at_rail = {rail: Options.none() for rail in range(len(self.offers.rails))}
        shape = (len(self.offers.windings), len(drivers))
        self.microsteps = np.zeros(shape, dtype=np.int64)
        self.possible = self._possible(shape)
        self._weigh_pairs()
        self.judged = np.zeros((*shape, len(self.offers.rails)), dtype=bool)
        fits = self.reaches & self.possible[:, :, None]
        self.power = np.where(fits, self.power_floor[:, :, None], np.inf)

    def _possible(self, shape: tuple[int, int]) -> Array:
        """Pairs that pass the rules no voltage or setting can change."""
        axis, offers = self.axis, self.offers
        possible = np.ones(shape, dtype=bool)
        for w, winding in enumerate(offers.windings):
            frame = winding.motor.frame
            if axis.frames and not any(abs(frame - f) < 1e-6 for f in axis.frames):
                possible[w] = False
                near = min(axis.frames, key=lambda f: abs(frame - f))
                self._miss("frame", shape[1], winding.label, near, frame, 1.0 + abs(frame - near))
            elif axis.accelerates and winding.motor.rotor_inertia is None:
                possible[w] = False
                self._miss("rotor inertia", shape[1], winding.label, None, None, 3.0)
        teeth = offers.tables["N"]
        for d, driver in enumerate(offers.drivers):
            for count in np.unique(teeth):
                rows = teeth == count
                fitting, rate = finest_microsteps(
                    axis.top_speed,
                    float(count),
                    driver.microsteps,
                    driver.max_step_rate,
                    offers.problem.machine.limits.step_rate,
                )
                self.microsteps[rows, d] = fitting
                if fitting == 0:
                    failed = int((possible[:, d] & rows).sum())
                    possible[rows, d] = False
                    limit = min(
                        r
                        for r in (
                            driver.max_step_rate,
                            offers.problem.machine.limits.step_rate,
                            np.inf,
                        )
                        if r is not None
                    )
                    best = None if not np.isfinite(limit) else limit
                    miss = 1e9 if best is None else rate / best
                    if failed:
                        self._miss("step rate", failed, driver.part, rate, best, miss)
        return possible

    def _weigh_pairs(self) -> None:
        """Bounds that need no judging: first strong setting, power, fit to a rail, energy.

        Usable torque is at most 0.90·K·I less the detent, so a setting below that is not strong.
        The power floor holds at every voltage: at rest the (lowest) share of at least that
        setting flows through cold copper, and at a point the current that makes its torque.
        """
        tables, machine = self.offers.tables, self.offers.problem.machine
        need = np.zeros(len(self.offers.windings))
        for point in self.axis.points:
            need = np.maximum(need, required_torque(self.axis, point, tables["J"]))
        least = self._modelled(need * (1.0 + machine.margins.torque)) / tables["K"]
        if self.axis.stop_deceleration is not None:  # the stop must be one the setting can make
            stop = self._inertia() * self.axis.stop_deceleration + self.axis.driving_torque
            least = np.maximum(least, stop / (torque.MODEL_FACTOR * tables["K"]))
        below = self.settings[None, :, :] < (least * (1 - GUARD))[:, None, None]
        self.first_rank = below.sum(axis=2)
        setting = self._setting(
            np.arange(len(least))[:, None], np.arange(len(self.settings)), self.first_rank
        )
        weak = self.possible & np.isnan(setting)
        if weak.any():
            self._note_weak(weak, least)
        self.possible &= ~weak
        cold = torque.winding_resistance(tables["R_25"], machine.ambient)[:, None] + tables["R_b"]
        self.least_share = np.ones(len(self.settings))
        if self.axis.reduce_at_rest:
            self.least_share = np.array([d.hold_shares[0] for d in self.offers.drivers])
        floor = cold * (np.nan_to_num(setting) * self.least_share) ** 2
        for point in self.axis.points:
            at = self._shaft_torque(point)
            work = (point.speed * at)[:, None]
            floor = np.maximum(floor, cold * ((at / tables["K"]) ** 2)[:, None] + work)
        self.power_floor = floor + tables["idle"]
        self.energy = self._energy()
        self.reaches = self._reaches(cold)

    def _modelled(self, usable: Array) -> Array:
        """Ideal torque that a usable torque asks for at the least."""
        detent = np.where(usable > 0, self.offers.tables["detent"], 0.0)
        return (usable + detent) / torque.MODEL_FACTOR

    def _inertia(self) -> Array:
        return self.offers.tables["J"] + (self.axis.load_inertia or 0.0)

    def _shaft_torque(self, point: Point) -> Array:
        return point.torque + self._inertia() * point.acceleration

    def _energy(self) -> Array:
        """Energy an emergency stop from top speed returns, for each pair. [J]"""
        t = self.offers.tables
        inertia = self._inertia()[:, None]
        top, slow = self.axis.top_speed, self.axis.stop_deceleration
        if slow is None:
            return np.repeat(braking.kinetic_energy(inertia, top), len(t["R_b"]), axis=1)
        coldest = min(25.0, self.offers.problem.machine.ambient)
        cold = torque.winding_resistance(t["R_25"], coldest)[:, None] + t["R_b"]
        brake = inertia * slow + self.axis.driving_torque
        return braking.returned_energy(top, brake, slow, cold, t["K"][:, None])

    def _reaches(self, cold: Array) -> Array:
        """Pairs that could reach every point at a rail (winding × driver × rail).

        Necessary only. The ideal torque T asks for i_q = T/K, with T raised by the damping factor
        at the least voltage share such a current has. The bus then must feed ω·T + R·i_q² with
        V·I, and the voltage along the flux, X·i_q - R·i_d, must not pass V; R hot, I the largest.
        """
        t, machine = self.offers.tables, self.offers.problem.machine
        most = np.minimum(
            np.nanmax(self.settings, axis=1, initial=0.0), 2**0.5 * t["I_r"][:, None]
        )[:, :, None] * (1 + GUARD)
        hot = torque.winding_resistance(t["R_25"], t["heat_limit"])[:, None] + t["R_b"]
        K, L, N, V = t["K"][:, None, None], t["L"][:, None, None], t["N"][:, None, None], t["V"]
        ratio = t["damping"] if self.axis.damping_ratio is None else self.axis.damping_ratio
        ratio = np.broadcast_to(ratio, len(t["R_b"]))[None, :, None]
        reaches = np.ones((*cold.shape, len(V)), dtype=bool)
        R = cold[:, :, None]
        for point in self.axis.points:
            usable = np.abs(self._shaft_torque(point)) * (1.0 + machine.margins.torque)
            least = self._modelled(usable)[:, None, None] / K
            share = torque.voltage_share(point.speed, V, least, R, L, K, N)
            damping = torque.damping_factor(share, ratio)
            wanted = np.broadcast_to(usable[:, None, None], damping.shape)
            with np.errstate(divide="ignore"):
                damped = np.divide(wanted, damping, out=np.zeros(damping.shape), where=wanted > 0)
            detent = np.where(usable > 0, t["detent"], 0.0)[:, None, None]
            i_q = (damped + detent) / torque.MODEL_FACTOR / K * (1 - GUARD)
            X = N * point.speed * L
            reaches &= K * point.speed * i_q + R * i_q**2 <= V * most
            reaches &= X * i_q <= V + hot[:, :, None] * most
            reaches &= i_q <= most
        return reaches

    def _note_weak(self, weak: Array, least: Array) -> None:
        w, d = np.nonzero(weak)
        bearable = 2**0.5 * self.offers.tables["I_r"][w] * (1 + GUARD)
        offered = self.settings[d]
        top = np.nan_to_num(np.where(offered <= bearable[:, None], offered, 0.0)).max(axis=1)
        ratio = least[w] / np.maximum(top, 1e-12)
        k = int(np.argmin(ratio))
        label = f"{self.offers.windings[w[k]].label} with {self.offers.drivers[d[k]].part}"
        self._miss(
            "current setting", len(w), label, float(least[w[k]]), float(top[k]), float(ratio[k])
        )

    def _setting(self, winding: Array, driver: Array, rank: Array) -> Array:
        """Setting of that rank, NaN where the driver has none or the motor may not take it."""
        longest = self.settings.shape[1]
        setting = self.settings[driver, np.minimum(rank, longest - 1)]
        most = 2**0.5 * self.offers.tables["I_r"][winding] * (1 + GUARD)
        return np.where((rank < longest) & (setting <= most), setting, np.nan)

    def _miss(
        self,
        rule: str,
        count: int,
        label: str,
        needs: float | None,
        best: float | None,
        ratio: float,
    ) -> None:
        miss = self.misses[rule]
        miss.count += count
        if ratio < miss.ratio:
            miss.ratio, miss.needs, miss.best, miss.label = ratio, needs, best, label

    def rejections(self) -> list[Rejection]:
        """The funnel: how many options each rule turned away first."""
        margins = self.offers.problem.machine.margins
        rows = []
        for rule, miss in self.misses.items():
            if miss.count:
                needs, best = (
                    None if v is None else Quantity(value=float(v), unit=RULES[rule])
                    for v in (miss.needs, miss.best)
                )
                rows.append(
                    Rejection(
                        axis=self.axis.axis,
                        rule=rule,
                        count=miss.count,
                        needs=needs,
                        best=best,
                        margin=margins.torque if rule in ("torque", "holding") else 0.0,
                        nearest=miss.label,
                    )
                )
        return rows

    def judge(self, wanted: Array) -> None:
        """Judge the pairs at the rails marked in ``wanted`` (winding × driver × rail)."""
        fresh = wanted & ~self.judged & self.possible[:, :, None]
        self.judged |= wanted
        self._note_unreached(fresh & ~self.reaches)
        fresh &= self.reaches
        w, d, r = np.nonzero(fresh)
        self.power[w, d, r] = np.inf
        rows = self._within_voltage(Combos(w, d, r, self.first_rank[w, d]))
        found: list[Options] = []
        ahead = 1
        while len(rows):
            rounds = [
                self._round(rows.pick(slice(start, start + CHUNK)), ahead, found)
                for start in range(0, len(rows), CHUNK)
            ]
            rows = rows.pick(np.concatenate(rounds))
            rows.rank = rows.rank + ahead
            rows = rows.pick(~np.isnan(self._setting(rows.winding, rows.driver, rows.rank)))
            ahead = AHEAD
        if found:
            adequate = Options.joined(found)
            for rail in np.unique(adequate.rail).tolist():
                here = adequate.pick(adequate.rail == rail)
                np.minimum.at(self.power[:, :, rail], (here.winding, here.driver), here.peak)
                self.at_rail[rail] = Options.joined([self.at_rail[rail], here])

    def _note_unreached(self, failed: Array) -> None:
        miss = self.misses["speed"]
        miss.count += int(failed.sum())
        if failed.any() and not miss.label:
            w, d, r = np.argwhere(failed)[-1]
            volts = self.offers.rails[r].voltage
            pair = f"{self.offers.windings[w].label} with {self.offers.drivers[d].part}"
            miss.label = f"{pair} at {volts:g} V, for one"

    def _round(self, rows: Combos, ahead: int, found: list[Options]) -> Array:
        """Judge rows at their next settings, some at once; which of them go on after those."""
        row = np.repeat(np.arange(len(rows)), ahead)
        tried = rows.pick(row)
        tried.rank = tried.rank + np.tile(np.arange(ahead), len(rows))
        exists = ~np.isnan(self._setting(tried.winding, tried.driver, tried.rank))
        row, tried = row[exists], tried.pick(exists)
        self.tried += len(tried)
        judged = _Judged(self, tried)
        adequate, hopeless, options = judged.outcome()
        going = np.ones(len(rows), dtype=bool)
        going[row[hopeless]] = False
        least = self.least_share[options.driver]
        over = row[adequate][judged.full_flow()[adequate] & (options.rest_share <= least)]
        going[over] = False
        found.append(options)
        return going

    def _within_voltage(self, rows: Combos) -> Combos:
        tables = self.offers.tables
        low, high = tables["V_low"][rows.rail], tables["V_high"][rows.rail]
        least, limit = tables["V_min"][rows.driver], tables["V_limit"][rows.driver]
        fits = (low >= least - GUARD) & (high <= limit + GUARD)
        bad = np.flatnonzero(~fits)
        if len(bad):
            ratio = np.maximum(high[bad] / limit[bad], least[bad] / low[bad])
            k = bad[int(np.argmin(ratio))]
            over = high[k] > limit[k]
            needs, best = (high[k], limit[k]) if over else (least[k], low[k])
            self._note("driver voltage", rows, len(bad), int(k), needs, best, ratio.min())
        return rows.pick(fits)

    def _note(
        self, rule: str, rows: Combos, count: int, k: int, needs: Any, best: Any, ratio: Any
    ) -> None:
        if ratio >= self.misses[rule].ratio:
            self.misses[rule].count += count
            return
        winding = self.offers.windings[rows.winding[k]]
        driver = self.offers.drivers[rows.driver[k]]
        volts = self.offers.rails[rows.rail[k]].voltage
        label = f"{winding.label} with {driver.part} at {volts:g} V"
        self._miss(rule, count, label, float(needs), float(best), float(ratio))


def finest_microsteps(
    speed: float, teeth: float, offered: tuple[int, ...], *limits: float | None
) -> tuple[int, float]:
    """Finest of the offered microsteps, 8 at least, that every stated step rate allows.

    Returns that count (0 if none fits) and the step rate of the coarsest considered. [-], [Hz]
    """
    full_steps = torque.step_rate(speed, teeth, 1)
    most = min([limit for limit in limits if limit is not None], default=np.inf)
    fine = sorted(n for n in offered if n >= 8)
    fitting = [n for n in fine if full_steps * n <= most * (1 + GUARD)]
    return (fitting[-1] if fitting else 0), full_steps * (fine[0] if fine else 8)


def required_torque(axis: Axis, point: Point, rotor_inertia: Array) -> Array:
    """Torque at the shaft a point asks for, the rotor's own inertia included. [N·m]"""
    inertia = rotor_inertia + (axis.load_inertia or 0.0)
    return np.abs(point.torque + inertia * point.acceleration)


class _Judged:
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
            self.table._note(rule, self.rows, len(where), k, needs[k], best[k], ratio[k])
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
