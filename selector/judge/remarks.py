"""Assumptions a judgement stands on, and the cautions that apply to the design."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

from ..domain import parts as defaults
from ..domain.results import Remark
from ..physics import power, thermal
from .bus_case import BusCase
from .cases import AxisCase

STRONG_CHAIN, COARSE_RIPPLE, HEAVY_LOAD, HOT_CASE = 3.0, 0.3, 10.0, 60.0
NEAR_RESONANCE = 0.15  # of the natural frequency
TOUCH_VOLTAGE = 60.0  # V DC


def assumptions(bus: BusCase) -> tuple[Remark, ...]:
    """Every figure that stands in for one not stated, with its standing."""
    return tuple(
        Remark(text=text, standing=standing)
        for text, standing in (
            *_of_the_machine(bus),
            *_of_the_motors(bus),
            *_of_the_drivers(bus),
            *_of_the_supply(bus),
        )
    )


def _names(cases: Iterable[AxisCase], part: str) -> str:
    return ", ".join(dict.fromkeys(getattr(case, part).part for case in cases))


def _of_the_machine(bus: BusCase) -> Iterator[tuple[str, str]]:
    machine = bus.machine

    def said(record: object, *names: str) -> str:
        """Standing of figures that the machine file states or leaves to us."""
        stated: set[str] = getattr(record, "model_fields_set", set())
        return "stated" if all(name in stated for name in names) else "practice"

    yield (
        f"Ambient {machine.ambient:g} degC around motors, drivers and supply.",
        said(machine, "ambient"),
    )
    m, t = machine.margins, machine.tolerances
    yield (
        f"Margins: torque {100 * m.torque:g} %, supply {100 * m.supply:g} %, bus at most "
        f"{100 * m.voltage_use:g} % of a driver's limit, winding {m.winding:g} K below its class.",
        said(m, "torque", "supply", "voltage_use", "winding"),
    )
    how = {
        "combined": "taken together by root sum of squares",
        "worst": "all at their worst end",
        "nominal": "not counted",
    }[t.combine]
    yield (
        f"Tolerances: resistance ±{100 * t.resistance:g} %, inductance ±{100 * t.inductance:g} %, "
        f"torque ±{100 * t.torque:g} %, supply ±{100 * bus.spread:g} %; {how}.",
        said(t, "resistance", "inductance", "torque"),
    )
    if len(bus.axes) > 1:
        yield "All axes work at once, each at its largest power (no cycle is stated).", "practice"
    yield "Capacitors count with 80 % of their stated capacitance when braking.", "practice"
    yield "In the emergency stop no friction helps.", "derived"
    yield "Voltage drop in cables 0 V.", "guess"
    yield (
        f"Iron loss {power.IRON_LOSS_HIGH:g} W/(N*m*Hz) for the supply and "
        f"{power.IRON_LOSS_LOW:g} for winding heat, the ends of its band; the weakest figure: "
        "measure the bus current of one unloaded motor to settle it.",
        "guess",
    )
    yield "Driver loss 3 % of bus voltage times phase current, beside its bridge.", "guess"
    yield "Case temperature: three quarters of the winding's rise.", "guess"
    yield from _of_the_axes(bus)


def _of_the_axes(bus: BusCase) -> Iterator[tuple[str, str]]:
    def names(cases: Iterable[AxisCase]) -> str:
        return ", ".join(case.axis.axis for case in cases)

    lasting = [case for case in bus.axes if not case.axis.has_duty]
    averaged = [case for case in bus.axes if case.axis.has_duty]
    guessed = [case for case in bus.axes if case.axis.damping_ratio is None]
    active = [case for case in guessed if case.driver.active_damping]
    passive = [case for case in guessed if not case.driver.active_damping]
    coarse = [case for case in bus.axes if case.microsteps < 8]
    plated = [case for case in bus.axes if case.axis.mounting_factor == 1.0]
    for cases, text, standing in (
        (lasting, "No duty stated, so each point counts as lasting for ever", "practice"),
        (averaged, "Shares of time repeat within a few minutes, short against the 20 to 40 min a "
                   "motor takes to heat", "practice"),
        (active, f"Damping ratio {100 * defaults.DAMPING_ACTIVE:g} % of drivers with active "
                 "damping", "guess"),
        (passive, f"Damping ratio {100 * defaults.DAMPING_PASSIVE:g} % of drivers without",
         "guess"),
        (coarse, "Torque lost with steps coarser than 1/8", "guess"),
        (plated, "Motors sit on a metal plate as their rating supposes", "practice"),
    ):  # fmt: skip
        if cases:
            yield f"{text}: {names(cases)}.", standing


def _of_the_motors(bus: BusCase) -> Iterator[tuple[str, str]]:
    for silent, text, standing in (
        (
            [c for c in bus.axes if c.motor.detent_torque is None],
            f"Detent torque {100 * defaults.DETENT_SHARE:g} % of holding torque",
            "guess",
        ),
        (
            [c for c in bus.axes if c.motor.rated_rise is None],
            f"Winding rise at rated current {defaults.RATED_RISE:g} K",
            "practice",
        ),
        ([c for c in bus.axes if c.motor.insulation_class is None], "Insulation class B", "guess"),
        (
            [c for c in bus.axes if c.motor.rotor_inertia is None],
            "Rotor inertia 0 kg*m^2, as none is stated",
            "guess",
        ),
    ):
        if silent:
            yield f"{text}: {_names(silent, 'motor')}.", standing


def _of_the_drivers(bus: BusCase) -> Iterator[tuple[str, str]]:
    for silent, text, standing in (
        (
            [c for c in bus.axes if c.driver.switch_resistance is None],
            f"One switch {1000 * defaults.SWITCH_RESISTANCE:g} mohm",
            "guess",
        ),
        (
            [c for c in bus.axes if c.driver.idle_power is None],
            f"Idle power {defaults.IDLE_POWER:g} W",
            "guess",
        ),
        (
            [c for c in bus.axes if c.driver.regulator_time == defaults.REGULATOR_TIME],
            f"Regulator time {1e6 * defaults.REGULATOR_TIME:g} us",
            "guess",
        ),
        (
            [c for c in bus.axes if c.driver.bus_capacitance is None],
            "Bus capacitance 0 uF when braking, as none is stated",
            "guess",
        ),
        (
            [c for c in bus.axes if c.driver.regulator_time > defaults.REGULATOR_TIME],
            "Regulator time as long as its off time or loop",
            "guess",
        ),
        (
            [c for c in bus.axes if not c.driver.derating],
            "Full current to 50 degC ambient, 2.5 % less per kelvin above",
            "practice",
        ),
    ):
        if silent:
            yield f"{text}: {_names(silent, 'driver')}.", standing


def _of_the_supply(bus: BusCase) -> Iterator[tuple[str, str]]:
    unit = bus.supply
    if unit is None:
        yield f"Output tolerance {100 * defaults.SUPPLY_TOLERANCE:g} %, no supply named.", "guess"
        return
    if unit.tolerance is None:
        yield f"Output tolerance {100 * defaults.SUPPLY_TOLERANCE:g} %: {unit.part}.", "guess"
    if not unit.derating:
        yield f"Full power to 50 degC, 2.5 % less per kelvin above: {unit.part}.", "practice"
    if unit.output_capacitance is None:
        yield f"Output capacitance 0 uF when braking: {unit.part}.", "guess"
    if not unit.absorbs_energy:
        yield f"Takes no energy back: {unit.part}.", "practice"
    if unit.peak_power is not None:
        lasts = "" if unit.peak_time is None else f" for {unit.peak_time:g} s"
        yield (
            f"Short-time peak {unit.peak_power:g} W{lasts} of {unit.part} not counted, as "
            "durations are not stated.",
            "practice",
        )


def cautions(bus: BusCase) -> tuple[str, ...]:
    """Cautions that apply to this design."""
    return (*_about_axes(bus), *_about_the_machine(bus))


def _about_axes(bus: BusCase) -> Iterator[str]:
    """What a rule does not forbid but the user should know: one line for all axes it is true of."""
    for about, text in (
        (_lossy, "The winding could get too hot if the iron is as lossy as its band allows; "
                 "measure it: {}."),
        (_hot, "Motor cases get hot, guard against touch: {}."),
        (_heavy, "Load inertia over rotor inertia is above 10; expect ringing and lost steps in "
                 "sharp moves: {}."),
        (_resonant, "Steady running near the motor's own resonance, rough at low damping: {}."),
        (_strong, "Ideal torque is more than 3 times what the margin leaves of the usable; a "
                  "measured torque curve would free some of it: {}."),
        (_rough, "Current ripple is large for these windings; torque is safe, the power figure is "
                 "not: {}."),
        (_one_phase, "At rest one phase may carry more than the rated current alone, and gets "
                     "hotter than the figure says: {}."),
        (_coarse, "Steps coarser than 1/8 are rough and cost torque: {}."),
        (_fast, "Turned at top speed with its driver off a motor feeds the bus: {}."),
        (_light, "The load drives with more than the holding torque asked at rest: {}."),
        (_falling, "Falls or runs on when power goes, unless a brake, a counterweight or a screw "
                   "that does not run back holds it; keep clear: {}."),
        (_held, "Held without power as stated or by the motor's brake; test it before you rely on "
                "it: {}."),
    ):  # fmt: skip
        found = [about(case) for case in bus.axes]
        if any(found):
            yield text.format(", ".join(filter(None, found)))


def _lossy(case: AxisCase) -> str:
    high = case.steady_temperature(power.IRON_LOSS_HIGH)
    if not high > case.winding_limit >= case.temperature:
        return ""
    shown = "no end" if high >= thermal.RUNAWAY else f"{high:.0f} degC"
    return f"{case.axis.axis} {shown} (limit {case.winding_limit:.0f})"


def _hot(case: AxisCase) -> str:
    heat = float(thermal.case_temperature(case.machine.ambient, case.temperature))
    return f"{case.axis.axis} {heat:.0f} degC" if heat > HOT_CASE else ""


def _heavy(case: AxisCase) -> str:
    rotor, load = case.motor.rotor_inertia, case.axis.load_inertia
    if not rotor or load is None or load / rotor <= HEAVY_LOAD:
        return ""
    return f"{case.axis.axis} {load / rotor:.0f}"


def _resonant(case: AxisCase) -> str:
    own = case.resonance
    if own is None:
        return ""
    for point in case.axis.points:
        rate = case.step_rate_at(point.speed)
        if point.acceleration == 0.0 and abs(rate / own - 1.0) < NEAR_RESONANCE:
            return f"{case.axis.axis} {rate:.0f} full steps/s by {own:.0f} Hz"
    return ""


def _strong(case: AxisCase) -> str:
    chain = case.worst.chain
    allowed = float(chain.usable) / (1.0 + case.machine.margins.torque)
    if allowed <= 0 or float(chain.nominal) / allowed <= STRONG_CHAIN:
        return ""
    return f"{case.axis.axis} {float(chain.nominal) / allowed:.1f}"


def _rough(case: AxisCase) -> str:
    ripple = case.voltage * 20e-6 / (case.joined.inductance * case.peak)
    return case.axis.axis if ripple > COARSE_RIPPLE else ""


def _one_phase(case: AxisCase) -> str:
    return case.axis.axis if case.rest_current > case.joined.rated_current * 1.001 else ""


def _coarse(case: AxisCase) -> str:
    return f"{case.axis.axis} 1/{case.microsteps}" if case.microsteps < 8 else ""


def _fast(case: AxisCase) -> str:
    volts = case.K * case.axis.top_speed
    return f"{case.axis.axis} {volts:.0f} V" if volts > case.voltage else ""


def _light(case: AxisCase) -> str:
    asked, drives = case.holding_needed, case.axis.driving_torque
    if drives <= asked:
        return ""
    return f"{case.axis.axis} {drives:.3g} N*m against {asked:.3g}"


def _falling(case: AxisCase) -> str:
    held = case.axis.held_without_power or case.motor.brake is not None
    return case.axis.axis if case.axis.driving_torque > 0 and not held else ""


def _held(case: AxisCase) -> str:
    held = case.axis.held_without_power or case.motor.brake is not None
    return case.axis.axis if case.axis.driving_torque > 0 and held else ""


def _about_the_machine(bus: BusCase) -> Iterator[str]:
    if max(bus.risen_voltage, bus.highest) > TOUCH_VOLTAGE:
        yield (
            "The bus can pass 60 V DC: touch protection and discharge of the capacitors after "
            "switch-off are needed; follow your local code."
        )
    yield ("Mains wiring and protective earth are for qualified people, by your local code.")
    yield "Never plug or unplug a motor while its driver has power."
    yield (
        "An electronic supply limits its current and may never blow a fuse: size branch fuses "
        "and wires by the supply's limit."
    )
    yield (
        "These are estimates, not measurements: measure bus current and winding temperature at "
        "first start. This is no safety assessment."
    )
