"""Answers as plain data for JSON; a quantity is ``{"value": ..., "unit": ...}``."""

from __future__ import annotations

import json
from typing import Any

from ..domain.parts import Catalogue
from ..domain.results import Answer, AxisChoice, AxisFigures, BusFigures, Judgement, NextSetting

AXIS_UNITS = {
    "winding_temperature": "degC",
    "winding_temperature_high": "degC",
    "winding_limit": "degC",
    "case_temperature": "degC",
    "peak_power": "W",
    "mean_power": "W",
    "rest_power": "W",
    "worst_power": "W",
    "step_rate": "Hz",
    "returned_energy": "J",
    "rated_current": "A",
    "start_stop_speed": "rad/s",
    "resonance": "Hz",
}
BUS_UNITS = {
    "mean_power": "W",
    "peak_power": "W",
    "worst_power": "W",
    "available_power": "W",
    "highest_voltage": "V",
    "voltage_limit": "V",
    "returned_energy": "J",
    "capacitance": "F",
    "needed_capacitance": "F",
    "rule_of_thumb_current": "A",
    "naive_current": "A",
}
PART_UNITS = {
    "mass": "kg",
    "volume": "m^3",
    "frame": "m",
    "step_angle": "deg",
    "holding_torque": "N*m",
    "rated_current": "A",
    "phase_resistance": "ohm",
    "phase_inductance": "H",
    "rotor_inertia": "kg*m^2",
    "detent_torque": "N*m",
    "rated_rise": "K",
    "case_limit": "degC",
    "shaft": "m",
    "max_step_rate": "Hz",
    "switch_resistance": "ohm",
    "idle_power": "W",
    "off_time": "s",
    "current_loop_bandwidth": "Hz",
    "bus_capacitance": "F",
    "max_ambient": "degC",
    "voltage": "V",
    "rated_power": "W",
    "peak_power": "W",
    "peak_time": "s",
    "inrush": "A",
    "output_capacitance": "F",
    "largest_startup_capacitance": "F",
    "overvoltage_trip": "V",
    "lead_time": "day",
    "supply_voltage": "V",
    "trim": "V",
    "current_settings": "A",
    "size": "m",
    "brake": "N*m",
}


def quantity(value: float | None, unit: str) -> dict[str, Any] | None:
    """A figure with its unit, or None."""
    return None if value is None else {"value": value, "unit": unit}


def answer_data(answer: Answer) -> dict[str, Any]:
    """An answer of ``pick``."""
    judgement = answer.judgement
    goals = [goal.model_dump() for goal in answer.goals]
    data: dict[str, Any] = {
        "verdict": answer.verdict,
        "machine": answer.machine,
        "goal": goals[0] if goals else None,
        "goals": goals,
    }
    if judgement is not None:
        data |= judgement_data(judgement)
    else:
        data |= {
            "totals": None,
            "axes": [],
            "buses": [],
            "findings": [],
            "order": [],
            "assumptions": [],
            "cautions": [],
        }
    data["next_settings"] = [_next(row) for row in answer.next_settings]
    data["rejections"] = [row.model_dump() for row in answer.rejections]
    data["reasons"] = list(answer.reasons)
    proof = answer.proof.model_dump()
    proof["voltages"] = [quantity(v, "V") for v in answer.proof.voltages]
    return data | {
        "proof": proof,
        "inputs": [source.model_dump() for source in answer.sources],
        "version": answer.version,
    }


def judged_data(judgement: Judgement) -> dict[str, Any]:
    """A judgement of ``judge``."""
    data: dict[str, Any] = {"verdict": judgement.verdict, "machine": judgement.design.machine}
    return data | judgement_data(judgement) | {"changed_since_saved": list(judgement.changed)}


