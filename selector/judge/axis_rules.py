"""The rules one axis must keep, one function each."""

from __future__ import annotations

import math
from collections.abc import Iterator

from ..domain.results import Finding, Quantity, Standing, State
from ..physics import power, supply, thermal, torque
from .cases import AxisCase

CLOSE = 1e-9  # relative: float dust only
Findings = Iterator[Finding]


def finding(
    rule: str,
    subject: str,
    actual: float | None,
    limit: float | None,
    unit: str,
    headroom: float | None,
    state: State,
    standing: Standing,
    note: str = "",
    margin: float = 0.0,
) -> Finding:
    """A finding with its figures in one unit; figures that are not finite are left out."""

    def quantity(value: float | None) -> Quantity | None:
        if value is None or value in (float("inf"), float("-inf")):
            return None
        return Quantity(value=value, unit=unit)

    if headroom is not None and abs(headroom) == float("inf"):
        headroom = None
    return Finding(
        rule=rule,
        subject=subject,
        actual=quantity(actual),
        limit=quantity(limit),
        headroom=headroom,
        margin=margin,
        state=state,
        standing=standing,
        note=note,
    )


def at_most(
    rule: str,
    subject: str,
    actual: float,
    limit: float,
    unit: str,
    standing: Standing = "stated",
    note: str = "",
    least: float = 0.0,
) -> Finding:
    """A finding that ``actual`` must not pass ``limit``; headroom is limit over actual, minus 1."""
    headroom = limit / actual - 1.0 if actual > 0 else None
    passes = headroom is None or headroom >= least - CLOSE
    if actual <= 0 and limit < 0:
        passes = False
    state: State = "passes" if passes else "fails"
    return finding(rule, subject, actual, limit, unit, headroom, state, standing, note, least)


def at_least(
    rule: str,
    subject: str,
    actual: float,
    limit: float,
    unit: str,
    standing: Standing = "stated",
    note: str = "",
    least: float = 0.0,
) -> Finding:
    """A finding that ``actual`` must reach ``limit``; headroom is actual over limit, minus 1."""
    headroom = actual / limit - 1.0 if limit > 0 else None
    passes = headroom is None or headroom >= least - CLOSE
    state: State = "passes" if passes else "fails"
    return finding(rule, subject, actual, limit, unit, headroom, state, standing, note, least)


def frame(case: AxisCase) -> Findings:
    """The motor's frame is one the axis takes."""
    if case.axis.frames:
        fits = any(abs(case.motor.frame - f) < 1e-6 for f in case.axis.frames)
        wanted = ", ".join(f"{1000 * f:g}" for f in case.axis.frames)
        yield finding(
            "frame",
            case.axis.axis,
            case.motor.frame,
            None,
            "m",
            None,
            "passes" if fits else "fails",
            "stated",
            f"the axis takes {wanted} mm",
        )


def current_setting(case: AxisCase) -> Findings:
    """The driver has the setting, hot as it is, and the motor bears its peak."""
    subject, peak = case.axis.axis, case.peak
    settings = case.driver.peak_settings
    nearest = min(settings, key=lambda s: abs(s - peak))
    on_driver = abs(nearest - peak) <= CLOSE * nearest
    yield finding(
        "setting on the driver",
        subject,
        peak,
        nearest,
        "A",
        None,
        "passes" if on_driver else "fails",
        "stated",
        "" if on_driver else f"the nearest setting of {case.driver.part} is {nearest:.4g} A peak",
    )
    share = _driver_share(case)
    standing: Standing = "stated" if case.driver.derating else "practice"
    note = f"{100 * share:.0f} % of its largest at {case.machine.ambient:g} degC"
    yield at_most("driver current", subject, peak, settings[-1] * share, "A", standing, note)
    yield at_most(
        "motor peak current",
        subject,
        peak,
        2**0.5 * case.joined.rated_current,
        "A",
        "derived",
        "1.41 times the rated current of both phases",
    )


def _driver_share(case: AxisCase) -> float:
    steps = [(step.at, step.share) for step in case.driver.derating]
    return supply.derated_share(case.machine.ambient, steps, case.driver.max_ambient)


def rest_current(case: AxisCase) -> Findings:
    """At rest the peak may stand in one phase alone: not above the rated current."""
    allowed = case.axis.above_rated_at_rest
    limit = case.joined.rated_current * (2**0.5 if allowed else 1.0)
    note = "above_rated_at_rest: yes" if allowed else "may stand in one phase alone"
    yield at_most("rest current", case.axis.axis, case.rest_current, limit, "A", "derived", note)


def rest_share(case: AxisCase) -> Findings:
    """The driver has the share of current at rest that the design asks for, and the axis allows."""
    if case.choice.rest_current_peak is None:
        return
    if case.rest_share < 1.0 - 1e-6 and not case.axis.reduce_at_rest:
        yield finding(
            "reduced at rest",
            case.axis.axis,
            case.rest_share,
            None,
            "1",
            None,
            "fails",
            "stated",
            "the axis does not say reduce_at_rest: yes",
        )
    shares = case.driver.hold_shares
    has = any(abs(share - case.rest_share) < 1e-6 for share in shares)
    offered = ", ".join(f"{100 * s:g} %" for s in shares)
    yield finding(
        "rest share on the driver",
        case.axis.axis,
        case.rest_share,
        None,
        "1",
        None,
        "passes" if has else "fails",
        "stated",
        f"the driver offers {offered}",
    )


