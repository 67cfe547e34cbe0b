"""What may be chosen: parts that can be ordered, bus voltages on offer, and goals as integers.

Integers round against us: what is needed goes up, what is allowed goes down, so that no design
the solver accepts breaks a rule when it is recomputed in floats.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from decimal import ROUND_CEILING, Decimal
from typing import Any

import numpy as np

from ..domain.machine import Machine, Problem, Worth
from ..domain.parts import AS_WOUND, DETENT_SHARE, RATED_RISE, Driver, Motor, Part, Supply
from ..domain.results import Exclusion
from ..physics.supply import derated_share, supply_power
from ..physics.thermal import CASE_SHARE, INSULATION_LIMITS
from ..physics.torque import Joined, joined, torque_constant

MONEY_SCALE = 10_000  # parts of a currency unit
WORTH_SCALE = 1_000_000  # parts of a currency unit, where volume or mass has a worth
VOLUME_SCALE = 10**9  # mm³
MASS_SCALE = 10**6  # mg
POWER_SCALE = 100  # 0.01 W
ENERGY_SCALE = 10_000  # 0.1 mJ
CAPACITANCE_SCALE = 10**6  # µF
CLOSE = 1e-9  # relative: what the judge takes as float dust
_DUST = 1e-6  # of an integer step: float dust that must not cost a whole step

Array = Any


def up(value: Array, scale: int, dust: float = _DUST) -> Array:
    """Integer at or above a figure, in steps of 1/scale."""
    return np.ceil(np.asarray(value) * scale - dust).astype(np.int64)


def down(value: Array, scale: int) -> Array:
    """Integer at or below a figure, in steps of 1/scale."""
    return np.floor(np.asarray(value) * scale + _DUST).astype(np.int64)


@dataclass(frozen=True)
class Goal:
    """One goal as an integer of each part; ``scale`` steps make one of ``unit``."""

    name: str
    unit: str
    scale: int
    of: Callable[[Part], int]


def cost_steps(part: Part) -> int:
    """Unit price in 1/10 000 of the currency; 0 where no price is stated."""
    amount = part.price.amount if part.price else Decimal(0)
    return int((amount * MONEY_SCALE).to_integral_value(ROUND_CEILING))


def volume_steps(part: Part) -> int:
    """Outer volume in mm³, rounded up; 0 where unknown."""
    return int(up(part.outer_volume or 0.0, VOLUME_SCALE))


def mass_steps(part: Part) -> int:
    """Mass in mg, rounded up; 0 where unknown."""
    return int(up(part.mass or 0.0, MASS_SCALE))


AMOUNTS: list[Callable[[Part], int]] = [cost_steps, volume_steps, mass_steps]


def goals_of(machine: Machine) -> list[Goal]:
    """The machine's goals in order of weight."""
    plain = {
        "cost": Goal("cost", machine.currency, MONEY_SCALE, cost_steps),
        "volume": Goal("volume", "m^3", VOLUME_SCALE, volume_steps),
        "mass": Goal("mass", "kg", MASS_SCALE, mass_steps),
    }
    if not isinstance(machine.minimise, Worth):
        return [plain[name] for name in machine.minimise]
    worth = machine.minimise

    def weighed(part: Part) -> int:
        extra = worth.volume * (part.outer_volume or 0.0) + worth.mass * (part.mass or 0.0)
        return cost_steps(part) * (WORTH_SCALE // MONEY_SCALE) + int(up(extra, WORTH_SCALE))

    return [Goal("cost with worths", machine.currency, WORTH_SCALE, weighed)]


@dataclass(frozen=True)
class Winding:
    """A motor with its windings joined one way."""

    motor: Motor
    joining: str
    figures: Joined

    @property
    def label(self) -> str:
        """How it is named to the user."""
        return self.motor.part + ("" if self.joining == AS_WOUND else f" ({self.joining})")


@dataclass(frozen=True)
class Rail:
    """A bus voltage on offer with the spread its supply leaves around it."""

    voltage: float
    spread: float

    @property
    def highest(self) -> float:
        """[V]"""
        return self.voltage * (1.0 + self.spread)

    @property
    def lowest(self) -> float:
        """[V]"""
        return self.voltage * (1.0 - self.spread)


@dataclass(frozen=True)
class Feed:
    """A supply unit, how many of it in parallel, and the rail it is set to."""

    rail: int
    supply: Supply
    count: int
    trimmed: bool
    power: float  # continuous, derated [W]


@dataclass(frozen=True)
class Offers:
    """Everything the choice may take, and what was left out and why."""

    problem: Problem
    goals: list[Goal]
    windings: list[Winding]
    drivers: list[Driver]
    rails: list[Rail]
    feeds: list[Feed]
    exclusions: list[Exclusion]
    tables: dict[str, Array] = field(default_factory=dict)


def offers_of(problem: Problem) -> Offers:
    """Sort a catalogue into what may be chosen and what may not."""
    machine, catalogue = problem.machine, problem.catalogue
    exclusions: list[Exclusion] = []

    def kept(entries: Iterable[Any]) -> list[Any]:
        left = []
        for entry in entries:
            reason = _why_not(entry, machine)
            if reason is None:
                left.append(entry)
            else:
                exclusions.append(Exclusion(part=entry.part, reason=reason))
        return left

    windings = [
        Winding(motor, way, _figures(motor, way))
        for motor in kept(catalogue.motors)
        for way in motor.ways
    ]
    drivers = kept(catalogue.drivers)
    rails, feeds = _feeds(machine, kept(catalogue.supplies))
    offers = Offers(problem, goals_of(machine), windings, drivers, rails, feeds, exclusions)
    tables = _winding_table(windings, machine), _driver_table(drivers, machine), _rail_table(rails)
    for table in (*tables, _goal_table(offers)):
        offers.tables.update(table)
    return offers


def _why_not(part: Part, machine: Machine) -> str | None:
    goals = machine.minimise
    wanted = {"cost", "volume", "mass"} if isinstance(goals, Worth) else set(goals)
    limits = machine.limits
    if isinstance(goals, Worth):
        wanted -= {name for name in ("volume", "mass") if not getattr(goals, name)}
    if part.price_table:
        return "has a price by quantity, which this version does not choose from"
    if part.pack > 1:
        return f"is sold in packs of {part.pack}, which this version does not choose from"
    if isinstance(part, Driver) and part.channels > 1:
        return f"drives {part.channels} motors, which this version does not choose from"
    if part.price is None and ("cost" in wanted or limits.price is not None):
        return "has no price"
    if part.price is not None and part.price.currency not in (None, machine.currency):
        return f"is priced in {part.price.currency}, the machine in {machine.currency}"
    if part.outer_volume is None and ("volume" in wanted or limits.volume is not None):
        return "states neither volume nor size"
    if part.mass is None and ("mass" in wanted or limits.mass is not None):
        return "states no mass"
    if limits.lead_time is not None and (part.lead_time or 0.0) > limits.lead_time:
        return f"takes {part.lead_time:g} days, more than the limit of {limits.lead_time:g}"
    if part.stock is not None and part.stock < machine.quantity:
        return f"too few in stock to build {machine.quantity}"
    return None


def _figures(motor: Motor, way: str) -> Joined:
    rated = (
        motor.holding_torque,
        motor.rated_current,
        motor.phase_resistance,
        motor.phase_inductance,
    )
    if way == AS_WOUND or motor.rated_as is None:
        return Joined(*rated)
    return joined(way, motor.rated_as, *rated)


def voltages_on_offer(supply: Supply) -> list[float]:
    """Nominal voltage, trim ends, and the whole volts between. [V]"""
    if supply.trim is None:
        return [supply.voltage]
    low, high = supply.trim.min, supply.trim.max
    whole = range(math.ceil(low - 1e-9), math.floor(high + 1e-9) + 1)
    return sorted({round(v, 6) for v in (low, supply.voltage, high, *map(float, whole))})


def _feeds(machine: Machine, supplies: list[Supply]) -> tuple[list[Rail], list[Feed]]:
    rails: dict[Rail, int] = {}
    feeds = []
    for supply in supplies:
        share = derated_share(
            machine.ambient, [(s.at, s.share) for s in supply.derating], supply.max_ambient
        )
        most = supply.parallel
        if supply.stock is not None:
            most = min(most, supply.stock // machine.quantity)
        for voltage in voltages_on_offer(supply):
            rail = Rail(voltage, supply.spread)
            trip = supply.overvoltage_trip
            if not _rail_allowed(machine, rail) or (
                trip is not None and rail.highest > trip * (1 + CLOSE)
            ):
                continue
            index = rails.setdefault(rail, len(rails))
            for count in range(1, most + 1):
                power = float(supply_power(voltage, supply.power, supply.current, share, count))
                feeds.append(Feed(index, supply, count, voltage != supply.voltage, power))
    return list(rails), feeds


def _rail_allowed(machine: Machine, rail: Rail) -> bool:
    low, high = machine.limits.voltage.min, machine.limits.voltage.max
    if (low is not None and rail.voltage < low * (1 - CLOSE)) or (
        high is not None and rail.voltage > high * (1 + CLOSE)
    ):
        return False
    return all(
        load.supply_voltage.min <= rail.lowest * (1 + CLOSE)
        and rail.highest <= load.supply_voltage.max * (1 + CLOSE)
        for load in machine.loads
    )


def _winding_table(windings: list[Winding], machine: Machine) -> dict[str, Array]:
    figures = np.array([w.figures for w in windings], dtype=float).reshape(-1, 4)
    torque, current, resistance, inductance = figures.T
    motors = [w.motor for w in windings]
    return {
        "T_h": torque,
        "I_r": current,
        "R_25": resistance,
        "L": inductance,
        "K": torque_constant(torque, current),
        "N": np.array([m.rotor_teeth for m in motors], dtype=float),
        "J": np.array([m.rotor_inertia or 0.0 for m in motors]),
        "detent": np.array(
            [
                DETENT_SHARE * w.figures.holding_torque
                if w.motor.detent_torque is None
                else w.motor.detent_torque
                for w in windings
            ]
        ),
        "rise": np.array([RATED_RISE if m.rated_rise is None else m.rated_rise for m in motors]),
        "heat_limit": np.array([_heat_limit(m, machine) for m in motors]),
    }


def _goal_table(offers: Offers) -> dict[str, Array]:
    """Goals of a machine's parts in steps, their place in order of name, and which are ample."""
    most = offers.problem.machine.quantity * len(offers.problem.machine.axes)
    motors = [w.motor for w in offers.windings]
    names = sorted({m.part for m in motors})
    by_name = sorted(range(len(motors)), key=lambda k: (motors[k].part, offers.windings[k].joining))
    drivers = sorted(range(len(offers.drivers)), key=lambda k: offers.drivers[k].part)

    def ample(parts: list[Any]) -> Array:
        return np.array([p.stock is None or p.stock >= most for p in parts], dtype=bool)

    def steps(parts: list[Any], counts: list[Callable[[Part], int]]) -> Array:
        table = [[count(p) for count in counts] for p in parts]
        return np.array(table, dtype=np.int64).reshape(len(parts), len(counts))

    goals = [goal.of for goal in offers.goals]
    return {
        "winding_goals": steps(motors, goals),
        "driver_goals": steps(offers.drivers, goals),
        "winding_amounts": steps(motors, AMOUNTS),
        "driver_amounts": steps(offers.drivers, AMOUNTS),
        "motor": np.array([names.index(m.part) for m in motors], dtype=np.int64),
        "winding_place": np.argsort(np.array(by_name, dtype=np.int64)),
        "driver_place": np.argsort(np.array(drivers, dtype=np.int64)),
        "ample_motor": ample([next(m for m in motors if m.part == n) for n in names]),
        "ample_driver": ample(offers.drivers),
    }


def _heat_limit(motor: Motor, machine: Machine) -> float:
    """Highest winding temperature allowed: by insulation class, and by the case if stated."""
    insulation = INSULATION_LIMITS[motor.insulation_class or "B"] - machine.margins.winding
    if motor.case_limit is None:
        return insulation
    by_case = machine.ambient + (motor.case_limit - machine.ambient) / CASE_SHARE
    return min(insulation, by_case)


def _rail_table(rails: list[Rail]) -> dict[str, Array]:
    return {
        "V": np.array([rail.voltage for rail in rails], dtype=float),
        "spread": np.array([rail.spread for rail in rails], dtype=float),
        "V_low": np.array([rail.lowest for rail in rails], dtype=float),
        "V_high": np.array([rail.highest for rail in rails], dtype=float),
    }


def _driver_table(drivers: list[Driver], machine: Machine) -> dict[str, Array]:
    def column(values: Iterable[float]) -> Array:
        return np.array(list(values), dtype=float)

    use = machine.margins.voltage_use
    return {
        "R_b": column(d.bridge_resistance for d in drivers),
        "idle": column(d.idle for d in drivers),
        "t_r": column(d.regulator_time for d in drivers),
        "V_min": column(d.supply_voltage.min for d in drivers),
        "V_limit": column(use * d.supply_voltage.max for d in drivers),
        "C": column(d.bus_capacitance or 0.0 for d in drivers),
        "damping": column(d.damping for d in drivers),
    }
