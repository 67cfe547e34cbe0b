"""What the user asks: axes with their demands, the surroundings, margins, limits and the goal."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Discriminator, Field, Tag, model_validator

from .. import units
from .fields import (
    CURRENCY,
    Acceleration,
    AccelerationAboveZero,
    Capacitance,
    Count,
    Currency,
    DampingRatio,
    Frequency,
    InertiaFromZero,
    LeadTime,
    Length,
    Mass,
    Power,
    Price,
    Record,
    RiseFromZero,
    Share,
    Speed,
    Temperature,
    Text,
    Torque,
    TorqueFromZero,
    Voltage,
    Volume,
    YesNo,
    fault,
    list_or_keys,
    listed,
)
from .parts import Catalogue, VoltageRange

GOALS = ("cost", "volume", "mass")


class Point(Record):
    """A speed and torque an axis must deliver at its motor's shaft."""

    point: Text | None = None
    speed: Speed
    torque: Torque
    acceleration: Acceleration = 0.0
    from_rest: YesNo = True
    share: Share | None = None


class Axis(Record):
    """One axis: its demand points, its load and what is allowed at rest."""

    axis: Text
    points: tuple[Point, ...]
    load_inertia: InertiaFromZero | None = None
    holding_torque: TorqueFromZero | None = None
    vertical: YesNo = False
    held_without_power: YesNo = False
    reduce_at_rest: YesNo = False
    above_rated_at_rest: YesNo = False
    stop_deceleration: AccelerationAboveZero | None = None
    frames: Annotated[tuple[Length, ...], BeforeValidator(listed)] = ()
    damping_ratio: DampingRatio | None = None
    mounting_factor: Share = 1.0

    @model_validator(mode="after")
    def _complete(self) -> Axis:
        if not self.points:
            raise fault("empty", "at least one point with speed and torque", at=("points",))
        if any(p.acceleration for p in self.points) and self.load_inertia is None:
            raise fault(
                "missing-key",
                "load_inertia at the shaft, as a point has an acceleration",
                "write 0 kg*m^2 if only the rotor is accelerated",
            )
        if self.vertical and self.holding_torque is None:
            raise fault(
                "missing-key",
                "holding_torque of a vertical axis",
                "state the torque that keeps its load from falling",
            )
        shares = [p.share for p in self.points]
        if None in shares and any(s is not None for s in shares):
            without = ("points", shares.index(None))
            raise fault("missing-key", "a share at every point or at none", at=without)
        if sum(s or 0.0 for s in shares) > 1.0 + 1e-9:
            remedy = "what is left of 100 % is rest"
            raise fault("contradiction", "shares of 100 % together at most", remedy, ("points",))
        if not 0.1 <= self.mounting_factor <= 10.0:
            expected = "a mounting_factor from 10 % to 1000 %"
            raise fault("absurd-size", expected, at=("mounting_factor",))
        return self

    @property
    def has_duty(self) -> bool:
        """Whether the points state their shares of time."""
        return self.points[0].share is not None

    @property
    def rest_share(self) -> float:
        """Share of time at rest, where the points state theirs. [-]"""
        return max(0.0, 1.0 - sum(p.share or 0.0 for p in self.points))

    @property
    def top_speed(self) -> float:
        """Highest speed of its points. [rad/s]"""
        return max(p.speed for p in self.points)

    @property
    def accelerates(self) -> bool:
        """Whether the rotor's own inertia counts in its demand."""
        return any(p.acceleration for p in self.points)

    @property
    def driving_torque(self) -> float:
        """Torque with which the load may push the motor on while it stops. [N·m]"""
        gravity = (self.holding_torque or 0.0) if self.vertical else 0.0
        return max(gravity, *(-p.torque for p in self.points), 0.0)


class Margins(Record):
    """Least headrooms the user accepts; ``voltage_use`` is the share of a voltage limit that
    the highest moment may reach."""

    torque: Share = 0.25
    supply: Share = 0.20
    voltage_use: Share = 0.90
    winding: RiseFromZero = 10.0

    @model_validator(mode="after")
    def _possible(self) -> Margins:
        if not 0 < self.voltage_use <= 1:
            expected = "a voltage_use above 0 %, up to 100 %"
            raise fault("contradiction", expected, at=("voltage_use",))
        return self


class Tolerances(Record):
    """Half-widths of the parameters a data sheet states, and how they are taken together."""

    resistance: Share = 0.10
    inductance: Share = 0.20
    torque: Share = 0.10
    combine: Literal["combined", "worst", "nominal"] = "combined"

    @model_validator(mode="after")
    def _possible(self) -> Tolerances:
        for key in ("resistance", "inductance", "torque"):
            if getattr(self, key) >= 1.0:
                raise fault("absurd-size", "a tolerance below 100 %", at=(key,))
        return self


class VoltageLimits(Record):
    """Bounds the user sets on the bus voltage."""

    min: Voltage | None = None
    max: Voltage | None = None

    @model_validator(mode="after")
    def _ordered(self) -> VoltageLimits:
        if self.min is not None and self.max is not None and self.max < self.min:
            raise fault("contradiction", "max at or above min", "swap or correct them", ("max",))
        return self


