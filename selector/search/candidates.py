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
from ..physics import braking, supply, torque
from .offers import Offers
from .options import GUARD, Combos, Judged, Options

Array = Any
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
        if np.isnan(offered[k]).all():
            label += f", derated to nothing at {self.offers.problem.machine.ambient:g} degC"
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
        judged = Judged(self, tried)
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
            self.note("driver voltage", rows, len(bad), int(k), needs, best, ratio.min())
        return rows.pick(fits)

    def note(
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