def holding(case: AxisCase) -> Findings:
    """Torque held at rest against the demand, with the torque margin; detent not counted."""
    held = float(torque.standstill_torque(case.K, case.holding_current))
    yield at_least(
        "holding",
        case.axis.axis,
        held,
        case.holding_needed,
        "N*m",
        "simulated",
        "" if case.holding_needed else "nothing is asked at rest",
        least=case.machine.margins.torque,
    )


def stop_torque(case: AxisCase) -> Findings:
    """The stated emergency stop is one the motor can make, or it loses step in it."""
    if case.stop_torque is not None:
        most = float(torque.standstill_torque(case.K, case.peak))
        note = "inertia times stop_deceleration, and the load where it drives"
        yield at_least(
            "stop torque", case.axis.axis, most, case.stop_torque, "N*m", "simulated", note
        )


def start(case: AxisCase) -> Findings:
    """An axis that states its inertia but no acceleration: does it start without a ramp?"""
    speed = case.safe_start
    reached = max((p.speed for p in case.axis.points if p.from_rest), default=0.0)
    if speed is not None and not case.axis.accelerates and reached > speed:
        note = "state the acceleration of its ramp; without one it starts only up to this limit"
        yield finding(
            "start",
            case.axis.axis,
            reached,
            speed,
            "rad/s",
            speed / reached - 1.0,
            "unknown",
            "simulated",
            note,
        )


def held_without_power(case: AxisCase) -> Findings:
    """A vertical axis needs a brake, a counterweight or a screw that does not run back."""
    if not case.axis.vertical:
        return
    subject, brake = case.axis.axis, case.motor.brake
    if case.axis.held_without_power:
        yield finding(
            "held without power",
            subject,
            None,
            None,
            "N*m",
            None,
            "passes",
            "stated",
            "held_without_power: yes",
        )
    elif brake is not None:
        yield at_least(
            "held without power",
            subject,
            brake.torque,
            case.holding_needed,
            "N*m",
            "stated",
            "by the motor's brake",
            case.machine.margins.torque,
        )
    else:
        yield finding(
            "held without power",
            subject,
            None,
            case.holding_needed,
            "N*m",
            None,
            "unknown",
            "practice",
            "say held_without_power: yes if a brake, counterweight or screw holds it",
        )


def step_rate(case: AxisCase) -> Findings:
    """Pulses at top speed within what controller and driver take."""
    rate, subject = case.step_rate(case.microsteps), case.axis.axis
    note = f"at 1/{case.microsteps} steps"
    if case.microsteps not in case.driver.microsteps:
        yield finding(
            "microsteps",
            subject,
            None,
            None,
            "1",
            None,
            "fails",
            "stated",
            f"the driver has no 1/{case.microsteps} step",
        )
    if case.step_limit is None:
        yield finding(
            "step rate",
            subject,
            rate,
            None,
            "Hz",
            None,
            "unknown",
            "stated",
            f"{note}; state limits: step_rate of the controller",
        )
    else:
        yield at_most("step rate", subject, rate, case.step_limit, "Hz", "derived", note)


def winding_temperature(case: AxisCase) -> Findings:
    """Steady winding temperature within the insulation class less the margin."""
    subject, ambient = case.axis.axis, case.machine.ambient
    high = case.steady_temperature(power.IRON_LOSS_HIGH)
    rise, room = case.temperature - ambient, case.heat_limit - ambient
    runaway = case.temperature >= thermal.RUNAWAY
    note = "no steady temperature" if runaway else f"up to {high:.0f} degC if the iron is lossy"
    if case.motor.insulation_class is None:
        note += "; insulation class B assumed"
    fits = case.temperature <= case.heat_limit + 1e-6
    yield finding(
        "winding temperature",
        subject,
        None if runaway else case.temperature,
        case.heat_limit,
        "degC",
        room / rise - 1.0 if rise > 0 else None,
        "passes" if fits else "fails",
        "guess",
        note,
    )
    if case.motor.case_limit is not None:
        shown = float(thermal.case_temperature(ambient, case.temperature))
        allowed = case.motor.case_limit - ambient
        yield finding(
            "case temperature",
            subject,
            shown,
            case.motor.case_limit,
            "degC",
            allowed / (shown - ambient) - 1.0 if shown > ambient else None,
            "passes" if shown <= case.motor.case_limit + 1e-6 else "fails",
            "guess",
        )


def torque_headroom(case: AxisCase) -> Findings:
    """Usable torque over what each point asks, at its speed and on the way there."""
    worst = case.worst
    unknown = case.axis.accelerates and case.motor.rotor_inertia is None
    usable = float(worst.chain.usable)
    least = case.machine.margins.torque
    found = at_least(
        "torque",
        case.axis.axis,
        usable,
        worst.required,
        "N*m",
        "simulated",
        f"at {worst.speed * 30 / math.pi:.0f} rpm",
        least,
    )
    if worst.stalled:
        note = f"{found.note} no torque is left"
        found = found.model_copy(update={"state": "fails", "note": note})
    if unknown and found.state == "passes":
        note = f"{found.note}; {case.motor.part} states no rotor_inertia, which counts here"
        found = found.model_copy(update={"state": "unknown", "note": note})
    yield found


RULES = (
    frame,
    current_setting,
    rest_share,
    rest_current,
    holding,
    stop_torque,
    start,
    held_without_power,
    step_rate,
    winding_temperature,
    torque_headroom,
)
