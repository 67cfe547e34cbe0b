"""What the program answers: designs, findings, figures and proofs, as frozen records.

No figure in an answer is NaN or infinite; what cannot be stated is None.
"""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, model_validator

from .fields import Count, Current, Record, Text, Voltage, fault, quantity
from .machine import Source

CurrentFromZero = Annotated[float, quantity("current", least=0)]
State = Literal["passes", "fails", "unknown"]
Standing = Literal[
    "published", "derived", "practice", "simulated", "measured", "memory", "guess", "stated"
]


class AxisChoice(Record):
    """Parts and settings of one axis."""

    axis: Text
    motor: Text
    driver: Text
    joining: Text | None = None
    reduction: Text | None = None
    current_peak: Current | None = None
    current_rms: Current | None = None
    rest_current_peak: CurrentFromZero | None = None
    microsteps: Count | None = None

    @model_validator(mode="after")
    def _one_current(self) -> AxisChoice:
        if self.current_peak is not None and self.current_rms is not None:
            raise fault(
                "contradiction",
                "one of current_peak and current_rms",
                "drop one of them",
                at=("current_rms",),
            )
        if self.current_peak is None and self.current_rms is None:
            raise fault(
                "missing-key",
                "one of current_peak and current_rms",
                "state the setting as the driver's sheet does, peak or RMS",
            )
        if self.reduction is not None:
            raise fault(
                "not-yet",
                "no reduction",
                "this version judges axes without reduction",
                at=("reduction",),
            )
        return self

    @property
    def peak(self) -> float:
        """Peak of the phase sine it is set to. [A]"""
        if self.current_peak is not None:
            return self.current_peak
        return float((self.current_rms or 0.0) * 2.0**0.5)


class BusChoice(Record):
    """Voltage and supply of one bus, and the axes on it (all of them when left out).

    Without a supply the load is computed all the same, and what depends on one is unknown.
    """

    voltage: Voltage
    supply: Text | None = None
    count: Count = 1
    axes: tuple[Text, ...] = ()


class Design(Record):
    """The choices of one machine: nothing in it is computed."""

    machine: str
    axes: tuple[AxisChoice, ...]
    buses: tuple[BusChoice, ...]


class Quantity(Record):
    """A figure with its unit."""

    value: float
    unit: str


class Finding(Record):
    """One checked rule.

    ``headroom`` is None where nothing is required; ``margin`` is the least headroom accepted.
    """

    rule: str
    subject: str
    actual: Quantity | None = None
    limit: Quantity | None = None
    headroom: float | None = None
    margin: float = 0.0
    state: State
    standing: Standing
    note: str = ""


class WorstPoint(Record):
    """Where an axis has the least torque headroom. SI figures."""

    point: str
    speed: float
    required_torque: float
    usable_torque: float


class ChainStep(Record):
    """One step from nominal to usable torque: what it is and what is left. [N·m]"""

    step: str
    torque: float
    standing: Standing


class AxisFigures(Record):
    """What was computed about one axis. SI figures, temperatures in °C."""

    axis: str
    torque_headroom: float | None
    worst_point: WorstPoint
    chain: tuple[ChainStep, ...]
    voltage_share: float
    winding_temperature: float
    winding_temperature_high: float
    winding_limit: float
    case_temperature: float
    peak_power: float
    mean_power: float
    rest_power: float
    worst_power: float
    rest_current_peak: float
    microsteps: int
    step_rate: float
    returned_energy: float
    rated_current: float
    current_basis: str
    start_stop_speed: float | None
    resonance: float | None
    inertia_ratio: float | None


class BusFigures(Record):
    """What was computed about one bus. SI figures."""

    mean_power: float
    peak_power: float
    worst_power: float
    available_power: float | None
    supply_headroom: float | None
    highest_voltage: float | None
    voltage_limit: float
    returned_energy: float
    capacitance: float
    needed_capacitance: float | None
    absorbs_energy: bool
    rule_of_thumb_current: float
    naive_current: float