def judgement_data(judgement: Judgement) -> dict[str, Any]:
    """What both answers share."""
    totals, currency = judgement.totals, judgement.currency
    chosen = zip(judgement.design.axes, judgement.axes, strict=True)
    return {
        "totals": {
            "cost": quantity(totals.cost, currency),
            "volume": quantity(totals.volume, "m^3"),
            "mass": quantity(totals.mass, "kg"),
        },
        "axes": [_axis(choice, figures) for choice, figures in chosen],
        "buses": [_bus(judgement, k, figures) for k, figures in enumerate(judgement.buses)],
        "findings": [finding.model_dump() for finding in judgement.findings],
        "order": [
            line.model_dump()
            | {
                "lead_time": quantity(line.lead_time, "day"),
                "unit_price": quantity(line.unit_price, currency),
                "line_price": quantity(line.line_price, currency),
            }
            for line in judgement.order
        ],
        "assumptions": [remark.model_dump() for remark in judgement.assumptions],
        "cautions": list(judgement.cautions),
    }


def _axis(choice: AxisChoice, figures: AxisFigures) -> dict[str, Any]:
    worst = figures.worst_point
    data: dict[str, Any] = {
        "axis": choice.axis,
        "motor": choice.motor,
        "joining": choice.joining,
        "current_basis": figures.current_basis,
        "reduction": choice.reduction,
        "driver": choice.driver,
        "current_peak": quantity(choice.peak, "A"),
        "current_rms": quantity(choice.peak / 2**0.5, "A"),
        "rest_current_peak": quantity(figures.rest_current_peak, "A"),
        "microsteps": figures.microsteps,
        "bus": 0,
        "torque_headroom": figures.torque_headroom,
        "worst_point": {
            "point": worst.point,
            "speed": quantity(worst.speed, "rad/s"),
            "required_torque": quantity(worst.required_torque, "N*m"),
            "usable_torque": quantity(worst.usable_torque, "N*m"),
        },
        "torque_chain": [
            {"step": s.step, "torque": quantity(s.torque, "N*m"), "standing": s.standing}
            for s in figures.chain
        ],
        "voltage_share": figures.voltage_share,
        "inertia_ratio": figures.inertia_ratio,
    }
    return data | {name: quantity(getattr(figures, name), u) for name, u in AXIS_UNITS.items()}


def _bus(judgement: Judgement, number: int, figures: BusFigures) -> dict[str, Any]:
    bus = judgement.design.buses[number]
    data: dict[str, Any] = {
        "voltage": quantity(bus.voltage, "V"),
        "supply": bus.supply,
        "count": bus.count,
        "axes": list(bus.axes or (a.axis for a in judgement.design.axes)),
        "supply_headroom": figures.supply_headroom,
    }
    return data | {name: quantity(getattr(figures, name), u) for name, u in BUS_UNITS.items()}


def _next(row: NextSetting) -> dict[str, Any]:
    return {
        "axis": row.axis,
        "current_peak": quantity(row.current_peak, "A"),
        "torque_headroom": row.torque_headroom,
        "peak_power": quantity(row.peak_power, "W"),
        "winding_temperature": quantity(row.winding_temperature, "degC"),
        "holds": row.holds,
        "breaks": row.breaks,
    }


def catalogue_data(catalogue: Catalogue) -> dict[str, Any]:
    """A catalogue, as read: SI figures with their units."""
    data: dict[str, Any] = {}
    for kind in ("motors", "drivers", "supplies"):
        data[kind] = [_part(entry.model_dump(mode="python")) for entry in getattr(catalogue, kind)]
    return data


def _part(entry: dict[str, Any]) -> dict[str, Any]:
    """One catalogue entry with units at every figure that has one."""
    for name, unit in PART_UNITS.items():
        value = entry.get(name)
        if isinstance(value, float):
            entry[name] = quantity(value, unit)
        elif isinstance(value, dict):
            entry[name] = {key: quantity(number, unit) for key, number in value.items()}
        elif isinstance(value, tuple):
            entry[name] = [quantity(number, unit) for number in value]
    if entry.get("derating"):
        entry["derating"] = [
            {"at": quantity(step["at"], "degC"), "share": step["share"]}
            for step in entry["derating"]
        ]
    if entry.get("price") is not None:
        amount, currency = entry["price"]
        entry["price"] = quantity(float(amount), currency)
    entry["price_table"] = [[number, float(amount)] for number, amount in entry["price_table"]]
    return entry


def as_json(data: dict[str, Any]) -> str:
    """One JSON object; refuses NaN and infinity."""
    return json.dumps(data, indent=2, allow_nan=False, ensure_ascii=False)
