"""Catalogue entries: one class per kind of part, as the catalogue states them.

What an entry leaves out stays None; the properties that fill a gap say with what, and the
answer lists every figure so filled.
"""

from __future__ import annotations

import itertools
import math
import re
from decimal import Decimal
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BeforeValidator, Discriminator, Field, Tag, model_validator
from pydantic_core import PydanticCustomError

from .fields import (
    Angle,
    Capacitance,
    Count,
    CountFromZero,
    Current,
    Frequency,
    HoldingTorque,
    Inductance,
    LeadTime,
    Length,
    Mass,
    Money,
    Power,
    PowerFromZero,
    Price,
    Record,
    Resistance,
    ResistanceFromZero,
    Rise,
    RotorInertia,
    Share,
    Size,
    Temperature,
    Text,
    Time,
    TorqueAboveZero,
    TorqueFromZero,
    Voltage,
    Volume,
    YesNo,
    _money,
    fault,
    list_or_keys,
    listed,
)

# What stands in where an entry is silent, with the standing of each.
DETENT_SHARE = 0.04  # of the holding torque: guess
RATED_RISE = 80.0  # K: practice, class B at rated current
SWITCH_RESISTANCE = 0.1  # ohm, one switch: guess
IDLE_POWER = 1.5  # W: guess
SUPPLY_TOLERANCE = 0.02  # guess
DAMPING_PASSIVE, DAMPING_ACTIVE = 0.08, 0.15  # guess
REGULATOR_TIME, REGULATOR_TIME_FAST = 30e-6, 20e-6  # s: simulated kinds of regulator

AS_WOUND = "as wound"


class VoltageRange(Record):
    """Lowest and highest voltage of something."""

    min: Voltage
    max: Voltage

    @model_validator(mode="after")
    def _ordered(self) -> VoltageRange:
        if self.max < self.min:
            raise fault("contradiction", "max at or above min", "swap or correct them", ("max",))
        return self


class DeratingStep(Record):
    """Share of the rating left at an ambient temperature."""

    at: Temperature
    share: Share

    @model_validator(mode="after")
    def _at_most_all(self) -> DeratingStep:
        if self.share > 1:
            raise fault("contradiction", "a share of 100 % at most", at=("share",))
        return self


def _rising(steps: tuple[DeratingStep, ...]) -> tuple[DeratingStep, ...]:
    temperatures = [step.at for step in steps]
    if any(b <= a for a, b in itertools.pairwise(temperatures)):
        raise fault("contradiction", "derating temperatures that rise")
    return steps


Derating = Annotated[tuple[DeratingStep, ...], AfterValidator(_rising)]


class Part(Record):
    """What every catalogue entry may state. ``origin`` is its place in the files."""

    part: Text
    price: Price | None = None
    price_table: tuple[tuple[int, Decimal], ...] = ()
    stock: CountFromZero | None = None
    lead_time: LeadTime | None = None
    pack: Count = 1
    size: Size | None = None
    volume: Volume | None = None
    mass: Mass | None = None
    note: Text | None = None
    supplier: Text | None = None
    origin: str = Field(default="", exclude=True)

    @model_validator(mode="before")
    @classmethod
    def _price_by_quantity(cls, data: Any) -> Any:
        if not isinstance(data, dict) or not isinstance(data.get("price"), dict):
            return data
        steps: list[tuple[int, Money]] = []
        for quantity, price in data["price"].items():
            place = ("price", quantity)
            if not re.fullmatch("[1-9][0-9]{0,8}", str(quantity)):
                raise fault(
                    "no-count", "price steps such as 10: 21.50", "quantity on the left", place
                )
            try:
                steps.append((int(quantity), _money(price)))
            except PydanticCustomError as error:
                found = error.context or {}
                raise fault(found["name"], found["expected"], found["remedy"], place) from None
            if steps[-1][1].currency != steps[0][1].currency:
                raise fault("contradiction", "one currency in all price steps", at=place)
        if not steps:
            raise fault("empty", "price steps such as 10: 21.50", at=("price",))
        steps.sort()
        table = tuple((quantity, money.amount) for quantity, money in steps)
        return data | {"price_table": table, "price": steps[0][1]}

    @property
    def outer_volume(self) -> float | None:
        """Volume as stated, else of the box around it; None if neither is known. [m³]"""
        if self.volume is not None or self.size is None:
            return self.volume
        a, b, c = self.size
        return a * b * c


class Brake(Record):
    """A brake on the motor's rear shaft, closed without power."""

    torque: TorqueAboveZero