class OrderLine(Record):
    """One line of the order, for all machines to be built."""

    part: str
    kind: str
    supplier: str | None
    quantity: int
    stock: int | None
    lead_time: float | None
    unit_price: float | None
    line_price: float | None


class Totals(Record):
    """Of one machine; None where a part does not state the figure."""

    cost: float | None
    volume: float | None
    mass: float | None


class Remark(Record):
    """An assumption with its standing, or a caution."""

    text: str
    standing: Standing = "practice"


class Judgement(Record):
    """A design recomputed from catalogue and machine."""

    design: Design
    verdict: Literal["holds", "fails"]
    findings: tuple[Finding, ...]
    axes: tuple[AxisFigures, ...]
    buses: tuple[BusFigures, ...]
    order: tuple[OrderLine, ...]
    totals: Totals
    currency: str
    quantity: int
    assumptions: tuple[Remark, ...]
    cautions: tuple[str, ...]
    changed: tuple[str, ...] = ()

    def to_frame(self) -> Any:
        """One row per finding, as a pandas frame."""
        import pandas as pd

        rows = []
        for finding in self.findings:
            row = finding.model_dump()
            for key in ("actual", "limit"):
                figure = row.pop(key)
                row[key] = figure["value"] if figure else None
                row["unit"] = figure["unit"] if figure else row.get("unit")
            rows.append(row)
        return pd.DataFrame(rows)


class Goal(Record):
    """One goal with the value reached and the bound proved for it."""

    name: str
    value: float
    unit: str
    step: float
    proved_bound: float | None


class Rejection(Record):
    """How many options of an axis failed a rule first, and the nearest miss."""

    axis: str
    rule: str
    count: int
    needs: Quantity | None
    best: Quantity | None
    margin: float = 0.0
    nearest: str


class Exclusion(Record):
    """A catalogue entry left out of the choice, and why."""

    part: str
    reason: str


class Proof(Record):
    """How the program knows: what was searched, by which routes, and the gap left."""

    method: str
    pairs: int
    voltages: tuple[float, ...]
    options: int
    judged: int
    adequate: int
    solves: int
    exclusions: tuple[Exclusion, ...]
    gap: float | None
    second_route: str = ""


class NextSetting(Record):
    """What the driver's next higher setting would give, all else unchanged."""

    axis: str
    current_peak: float
    torque_headroom: float | None
    peak_power: float
    winding_temperature: float
    holds: bool
    breaks: str = ""


class Answer(Record):
    """What ``pick`` found."""

    verdict: Literal["proved", "not proved", "none exists"]
    machine: str
    goals: tuple[Goal, ...] = ()
    judgement: Judgement | None = None
    next_settings: tuple[NextSetting, ...] = ()
    rejections: tuple[Rejection, ...] = ()
    reasons: tuple[str, ...] = ()
    proof: Proof
    sources: tuple[Source, ...] = ()
    version: str = Field(default="")

    @property
    def design(self) -> Design | None:
        """The chosen design, if there is one."""
        return self.judgement.design if self.judgement else None

    def to_frame(self) -> Any:
        """One row per axis, as a pandas frame: parts, settings and figures."""
        import pandas as pd

        if self.judgement is None:
            return pd.DataFrame()
        rows = []
        for choice, figures in zip(self.judgement.design.axes, self.judgement.axes, strict=True):
            flat = figures.model_dump(exclude={"chain", "worst_point"})
            worst = {f"worst_{k}": v for k, v in figures.worst_point.model_dump().items()}
            rows.append(choice.model_dump() | flat | worst)
        return pd.DataFrame(rows)


def joining_of(choice: AxisChoice, ways: tuple[str, ...]) -> str | None:
    """The joining a choice means for a motor: its own, or the only one there is."""
    if choice.joining is not None:
        return choice.joining if choice.joining in ways else None
    return ways[0] if len(ways) == 1 else None
