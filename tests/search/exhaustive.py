"""The referee: every design of a small problem, one after another.

Written apart from the search. Parts and settings are judged at every voltage and supply tolerance
by the functions of ``physics`` directly; then plain loops go over supplies, voltages, counts and
the product of the axes' options. What is left out in the loops is only what the sums so far have
put beyond the best design or beyond a limit. Integers are rounded as the search says it does:
needed up, allowed down.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from decimal import Decimal
from typing import Any

import numpy as np

from selector.domain.machine import Axis, Machine, Point, Problem, Worth
from selector.domain.parts import AS_WOUND, Driver, Motor, Part, Supply
from selector.physics import braking, power, thermal, torque
from selector.physics.supply import derated_share, supply_power

CENTIWATT, TENTH_MILLIJOULE, MICROFARAD, CUBIC_MM, MILLIGRAM = 100, 10_000, 10**6, 10**9, 10**6
Rail = tuple[float, float]  # voltage, tolerance of the supply


def up(value: float, scale: int) -> int:
    return math.ceil(value * scale - 1e-6)


def down(value: float, scale: int) -> int:
    return math.floor(value * scale + 1e-6)


# -- parts and goals --------------------------------------------------------------------------


def may_be_chosen(part: Part, machine: Machine) -> bool:
    """Whether a part can be ordered for this machine and every goal and limit knows its figure."""
    goals, limits = machine.minimise, machine.limits
    if isinstance(goals, Worth):
        counted = {"cost"} | {name for name in ("volume", "mass") if getattr(goals, name) != 0}
    else:
        counted = set(goals)
    if part.price_table or part.pack != 1 or getattr(part, "channels", 1) != 1:
        return False
    if part.price is None:
        if "cost" in counted or limits.price is not None:
            return False
    elif part.price.currency not in (None, machine.currency):
        return False
    if part.outer_volume is None and ("volume" in counted or limits.volume is not None):
        return False
    if part.mass is None and ("mass" in counted or limits.mass is not None):
        return False
    if limits.lead_time is not None and (
        part.lead_time is not None and part.lead_time > limits.lead_time
    ):
        return False
    return part.stock is None or part.stock >= machine.quantity


def amounts(part: Part) -> tuple[int, int, int]:
    """Price in 1/10 000, volume in mm³, mass in mg."""
    price = part.price.amount if part.price is not None else Decimal(0)
    return (
        int(price * 10_000), up(part.outer_volume or 0.0, CUBIC_MM), up(part.mass or 0.0, MILLIGRAM)
    )  # fmt: skip


def goal_values(part: Part, machine: Machine) -> tuple[int, ...]:
    goals = machine.minimise
    if isinstance(goals, Worth):
        beside = goals.volume * (part.outer_volume or 0.0) + goals.mass * (part.mass or 0.0)
        return (amounts(part)[0] * 100 + up(beside, 10**6),)
    figure = dict(zip(("cost", "volume", "mass"), amounts(part), strict=True))
    return tuple(figure[goal] for goal in goals)


def added(*rows: tuple[int, ...]) -> tuple[int, ...]:
    return tuple(map(sum, zip(*rows, strict=True)))


# -- voltages and supplies ----------------------------------------------------------------------


def voltages(supply: Supply) -> list[float]:
    """Nominal, ends of the trim, whole volts between."""
    if supply.trim is None:
        return [supply.voltage]
    low, high = supply.trim.min, supply.trim.max
    between = [float(v) for v in range(1000) if low - 1e-9 <= v <= high + 1e-9]
    return sorted({round(v, 6) for v in (low, high, supply.voltage, *between)})


def voltage_allowed(machine: Machine, supply: Supply, voltage: float) -> bool:
    limits = machine.limits.voltage
    low, high = voltage * (1.0 - supply.spread), voltage * (1.0 + supply.spread)
    if limits.min is not None and voltage < limits.min * (1 - 1e-9):
        return False
    if limits.max is not None and voltage > limits.max * (1 + 1e-9):
        return False
    if supply.overvoltage_trip is not None and high > supply.overvoltage_trip * (1 + 1e-9):
        return False
    return all(
        load.supply_voltage.min <= low * (1 + 1e-9) and high <= load.supply_voltage.max * (1 + 1e-9)
        for load in machine.loads
    )


# -- one axis -----------------------------------------------------------------------------------


@dataclass
class Option:
    """Parts and a setting that do for an axis at a voltage, with what the bus sees of them."""

    motor: Motor
    joining: str
    driver: Driver
    setting: float
    rest_share: float
    microsteps: int
    peak: float
    mean: float
    energy: float
    temperature: float
    goals: tuple[int, ...] = ()
    amounts: tuple[int, int, int] = (0, 0, 0)
    steps: tuple[int, int, int] = (0, 0, 0)  # peak and mean in 0.01 W, energy in 0.1 mJ

    @property
    def name(self) -> tuple[str, str, str, float]:
        return self.motor.part, self.joining, self.driver.part, self.setting


@dataclass
class _Row:
    """One candidate with its plain figures, before the arrays."""

    motor: Motor
    joining: str
    driver: Driver
    setting: float
    rail: Rail
    figures: torque.Joined
    K: float
    rest_share: float
    microsteps: int


def _microsteps(axis: Axis, machine: Machine, motor: Motor, driver: Driver) -> int | None:
    best = None
    for count in sorted(driver.microsteps):
        rate = axis.top_speed / (2 * math.pi) * (360.0 / motor.step_angle) * count
        stated = [r for r in (driver.max_step_rate, machine.limits.step_rate) if r is not None]
        if count >= 8 and all(rate <= r * (1 + 1e-9) for r in stated):
            best = count
    return best


def _rows(problem: Problem, axis: Axis, rails: list[Rail]) -> list[_Row]:
    """Candidates that pass every rule needing no arrays."""
    machine, rows = problem.machine, []
    margin = 1.0 + machine.margins.torque
    holding = (axis.holding_torque or 0.0) * margin
    for motor in problem.catalogue.motors:
        if not may_be_chosen(motor, machine):
            continue
        if axis.frames and all(abs(motor.frame - f) >= 1e-6 for f in axis.frames):
            continue
        if motor.rotor_inertia is None and any(p.acceleration for p in axis.points):
            continue
        for joining in motor.joinings or (AS_WOUND,):
            rated = (motor.holding_torque, motor.rated_current, motor.phase_resistance,
                     motor.phase_inductance)  # fmt: skip
            figures = torque.Joined(*rated)
            if joining != AS_WOUND:
                figures = torque.joined(joining, motor.rated_as or "", *rated)
            K = figures.holding_torque / (math.sqrt(2) * figures.rated_current)
            for driver in problem.catalogue.drivers:
                if not may_be_chosen(driver, machine):
                    continue
                microsteps = _microsteps(axis, machine, motor, driver)
                if microsteps is None:
                    continue
                share = derated_share(machine.ambient,
                                      [(s.at, s.share) for s in driver.derating],
                                      driver.max_ambient)  # fmt: skip
                for setting in driver.peak_settings:
                    if setting > driver.peak_settings[-1] * share * (1 + 1e-9):
                        continue
                    if setting > math.sqrt(2) * figures.rated_current * (1 + 1e-9):
                        continue
                    rest = 1.0
                    if axis.reduce_at_rest:
                        rest = min([s for s in driver.hold_shares
                                    if 0.9 * K * s * setting >= holding], default=1.0)  # fmt: skip
                    if 0.9 * K * rest * setting < holding:
                        continue
                    inertia = (motor.rotor_inertia or 0.0) + (axis.load_inertia or 0.0)
                    stop = inertia * (axis.stop_deceleration or 0.0)
                    if axis.stop_deceleration and 0.9 * K * setting < stop + axis.driving_torque:
                        continue
                    most = figures.rated_current * (math.sqrt(2) if axis.above_rated_at_rest else 1)
                    if rest * setting > most * (1 + 1e-9):
                        continue
                    for rail in rails:
                        low, high = rail[0] * (1 - rail[1]), rail[0] * (1 + rail[1])
                        limit = machine.margins.voltage_use * driver.supply_voltage.max
                        if low >= driver.supply_voltage.min - 1e-9 and high <= limit + 1e-9:
                            rows.append(_Row(motor, joining, driver, setting, rail, figures, K,
                                             rest, microsteps))  # fmt: skip
    return rows


class _Arrays:
    """The candidates side by side; every formula once for all of them."""

    def __init__(self, machine: Machine, axis: Axis, rows: list[_Row]) -> None:
        def column(figure: Any) -> Any:
            return np.array([figure(row) for row in rows], dtype=float)

        self.machine, self.axis = machine, axis
        self.T_h, self.I_r = column(lambda r: r.figures.holding_torque), column(
            lambda r: r.figures.rated_current)  # fmt: skip
        self.R25, self.L = column(lambda r: r.figures.resistance), column(
            lambda r: r.figures.inductance)  # fmt: skip
        self.K, self.N = column(lambda r: r.K), column(lambda r: round(90 / r.motor.step_angle))
        self.V, self.spread = column(lambda r: r.rail[0]), column(lambda r: r.rail[1])
        self.I, self.rest = column(lambda r: r.setting), column(lambda r: r.rest_share)
        self.bridge = column(lambda r: r.driver.bridge_resistance)
        self.idle = column(lambda r: r.driver.idle)
        self.regulator = column(lambda r: r.driver.regulator_time)
        self.microsteps = column(lambda r: r.microsteps)
        self.detent = column(
            lambda r: 0.04 * r.figures.holding_torque if r.motor.detent_torque is None
            else r.motor.detent_torque
        )  # fmt: skip
        self.damping = column(
            lambda r: r.driver.damping if axis.damping_ratio is None else axis.damping_ratio
        )
        self.inertia = column(lambda r: (r.motor.rotor_inertia or 0.0) + (axis.load_inertia or 0.0))
        self.rise = column(lambda r: 80.0 if r.motor.rated_rise is None else r.motor.rated_rise)
        self.hottest = column(self._hottest)
        self.temperature = self._temperature()
        self.warm = self.R25 * (1 + 0.00393 * (self.temperature - 25.0))

    def _hottest(self, row: _Row) -> float:
        grade = thermal.INSULATION_LIMITS[row.motor.insulation_class or "B"]
        grade -= self.machine.margins.winding
        if row.motor.case_limit is None:
            return grade
        ambient = self.machine.ambient
        return min(grade, ambient + (row.motor.case_limit - ambient) / thermal.CASE_SHARE)

    def shaft(self, point: Point) -> Any:
        return point.torque + self.inertia * point.acceleration

    def _temperature(self) -> Any:
        if self.axis.has_duty:
            scene: list[tuple[float, Point | None]] = [(p.share or 0, p) for p in self.axis.points]
            return self._settled([*scene, (self.axis.rest_share, None)])
        return np.max([self._settled([(1.0, p)]) for p in (*self.axis.points, None)], axis=0)

    def _settled(self, scene: list[tuple[float, Point | None]]) -> Any:
        to_air = self.axis.mounting_factor * thermal.thermal_resistance(
            self.rise, self.I_r, self.R25
        )
        now = np.full(len(self.I), self.machine.ambient)
        for step in range(200):
            R = self.R25 * (1 + 0.00393 * (now - 25.0)) + self.bridge
            copper, iron = 0.0 * now, 0.0 * now
            for share, point in scene:
                if point is None:
                    copper = copper + share * self.R25 * (self.rest * self.I) ** 2
                    continue
                i = power.phase_currents(point.speed, self.shaft(point), self.V, self.I, R, self.L,
                                         self.K, self.N)  # fmt: skip
                copper = copper + share * self.R25 * (i.i_d**2 + i.i_q**2)
                iron = iron + share * power.iron_loss(
                    point.speed, i.i_d, i.i_q, self.T_h, self.L, self.K, self.N, 0.005
                )
            before = now
            now = thermal.steady_temperature(self.machine.ambient, to_air, copper, iron)
            apart = np.abs(now - before) >= 1e-9
            if not apart.any():
                break
            if step >= 12:
                now = np.where(apart, (now + before) / 2, now)
        return now

    def speeds(self, point: Point) -> Any:
        """Speeds a point is judged at, one row each; the point's own last."""
        R = self.warm + self.bridge
        corner = torque.corner_speed(self.V, 0.0, self.I, R, self.L, self.K, self.N)
        return np.stack(torque.judged_speeds(point.speed, point.from_rest, corner))

    def strong(self) -> Any:
        given = self.machine.tolerances
        widths = torque.Tolerances(given.resistance, given.inductance, given.torque, self.spread)
        at_rest = np.minimum(
            self.rest * self.I, self.V * (1 - self.spread) / (self.warm + self.bridge)
        )
        asked = (self.axis.holding_torque or 0.0) * (1.0 + self.machine.margins.torque)
        enough = 0.9 * self.K * at_rest >= asked * (1 - 1e-9)
        for point in self.axis.points:
            chain = torque.torque_chain(
                self.speeds(point), self.V, self.I, self.warm, self.bridge, self.L, self.K, self.N,
                self.regulator, self.detent, self.damping, self.microsteps, widths, given.combine,
            )  # fmt: skip
            need = np.abs(self.shaft(point)) * (1.0 + self.machine.margins.torque)
            enough &= (chain.usable >= need * (1 - 1e-9)).all(axis=0)
            if point.speed > 0:
                enough &= (chain.usable > 0).all(axis=0)
        return enough

    def powers(self) -> tuple[Any, Any]:
        """Peak and mean power."""
        R = self.warm + self.bridge
        resting = power.holding_power(self.V, self.rest * self.I, R, self.idle)
        peak, mean = resting, self.axis.rest_share * resting
        for point in self.axis.points:
            motor = (
                self.shaft(point), self.V, self.I, R, self.L, self.K, self.N, self.T_h, self.idle,
            )  # fmt: skip
            most = power.peak_bus_power(point.speed, point.from_rest, *motor)
            own = power.bus_power(point.speed, *motor)
            peak = np.maximum(peak, most)
            mean = mean + (point.share or 0.0) * np.maximum(own, 0.0)
        return peak, mean if self.axis.has_duty else peak

    def energy(self) -> Any:
        top, slow = self.axis.top_speed, self.axis.stop_deceleration
        if slow is None:
            return 0.5 * self.inertia * top**2
        brake = self.inertia * slow + self.axis.driving_torque
        coldest = min(25.0, self.machine.ambient)
        cold = self.R25 * (1 + 0.00393 * (coldest - 25.0)) + self.bridge
        return braking.returned_energy(top, brake, slow, cold, self.K)