class Motor(Part):
    """A two-phase bipolar hybrid stepping motor."""

    frame: Length
    step_angle: Angle
    holding_torque: HoldingTorque
    rated_current: Current
    phase_resistance: Resistance
    phase_inductance: Inductance
    rotor_inertia: RotorInertia | None = None
    detent_torque: TorqueFromZero | None = None
    wires: Literal[4, 6, 8] = 4
    joinings: Annotated[tuple[Literal["series", "parallel"], ...], BeforeValidator(listed)] = ()
    rated_as: Literal["series", "parallel", "unipolar"] | None = None
    insulation_class: Literal["A", "E", "B", "F", "H"] | None = None
    rated_rise: Rise | None = None
    case_limit: Temperature | None = None
    shaft: Length | None = None
    brake: Brake | None = None

    @model_validator(mode="before")
    @classmethod
    def _wires(cls, data: Any) -> Any:
        if isinstance(data, dict) and data.get("wires") in ("4", "6", "8"):
            return data | {"wires": int(data["wires"])}
        return data

    @model_validator(mode="after")
    def _joinable(self) -> Motor:
        if self.wires == 4 and (self.joinings or self.rated_as):
            key = "joinings" if self.joinings else "rated_as"
            remedy = f"drop {key}, or state wires: 6 or 8"
            raise fault("contradiction", f"no {key} on a motor with 4 wires", remedy, (key,))
        if self.wires != 4 and self.rated_as is None:
            raise fault(
                "missing-key",
                "rated_as: series, parallel or unipolar",
                f"say what the rating of this {self.wires}-wire motor stands for",
            )
        if self.wires != 4 and not self.joinings:
            raise fault("missing-key", "joinings such as [series, parallel]", "add the key")
        if self.wires == 6 and (self.joinings != ("series",) or self.rated_as == "parallel"):
            key = "rated_as" if self.joinings == ("series",) else "joinings"
            expected = "series as the only joining of a motor with 6 wires"
            raise fault("contradiction", expected, at=(key,))
        if len(set(self.joinings)) != len(self.joinings):
            raise fault("contradiction", "each joining once", at=("joinings",))
        teeth = 90.0 / self.step_angle
        if abs(teeth - round(teeth)) > 1e-6 or teeth > 900.5:
            expected = "a step_angle of 0.1 deg or more that divides 90 deg, such as 1.8 deg"
            raise fault("contradiction", expected, at=("step_angle",))
        return self

    @property
    def rotor_teeth(self) -> int:
        """Teeth on the rotor: a full step is a quarter of a tooth. [-]"""
        return round(90.0 / self.step_angle)

    @property
    def ways(self) -> tuple[str, ...]:
        """Ways its windings may be joined."""
        return self.joinings or (AS_WOUND,)


class SettingRange(Record):
    """Current settings in even steps."""

    min: Current
    max: Current
    step: Current

    @model_validator(mode="after")
    def _ordered(self) -> SettingRange:
        if self.max < self.min:
            raise fault("contradiction", "max at or above min", "swap or correct them", ("max",))
        if (self.max - self.min) / self.step > 10_000:
            raise fault("absurd-size", "at most 10 000 settings", "check the step", ("step",))
        return self

    def settings(self) -> tuple[float, ...]:
        """Every setting, the largest included. [A]"""
        count = int((self.max - self.min) / self.step + 1e-9) + 1
        steps = [round(self.min + k * self.step, 9) for k in range(count)]
        return tuple(steps if steps[-1] > self.max * (1 - 1e-9) else [*steps, self.max])


