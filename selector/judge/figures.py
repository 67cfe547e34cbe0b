"""The figures a judgement reports beside its findings: by axis, by bus, and the order."""

from __future__ import annotations

from ..domain.results import (
    AxisFigures,
    BusFigures,
    ChainStep,
    OrderLine,
    Standing,
    Totals,
    WorstPoint,
)
from ..physics import braking, power, supply, thermal
from .bus_case import BusCase
from .cases import AxisCase

MOST_SIMULATED_DAMPING = 0.10


def axis_figures(case: AxisCase) -> AxisFigures:
    """What was computed about one axis."""
    worst = case.worst
    chain = worst.chain
    high = case.steady_temperature(power.IRON_LOSS_HIGH)
    name = worst.point.point or f"point {case.axis.points.index(worst.point) + 1}"
    return AxisFigures(
        axis=case.axis.axis,
        torque_headroom=worst.headroom,
        worst_point=WorstPoint(
            point=name,
            speed=worst.speed,
            required_torque=worst.required,
            usable_torque=float(chain.usable),
        ),
        chain=(
            ChainStep(step="ideal", torque=float(chain.nominal), standing="derived"),
            ChainStep(step="model", torque=float(chain.modelled), standing="simulated"),
            ChainStep(step="tolerances", torque=float(chain.toleranced), standing="practice"),
            ChainStep(
                step="detent",
                torque=float(chain.less_detent),
                standing="guess" if case.motor.detent_torque is None else "stated",
            ),
            ChainStep(
                step="damping",
                torque=float(chain.less_detent * chain.damping),
                standing=_damping_standing(case),
            ),
            ChainStep(
                step="microsteps",
                torque=float(chain.usable),
                standing="guess" if case.microsteps < 8 else "simulated",
            ),
        ),
        voltage_share=float(chain.voltage_share),
        winding_temperature=case.temperature,
        winding_temperature_high=high,
        winding_limit=case.winding_limit,
        case_temperature=float(thermal.case_temperature(case.machine.ambient, case.temperature)),
        peak_power=case.peak_power,
        mean_power=case.mean_power,
        rest_power=case.rest_power,
        worst_power=case.worst_power,
        rest_current_peak=case.rest_current,
        microsteps=case.microsteps,
        step_rate=case.step_rate(case.microsteps),
        returned_energy=case.returned_energy,
        rated_current=case.joined.rated_current,
        current_basis=case.driver.current_basis,
        start_stop_speed=case.safe_start,
        resonance=case.resonance,
        inertia_ratio=_inertia_ratio(case),
    )


def _damping_standing(case: AxisCase) -> Standing:
    stated = case.axis.damping_ratio
    return "guess" if stated is None or stated > MOST_SIMULATED_DAMPING else "simulated"


def _inertia_ratio(case: AxisCase) -> float | None:
    if not case.motor.rotor_inertia or case.axis.load_inertia is None:
        return None
    return case.axis.load_inertia / case.motor.rotor_inertia


def bus_figures(bus: BusCase) -> BusFigures:
    """What was computed about the bus."""
    rated = [case.joined.rated_current for case in bus.axes]
    risen, available = bus.risen_voltage, bus.available_power
    limit = min(bus.voltage_limit, bus.trip or bus.voltage_limit)
    return BusFigures(
        mean_power=bus.mean_power,
        peak_power=bus.peak_power,
        worst_power=sum(case.worst_power for case in bus.axes) + bus.machine.fixed_power,
        available_power=available,
        supply_headroom=available / bus.peak_power - 1.0
        if available is not None and bus.peak_power > 0
        else None,
        highest_voltage=risen if risen < float("inf") else None,
        voltage_limit=limit,
        returned_energy=bus.returned_energy,
        capacitance=bus.capacitance,
        needed_capacitance=braking.needed_capacitance(bus.highest, limit, bus.returned_energy),
        absorbs_energy=bus.absorbs_energy,
        rule_of_thumb_current=supply.rule_of_thumb_current(bus.voltage, rated),
        naive_current=supply.naive_current(rated),
    )


def order_lines(bus: BusCase) -> tuple[OrderLine, ...]:
    """The order for all machines to be built."""
    lines = []
    for kind, part, number in bus.parts.values():
        quantity = number * bus.machine.quantity
        price = None if part.price is None else part.price.amount
        lines.append(
            OrderLine(
                part=part.part,
                kind=kind,
                supplier=part.supplier,
                quantity=quantity,
                stock=part.stock,
                lead_time=part.lead_time,
                unit_price=None if price is None else float(price),
                line_price=None if price is None else float(price * quantity),
            )
        )
    return tuple(lines)


def totals(bus: BusCase) -> Totals:
    """Cost, volume and mass of one machine's parts; None where one does not state it."""

    def summed(amounts: list[float | None]) -> float | None:
        known = [amount for amount in amounts if amount is not None]
        return sum(known) if len(known) == len(amounts) else None

    rows = list(bus.parts.values())
    prices = [None if p.price is None else p.price.amount * n for _, p, n in rows]
    cost = None if None in prices else float(sum(price for price in prices if price is not None))
    return Totals(
        cost=cost,
        volume=summed([None if p.outer_volume is None else p.outer_volume * n for _, p, n in rows]),
        mass=summed([None if p.mass is None else p.mass * n for _, p, n in rows]),
    )