def adequate(problem: Problem, axis: Axis, rails: list[Rail]) -> dict[Rail, list[Option]]:
    """Everything that does for an axis, at each voltage and tolerance."""
    machine = problem.machine
    found: dict[Rail, list[Option]] = {rail: [] for rail in rails}
    rows = _rows(problem, axis, rails)
    if not rows:
        return found
    a = _Arrays(machine, axis, rows)
    cool = a.temperature <= a.hottest
    rows = [row for row, keep in zip(rows, cool, strict=True) if keep]
    if not rows:
        return found
    a = _Arrays(machine, axis, rows)
    (peak, mean), energy = a.powers(), a.energy()
    for k in np.flatnonzero(a.strong()):
        row = rows[k]
        option = Option(
            row.motor, row.joining, row.driver, row.setting, row.rest_share, row.microsteps,
            float(peak[k]), float(mean[k]), float(energy[k]), float(a.temperature[k]),
        )  # fmt: skip
        pair = (row.motor, row.driver)
        option.goals = added(*(goal_values(part, machine) for part in pair))
        option.amounts = added(*(amounts(part) for part in pair))  # type: ignore[assignment]
        option.steps = (up(option.peak, CENTIWATT), up(option.mean, CENTIWATT),
                        up(option.energy, TENTH_MILLIJOULE))  # fmt: skip
        found[row.rail].append(option)
    return found


