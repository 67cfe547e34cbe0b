"""Assumptions a judgement stands on, and the cautions that apply to the design."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

from ..domain import parts as defaults
from ..domain.results import Remark
from ..physics import power, thermal
from .cases import AxisCase, BusCase

STRONG_CHAIN, COARSE_RIPPLE, HEAVY_LOAD, HOT_CASE = 3.0, 0.3, 10.0, 60.0
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
    t = machine.tolerances
    how = {
        "combined": "taken together by root sum of squares",
        "worst": "all at their worst end",
        "nominal": "not counted",
    }[t.combine]
    yield (
        f"Ambient {machine.ambient:g} degC around motors, drivers and supply.",
        "stated" if "ambient" in machine.model_fields_set else "practice",
    )
    yield (
        f"Tolerances: resistance ±{100 * t.resistance:g} %, inductance ±{100 * t.inductance:g} "
        f"%, torque ±{100 * t.torque:g} %, supply ±{100 * bus.spread:g} %; {how}.",
        "practice",
    )
    if len(bus.axes) > 1:
        yield "All axes work at once, each at its largest power (no cycle is stated).", "practice"
    yield "Voltage drop in cables 0 V.", "guess"
    yield (
        f"Iron loss {power.IRON_LOSS_HIGH:g} W/(N*m*Hz) for the supply and "
        f"{power.IRON_LOSS_LOW:g} for winding heat, the ends of its band; the weakest figure: "
        "measure the bus current of one unloaded motor to settle it.",
        "guess",
    )
    yield "Driver loss 3 % of bus voltage times phase current, beside its bridge.", "guess"
    yield "Case temperature: three quarters of the winding's rise.", "guess"
    no_duty = [case.axis.axis for case in bus.axes if not case.axis.has_duty]
    if no_duty:
        yield (
            "No duty stated, so each point counts as lasting for ever: " + ", ".join(no_duty) + ".",
            "practice",
        )
    guessed = [case for case in bus.axes if case.axis.damping_ratio is None]
    active = [case for case in guessed if case.driver.active_damping]
    passive = [case for case in guessed if not case.driver.active_damping]
    for cases, ratio, kind in (
        (active, defaults.DAMPING_ACTIVE, "with active damping"),
        (passive, defaults.DAMPING_PASSIVE, "without"),
    ):
        if cases:
            names = ", ".join(case.axis.axis for case in cases)
            yield f"Damping ratio {100 * ratio:g} % of drivers {kind}: {names}.", "guess"
    mounted = [case.axis.axis for case in bus.axes if case.axis.mounting_factor == 1.0]
    if mounted:
        yield (
            "Motors sit on a metal plate as their rating supposes: " + ", ".join(mounted) + ".",
            ("practice"),
        )


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
            [
                c
                for c in bus.axes
                if c.driver.off_time is None and c.driver.current_loop_bandwidth is None
            ],
            f"Regulator time {1e6 * defaults.REGULATOR_TIME:g} us",
            "guess",
        ),
        (
            [c for c in bus.axes if c.driver.bus_capacitance is None],
            "Bus capacitance 0 uF when braking, as none is stated",
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
    """What a rule does not forbid but the user should know, one line for all axes it is true of."""
    lossy: list[str] = []
    hot, rough, heavy, strong, fast = (list[str]() for _ in range(5))
    for case in bus.axes:
        name, worst = case.axis.axis, case.worst
        allowed = float(worst.chain.usable) / (1.0 + bus.machine.margins.torque)
        if allowed > 0 and float(worst.chain.nominal) / allowed > STRONG_CHAIN:
            strong.append(f"{name} {float(worst.chain.nominal) / allowed:.1f}")
        high = case.steady_temperature(power.IRON_LOSS_HIGH)
        if high > case.heat_limit >= case.temperature:
            shown = "no end" if high >= thermal.RUNAWAY else f"{high:.0f} degC"
            lossy.append(f"{name} {shown} (limit {case.heat_limit:.0f})")
        case_heat = float(thermal.case_temperature(case.machine.ambient, case.temperature))
        if case_heat > HOT_CASE:
            hot.append(f"{name} {case_heat:.0f} degC")
        if case.voltage * 20e-6 / (case.joined.inductance * case.choice.peak) > COARSE_RIPPLE:
            rough.append(name)
        rotor, load = case.motor.rotor_inertia, case.axis.load_inertia
        if rotor and load is not None and load / rotor > HEAVY_LOAD:
            heavy.append(f"{name} {load / rotor:.0f}")
        if case.K * case.axis.top_speed > case.voltage:
            fast.append(f"{name} {case.K * case.axis.top_speed:.0f} V")
    for found, text in (
        (
            lossy,
            "The winding could get too hot if the iron is as lossy as its band allows; measure "
            "it: {}.",
        ),
        (hot, "Motor cases get hot, guard against touch: {}."),
        (
            heavy,
            "Load inertia over rotor inertia is above 10; expect ringing and lost steps in "
            "sharp moves: {}.",
        ),
        (
            strong,
            "Ideal torque is more than 3 times what is allowed; a measured torque curve would "
            "free some of it: {}.",
        ),
        (
            rough,
            "Current ripple is large for these windings; torque is safe, the power figure is "
            "not: {}.",
        ),
        (fast, "Turned at top speed with its driver off a motor feeds the bus: {}."),
    ):
        if found:
            yield text.format(", ".join(found))
    vertical = [case.axis.axis for case in bus.axes if case.axis.vertical]
    if vertical:
        yield (
            "Falls when power goes, unless a brake, a counterweight or a screw that does not "
            f"run back holds it; keep clear: {', '.join(vertical)}."
        )


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