class Driver(Part):
    """A chopper driver for one motor or several."""

    channels: Count = 1
    supply_voltage: VoltageRange
    current_settings: Annotated[
        Annotated[tuple[Current, ...], BeforeValidator(listed), Tag("list")]
        | Annotated[SettingRange, Tag("keys")],
        Discriminator(list_or_keys),
    ]
    current_basis: Literal["peak", "rms"]
    microsteps: Annotated[tuple[Count, ...], BeforeValidator(listed)]
    max_step_rate: Frequency | None = None
    switch_resistance: ResistanceFromZero | None = None
    idle_power: PowerFromZero | None = None
    hold_current: tuple[Share, ...] = ()
    active_damping: YesNo = False
    off_time: Time | None = None
    current_loop_bandwidth: Frequency | None = None
    bus_capacitance: Capacitance | None = None
    derating: Derating = ()
    max_ambient: Temperature | None = None

    @model_validator(mode="after")
    def _usable(self) -> Driver:
        if not self.microsteps:
            raise fault("empty", "at least one microstep value", at=("microsteps",))
        if not self.current_settings:
            raise fault("empty", "at least one current setting", at=("current_settings",))
        for number, share in enumerate(self.hold_current):
            if not 0 < share <= 1:
                expected, place = "a share above 0 %, up to 100 %", ("hold_current", number)
                raise fault("contradiction", expected, at=place)
        for number, steps in enumerate(self.microsteps):
            if steps & (steps - 1):
                place = ("microsteps", number)
                raise fault("contradiction", "a power of two such as 16", at=place)
        return self

    @property
    def peak_settings(self) -> tuple[float, ...]:
        """Peaks of the phase sine it can be set to, rising. [A]"""
        stated = self.current_settings
        settings = stated.settings() if isinstance(stated, SettingRange) else stated
        factor = 2.0**0.5 if self.current_basis == "rms" else 1.0
        return tuple(sorted({factor * setting for setting in settings}))

    @property
    def bridge_resistance(self) -> float:
        """Of the two switches in a winding's path. [ohm]"""
        one = self.switch_resistance
        return 2.0 * (SWITCH_RESISTANCE if one is None else one)

    @property
    def idle(self) -> float:
        """Loss without current. [W]"""
        return IDLE_POWER if self.idle_power is None else self.idle_power

    @property
    def hold_shares(self) -> tuple[float, ...]:
        """Shares of the set current it can fall to at rest, rising; 1 always among them."""
        return tuple(sorted({*self.hold_current, 1.0}))

    @property
    def regulator_time(self) -> float:
        """Dead time of the current regulator. [s]"""
        if self.off_time is not None:
            fast = self.off_time <= REGULATOR_TIME_FAST
            return REGULATOR_TIME_FAST if fast else max(REGULATOR_TIME, self.off_time)
        if self.current_loop_bandwidth is not None:
            return max(REGULATOR_TIME, 1.0 / (2.0 * math.pi * self.current_loop_bandwidth))
        return REGULATOR_TIME

    @property
    def damping(self) -> float:
        """Damping ratio it gives a motor. [-]"""
        return DAMPING_ACTIVE if self.active_damping else DAMPING_PASSIVE


class Supply(Part):
    """A DC supply unit."""

    voltage: Voltage
    trim: VoltageRange | None = None
    tolerance: Share | None = None
    rated_power: Power | None = None
    rated_current: Current | None = None
    peak_power: Power | None = None
    peak_time: Time | None = None
    efficiency: Share | None = None
    derating: Derating = ()
    max_ambient: Temperature | None = None
    mains: Text | None = None
    inrush: Current | None = None
    output_capacitance: Capacitance | None = None
    largest_startup_capacitance: Capacitance | None = None
    parallel: Count = 1
    overvoltage_trip: Voltage | None = None
    absorbs_energy: YesNo = False

    @model_validator(mode="after")
    def _consistent(self) -> Supply:
        if self.rated_power is None and self.rated_current is None:
            raise fault("missing-key", "rated_power or rated_current", "add one of them")
        if self.trim and not self.trim.min <= self.voltage <= self.trim.max:
            raise fault("contradiction", "a trim range that contains the voltage", at=("trim",))
        if self.efficiency is not None and not 0 < self.efficiency <= 1:
            expected = "an efficiency above 0 %, up to 100 %"
            raise fault("contradiction", expected, at=("efficiency",))
        if self.tolerance is not None and self.tolerance >= 0.5:
            raise fault("absurd-size", "a tolerance below 50 %", at=("tolerance",))
        if self.overvoltage_trip is not None and self.overvoltage_trip <= self.voltage:
            expected = "an overvoltage_trip above the voltage"
            raise fault("contradiction", expected, at=("overvoltage_trip",))
        if self.parallel > 16:
            raise fault("absurd-size", "at most 16 units in parallel", at=("parallel",))
        return self

    @property
    def power(self) -> float:
        """Rated power, from the rated current where only that is stated. [W]"""
        if self.rated_power is not None:
            return self.rated_power
        return (self.rated_current or 0.0) * self.voltage

    @property
    def current(self) -> float:
        """Rated current, from the rated power where only that is stated. [A]"""
        return self.rated_current if self.rated_current is not None else self.power / self.voltage

    @property
    def spread(self) -> float:
        """Half-width of its output voltage as a share. [-]"""
        return SUPPLY_TOLERANCE if self.tolerance is None else self.tolerance


class Catalogue(Record):
    """Every part on offer, by kind, in the order of the files."""

    motors: tuple[Motor, ...] = ()
    drivers: tuple[Driver, ...] = ()
    supplies: tuple[Supply, ...] = ()

    @property
    def parts(self) -> tuple[Part, ...]:
        """All of them."""
        return (*self.motors, *self.drivers, *self.supplies)

    def find(self, kind: str, part: str) -> Any:
        """The part of that kind and name, or None."""
        return next((entry for entry in getattr(self, kind) if entry.part == part), None)

    def to_frame(self, kind: str) -> Any:
        """A pandas frame of one kind (``motors``, ``drivers``, ``supplies``), SI figures."""
        import pandas as pd

        return pd.DataFrame([entry.model_dump() for entry in getattr(self, kind)])