# -- the whole machine --------------------------------------------------------------------------


@dataclass
class Best:
    """The first design in order, with what each axis has by itself."""

    key: tuple[Any, ...] | None = None
    values: tuple[int, ...] = ()
    options: tuple[Option, ...] = ()
    voltage: float = 0.0
    supply: str = ""
    count: int = 0
    by_axis: list[dict[Rail, list[Option]]] = field(default_factory=list)


@dataclass
class _Feed:
    """One supply at one voltage, so many in parallel."""

    supply: Supply
    voltage: float
    count: int
    machine: Machine
    goals: tuple[int, ...] = ()
    amounts: tuple[int, ...] = ()

    def __post_init__(self) -> None:
        unit, machine = self.supply, self.machine
        self.goals = tuple(self.count * v for v in goal_values(unit, machine))
        self.amounts = tuple(self.count * v for v in amounts(unit))
        share = derated_share(
            machine.ambient, [(s.at, s.share) for s in unit.derating], unit.max_ambient
        )
        rated = unit.rated_power if unit.rated_power is not None else (
            (unit.rated_current or 0.0) * unit.voltage)  # fmt: skip
        current = unit.rated_current if unit.rated_current is not None else rated / unit.voltage
        gives = float(supply_power(self.voltage, rated, current, share, self.count))
        fixed = up(sum(load.power for load in machine.loads), CENTIWATT)
        self.room = down(gives / (1.0 + machine.margins.supply), CENTIWATT) - fixed
        self.trimmed = int(self.voltage != unit.voltage)

    def takes_up(self, options: list[Option]) -> bool:
        """Whether an emergency stop of all axes keeps the bus low enough."""
        if self.supply.absorbs_energy:
            return True
        use = self.machine.margins.voltage_use
        allowed = min(use * o.driver.supply_voltage.max for o in options)
        if self.supply.overvoltage_trip is not None:
            allowed = min(allowed, self.supply.overvoltage_trip)
        highest = self.voltage * (1.0 + self.supply.spread)
        per_farad = max(0.0, 0.5 * 0.8 * (allowed**2 - highest**2))
        held = self.machine.bus_capacitance + self.count * (self.supply.output_capacitance or 0.0)
        own = sum(
            down(per_farad * (o.driver.bus_capacitance or 0.0), TENTH_MILLIJOULE) for o in options
        )
        returned = sum(o.steps[2] for o in options)
        return returned <= own + down(per_farad * held, TENTH_MILLIJOULE)

    def starts(self, options: list[Option]) -> bool:
        one = self.supply.largest_startup_capacitance
        if one is None:
            return True
        held = sum(up(o.driver.bus_capacitance or 0.0, MICROFARAD) for o in options)
        return held + up(self.machine.bus_capacitance, MICROFARAD) <= down(
            self.count * one, MICROFARAD)  # fmt: skip


