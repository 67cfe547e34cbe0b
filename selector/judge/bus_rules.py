"""The rules of the bus, the supply and the order, one function each."""

from __future__ import annotations

from ..domain.parts import Driver
from ..domain.results import State
from ..physics import braking
from .axis_rules import Findings, at_least, at_most, finding
from .bus_case import BusCase

NONE = "no supply is named"


def driver_voltage(bus: BusCase) -> Findings:
    """The supply at its low end still feeds each driver; at its high end it keeps the margin."""
    for case in bus.axes:
        drives = case.driver.supply_voltage
        yield at_least("lowest driver voltage", case.axis.axis, bus.lowest, drives.min, "V")
        yield at_most(
            "highest driver voltage",
            case.axis.axis,
            bus.highest,
            bus.machine.margins.voltage_use * drives.max,
            "V",
            note=f"{100 * bus.machine.margins.voltage_use:g} % of {drives.max:g} V",
        )


def set_voltage(bus: BusCase) -> Findings:
    """The supply can be set to the bus voltage, and the machine allows it."""
    unit, limits = bus.supply, bus.machine.limits.voltage
    if unit is None:
        yield finding("set voltage", "bus", bus.voltage, None, "V", None, "unknown", "stated", NONE)
    else:
        low, high = (unit.trim.min, unit.trim.max) if unit.trim else (unit.voltage, unit.voltage)
        inside = low - 1e-9 <= bus.voltage <= high + 1e-9
        span = f"{unit.part} gives {low:g} V" + (f" to {high:g} V" if high > low else "")
        state: State = "passes" if inside else "fails"
        yield finding("set voltage", "bus", bus.voltage, None, "V", None, state, "stated", span)
    if limits.min is not None:
        yield at_least("lowest bus voltage", "bus", bus.voltage, limits.min, "V")
    if limits.max is not None:
        yield at_most("largest bus voltage", "bus", bus.voltage, limits.max, "V")
    for load in bus.machine.loads:
        yield at_least("load voltage, low end", load.load, bus.lowest, load.supply_voltage.min, "V")
        yield at_most(
            "load voltage, high end", load.load, bus.highest, load.supply_voltage.max, "V"
        )


def units_in_parallel(bus: BusCase) -> Findings:
    """No more units share the load than the supply allows."""
    if bus.count > 1 and bus.supply is not None:
        yield at_most("units in parallel", "bus", bus.count, bus.supply.parallel, "1")


def supply_power(bus: BusCase) -> Findings:
    """Mean and peak power against the derated rating, with the supply margin."""
    least, available = bus.machine.margins.supply, bus.available_power
    derated = f"rating times {100 * bus.derated_share:.0f} % at {bus.machine.ambient:g} degC"
    for rule, load in (
        ("supply mean power", bus.mean_power),
        ("supply peak power", bus.peak_power),
    ):
        if available is None:
            yield finding(rule, "bus", load, None, "W", None, "unknown", "guess", NONE)
        else:  # a guess, because the iron and driver losses in the load are
            yield at_most(rule, "bus", load, available, "W", "guess", derated, least)


def braking_rise(bus: BusCase) -> Findings:
    """Emergency stop of all axes: the highest moment within the drivers' limit and the trip."""
    note = _braking_note(bus)
    open_questions = _braking_unknowns(bus)
    for rule, limit in (("braking rise", bus.voltage_limit), ("overvoltage trip", bus.trip)):
        if limit is None:
            silent = "overvoltage_trip of the supply not stated"
            yield finding(
                rule, "bus", bus.risen_voltage, None, "V", None, "unknown", "stated", silent
            )
            continue
        said = [note, *open_questions]
        if bus.risen_voltage > limit:
            said.append(_needed(bus, limit))
        text = "; ".join(part for part in said if part)
        found = at_most(rule, "bus", bus.risen_voltage, limit, "V", "simulated", text)
        if found.state == "passes" and open_questions:
            found = found.model_copy(update={"state": "unknown"})
        yield found


def _braking_note(bus: BusCase) -> str:
    energy = bus.returned_energy
    if energy <= 0:
        return ""
    if bus.absorbs_energy:
        return f"{energy:.3g} J go back into the supply"
    return f"{energy:.3g} J into {bus.capacitance * 1e6:.0f} uF that can be counted on"


def _braking_unknowns(bus: BusCase) -> list[str]:
    """What is not stated and could raise the energy; nothing where none can come or stay."""
    if bus.absorbs_energy:
        return []
    moving = [case for case in bus.axes if case.axis.top_speed > 0]
    silent = [
        c.axis.axis for c in moving if c.axis.load_inertia is None or c.motor.rotor_inertia is None
    ]
    driven = [
        c.axis.axis
        for c in moving
        if c.axis.driving_torque > 0 and c.axis.stop_deceleration is None
    ]
    texts = []
    if silent:
        texts.append("inertia not stated: " + ", ".join(silent))
    if driven:
        said = "stop_deceleration not stated although the load drives: "
        texts.append(said + ", ".join(driven))
    return texts