class Limits(Record):
    """What one machine may take at most."""

    buses: Count = 1
    voltage: VoltageLimits = VoltageLimits()
    volume: Volume | None = None
    mass: Mass | None = None
    price: Price | None = None
    lead_time: LeadTime | None = None
    step_rate: Frequency | None = None

    @model_validator(mode="after")
    def _one_bus(self) -> Limits:
        if self.buses != 1:
            remedy = "this version chooses one bus for all axes"
            raise fault("not-yet", "buses: 1", remedy, ("buses",))
        return self


class Load(Record):
    """Another consumer on the bus, such as a controller board."""

    load: Text
    power: Power
    supply_voltage: VoltageRange


class Worth(Record):
    """What a unit of volume or mass is worth to the user, beside the cost."""

    volume: float = 0.0
    mass: float = 0.0
    currency: Currency | None = None

    @model_validator(mode="before")
    @classmethod
    def _read(cls, data: Any) -> Any:
        if not isinstance(data, dict):
            return data
        read: dict[str, Any] = {}
        for key, value in data.items():
            if key not in ("volume", "mass") or not isinstance(value, str):
                read[key] = value
                continue
            amount, _, unit = value.strip().partition(" ")
            currency, slash, per = unit.strip().partition("/")
            if not CURRENCY.match(currency) or not slash:
                example = "8 EUR/dm^3" if key == "volume" else "5 EUR/kg"
                expected = f"a worth such as {example}"
                raise fault("no-worth", expected, "name currency and unit", (key,))
            try:
                read[key] = units.parse(f"{key}_worth", f"{amount} /{per}")
            except units.QuantityError as error:
                raise fault(error.name, error.expected, error.remedy, (key,)) from None
            if read.setdefault("currency", currency) != currency:
                raise fault("contradiction", "one currency in all worths", at=(key,))
        if not read:
            raise fault("empty", "a worth of volume or mass")
        return read


def _minimise(value: Any) -> Any:
    value = listed(value)
    if isinstance(value, tuple) and all(isinstance(goal, str) for goal in value):
        if not value or any(goal not in GOALS for goal in value):
            remedy = "for a weighing write such as {volume: 8 EUR/dm^3}"
            raise fault("unknown-goal", "cost, volume or mass, or an ordered list of these", remedy)
        if len(set(value)) != len(value):
            raise fault("contradiction", "each goal once", "drop the second one")
    return value


class Stage(Record):
    """Axes that work at the same moment; the supply must carry each stage."""

    stage: Text
    axes: tuple[str, ...]


class Machine(Record):
    """A machine file."""

    name: Text
    currency: Currency
    quantity: Count = 1
    ambient: Temperature = 40.0
    catalogues: Annotated[tuple[Text, ...], BeforeValidator(listed)]
    margins: Margins = Margins()
    tolerances: Tolerances = Tolerances()
    limits: Limits = Limits()
    minimise: Annotated[
        Annotated[tuple[str, ...], BeforeValidator(_minimise), Tag("list")]
        | Annotated[Worth, Tag("keys")],
        Discriminator(list_or_keys),
    ] = ("cost",)
    loads: tuple[Load, ...] = ()
    bus_capacitance: Capacitance = 0.0
    axes: tuple[Axis, ...]

    @model_validator(mode="after")
    def _named_once(self) -> Machine:
        if not self.axes:
            raise fault("empty", "at least one axis", at=("axes",))
        if not self.catalogues:
            raise fault("empty", "at least one catalogue file or folder", at=("catalogues",))
        names = [axis.axis for axis in self.axes]
        for number, name in enumerate(names):
            if name in names[:number]:
                place = ("axes", number, "axis")
                raise fault("doubled-name", "a name of its own for each axis", "rename one", place)
        if len(self.axes) > 64:
            raise fault("absurd-size", "at most 64 axes", at=("axes",))
        if isinstance(self.minimise, Worth) and self.minimise.currency not in (None, self.currency):
            expected = f"worths in the machine's currency, {self.currency}"
            raise fault("contradiction", expected, at=("minimise",))
        price = self.limits.price
        if price is not None and price.currency not in (None, self.currency):
            expected = f"a price limit in the machine's currency, {self.currency}"
            raise fault("contradiction", expected, at=("limits", "price"))
        if not -40.0 <= self.ambient <= 100.0:
            expected = "an ambient from -40 degC to 100 degC"
            raise fault("absurd-size", expected, at=("ambient",))
        return self

    @property
    def stages(self) -> tuple[Stage, ...]:
        """Without a cycle: one stage in which every axis works."""
        return (Stage(stage="all axes at once", axes=tuple(a.axis for a in self.axes)),)

    @property
    def fixed_power(self) -> float:
        """Of the other consumers. [W]"""
        return sum(load.power for load in self.loads)


class Source(Record):
    """A file that was read, by its name as the user gave it and its SHA-256."""

    file: str
    sha256: str


class Problem(Record):
    """A machine with the catalogue it may choose from."""

    machine: Machine
    catalogue: Catalogue
    machine_file: str = ""
    sources: tuple[Source, ...] = Field(default=())