def _within_limits(machine: Machine, totals: tuple[int, ...]) -> bool:
    limits = machine.limits
    price = None if limits.price is None else float(limits.price.amount)
    allowed = ((price, 10_000), (limits.volume, CUBIC_MM), (limits.mass, MILLIGRAM))
    return all(
        limit is None or total <= down(limit, scale)
        for total, (limit, scale) in zip(totals, allowed, strict=True)
    )


def _in_stock(machine: Machine, options: list[Option]) -> bool:
    for kind in ("motor", "driver"):
        parts = [getattr(option, kind) for option in options]
        for part in parts:
            used = sum(other.part == part.part for other in parts)
            if part.stock is not None and used * machine.quantity > part.stock:
                return False
    return True


def best_design(problem: Problem) -> Best:
    """The best of all designs by goals, trims, mean power, voltage, then names."""
    machine = problem.machine
    feeds = []
    for supply in problem.catalogue.supplies:
        if not may_be_chosen(supply, machine):
            continue
        for voltage in voltages(supply):
            if voltage_allowed(machine, supply, voltage):
                for count in range(1, supply.parallel + 1):
                    if supply.stock is None or count * machine.quantity <= supply.stock:
                        feeds.append(_Feed(supply, voltage, count, machine))
    rails = sorted({(feed.voltage, feed.supply.spread) for feed in feeds})
    best = Best(by_axis=[adequate(problem, axis, rails) for axis in machine.axes])
    for feed in feeds:
        rail = (feed.voltage, feed.supply.spread)
        lists = [sorted(by[rail], key=lambda o: (o.goals, o.steps[1])) for by in best.by_axis]
        if all(lists):
            _try(machine, feed, lists, best)
    return best