def _needed(bus: BusCase, limit: float) -> str:
    """What would take up the energy: microfarads, or ohms, joules and watts of a resistor."""
    needed = braking.needed_capacitance(bus.highest, limit, bus.returned_energy)
    if needed is None:
        return "no capacitor helps: the limit lies below the supply's own voltage"
    more = (needed - bus.capacitance) / braking.CAPACITOR_SHARE
    text = f"add bus_capacitance of {more * 1e6:.0f} uF at least"
    watts = sum(case.stopping_power for case in bus.axes)
    if watts > 0 and all(case.axis.stop_deceleration is not None for case in bus.axes):
        text += (
            f", or a braking resistor of {limit**2 / watts:.3g} ohm at most that takes "
            f"{watts:.3g} W at first and {bus.returned_energy:.3g} J in all"
        )
    return text


def startup_capacitance(bus: BusCase) -> Findings:
    """The supply starts into the capacitors of drivers and bus."""
    one = None if bus.supply is None else bus.supply.largest_startup_capacitance
    silent = [c.driver.part for c in bus.axes if c.driver.bus_capacitance is None]
    held = sum(c.driver.bus_capacitance or 0.0 for c in bus.axes) + bus.machine.bus_capacitance
    if one is None:
        yield finding(
            "start-up capacitance",
            "bus",
            held,
            None,
            "F",
            None,
            "unknown",
            "stated",
            "largest_startup_capacitance of the supply not stated",
        )
        return
    found = at_most("start-up capacitance", "bus", held, bus.count * one, "F")
    if silent and found.state == "passes":
        note = "bus_capacitance not stated: " + ", ".join(dict.fromkeys(silent))
        found = found.model_copy(update={"state": "unknown", "note": note})
    yield found


def steady_lowering(bus: BusCase) -> Findings:
    """Power returned by loads that drive their motors, against what is surely consumed."""
    returned = sum(case.lowering_power for case in bus.axes)
    if returned <= 0.0 or bus.absorbs_energy:
        return
    consumed = sum(case.driver.idle_power or 0.0 for case in bus.axes)
    over = returned - consumed
    note = f"{returned:.3g} W come back, {consumed:.3g} W of stated idle power surely take some"
    if over > 0:
        limit = min(bus.voltage_limit, bus.trip or bus.voltage_limit)
        note += (
            f"; the other axes may take the rest, or a braking resistor of {limit**2 / over:.3g} "
            f"ohm at most for {over:.3g} W at least"
        )
    state: State = "unknown" if over > 0 else "passes"
    yield finding("steady lowering", "bus", returned, consumed, "W", None, state, "derived", note)


def stock(bus: BusCase) -> Findings:
    """Enough of each part for all machines, as far as stock is stated."""
    for _, part, number in bus.parts.values():
        needed = number * bus.machine.quantity
        if part.stock is None:
            yield finding(
                "stock", part.part, needed, None, "1", None, "unknown", "stated", "stock not stated"
            )
        else:
            yield at_most("stock", part.part, needed, part.stock, "1")


def limits(bus: BusCase) -> Findings:
    """Price, volume, mass and lead time of one machine within the user's limits."""
    machine = bus.machine
    rows = bus.parts.values()
    sums = (
        (
            "price",
            machine.limits.price and float(machine.limits.price.amount),
            machine.currency,
            [None if p.price is None else float(p.price.amount) * n for _, p, n in rows],
        ),
        (
            "volume",
            machine.limits.volume,
            "m^3",
            [None if p.outer_volume is None else p.outer_volume * n for _, p, n in rows],
        ),
        (
            "mass",
            machine.limits.mass,
            "kg",
            [None if p.mass is None else p.mass * n for _, p, n in rows],
        ),
    )
    for name, limit, unit, amounts in sums:
        if limit is None:
            continue
        known = sum(amount for amount in amounts if amount is not None)
        found = at_most(f"{name} limit", "machine", known, limit, unit)
        if None in amounts and found.state == "passes":
            found = found.model_copy(update={"state": "unknown", "note": "not stated by all parts"})
        yield found
    if machine.limits.lead_time is not None:
        for _, part, _ in rows:
            if part.lead_time is None:
                yield finding(
                    "lead time",
                    part.part,
                    None,
                    machine.limits.lead_time,
                    "day",
                    None,
                    "unknown",
                    "stated",
                    "lead time not stated",
                )
            else:
                yield at_most(
                    "lead time", part.part, part.lead_time, machine.limits.lead_time, "day"
                )


def beyond_this_version(bus: BusCase) -> Findings:
    """Parts that are read but not yet judged for what they are."""
    for _, part, _ in bus.parts.values():
        notes = []
        if isinstance(part, Driver) and part.channels > 1:
            notes.append(f"drives {part.channels} motors, counted as a unit for each")
        if part.price_table:
            notes.append("priced by quantity, counted at the price of the smallest")
        if part.pack > 1:
            notes.append(f"sold in packs of {part.pack}, counted singly")
        if notes:
            yield finding(
                "quantities",
                part.part,
                None,
                None,
                "1",
                None,
                "unknown",
                "stated",
                "; ".join(notes),
            )


RULES = (
    set_voltage,
    driver_voltage,
    units_in_parallel,
    supply_power,
    braking_rise,
    startup_capacitance,
    steady_lowering,
    stock,
    limits,
    beyond_this_version,
)