def _try(machine: Machine, feed: _Feed, lists: list[list[Option]], best: Best) -> None:
    """Every choice of one option per axis with this feed."""
    least = []  # of the axes from k on: each goal, mean and peak power
    for k in range(len(lists) + 1):
        rest = [
            (*(min(o.goals[g] for o in axis) for g in range(len(feed.goals))),
             min(o.steps[1] for o in axis), min(o.steps[0] for o in axis))
            for axis in lists[k:]
        ]  # fmt: skip
        least.append(added((0,) * (len(feed.goals) + 2), *rest))

    def descend(k: int, taken: list[Option], goals: tuple[int, ...], mean: int, peak: int) -> None:
        *more, more_mean, more_peak = least[k]
        if peak + more_peak > feed.room or mean + more_mean > feed.room:
            return
        floor = (*added(goals, tuple(more)), feed.trimmed, mean + more_mean)
        if best.key is not None and floor > best.key[: len(floor)]:
            return
        if k == len(lists):
            finish(taken, goals, mean)
            return
        for option in lists[k]:
            descend(k + 1, [*taken, option], added(goals, option.goals), mean + option.steps[1],
                    peak + option.steps[0])  # fmt: skip

    def finish(taken: list[Option], goals: tuple[int, ...], mean: int) -> None:
        totals = added(feed.amounts, *(o.amounts for o in taken))
        if not (
            _in_stock(machine, taken) and _within_limits(machine, totals)
            and feed.starts(taken) and feed.takes_up(taken)
        ):  # fmt: skip
            return
        key = (*goals, feed.trimmed, mean, feed.voltage, tuple(o.name for o in taken),
               feed.supply.part, feed.count)  # fmt: skip
        if best.key is None or key < best.key:
            best.key, best.values, best.options = key, goals, tuple(taken)
            best.voltage, best.supply, best.count = feed.voltage, feed.supply.part, feed.count

    descend(0, [], feed.goals, 0, 0)
