"""Answers as text for a terminal: 100 columns, and as clear in black and white."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TextIO

from rich.text import Text

from ..domain.results import Answer, Finding, Judgement, Rejection
from ..errors import Fault
from .layout import RPM, Page, figure, hang, head, heated, lines, money, percent, table

MANY = 12  # rows a list may have before it is cut


# -- faults -----------------------------------------------------------------------------------


def print_faults(
    faults: Sequence[Fault], stream: TextIO, outcome: str = "nothing was computed"
) -> None:
    """Every fault with its place, what was found, what was expected and what to do."""
    for fault in faults:
        place = f"{fault.file}:{fault.line}:{fault.column}" if fault.line else fault.file
        remedy = f"; {fault.remedy}" if fault.remedy else ""
        print(visible(f"{place}: {fault.name}"), file=stream)
        print(visible(f"    {fault.found}"), file=stream)
        print(visible(f"  expected {fault.expected}{remedy}"), file=stream)
    count = len(faults)
    print(f"{count} fault{'s' if count > 1 else ''}; {outcome}", file=stream)


def visible(text: str) -> str:
    """Text with its control characters spelled out, so that none reaches the terminal."""
    return "".join(
        c if c.isprintable() or c == "\xa0" else c.encode("unicode_escape").decode() for c in text
    )


# -- pick and judge ---------------------------------------------------------------------------


def print_answer(answer: Answer, stream: TextIO) -> None:
    """What ``pick`` found."""
    out = Page(stream)
    if answer.judgement is None:
        _print_none(answer, out)
        out.finish()
        return
    goals = ", ".join(_goal(g.name, g.value, g.unit) for g in answer.goals)
    out.title(answer.machine, f"{answer.verdict}, {goals}")
    _print_judgement(answer.judgement, out, answer)
    out.finish()


def print_judgement(judgement: Judgement, stream: TextIO, name: str = "the design") -> None:
    """What ``judge`` found of the design of that name."""
    out = Page(stream)
    machine = judgement.design.machine
    out.title(f"{name} for {machine}", f"the design {judgement.verdict}")
    for name in judgement.changed:
        out.print(Text(f"  changed since the design was saved: {name}"))
    _print_judgement(judgement, out, None)
    out.finish()


def _goal(name: str, value: float, unit: str) -> str:
    if unit == "m^3":
        return f"{name} {1000 * value:.4g} dm^3"
    return f"{name} {value:.4g} kg" if unit == "kg" else f"{name} {money(value, unit)}"


def _print_judgement(judgement: Judgement, out: Page, answer: Answer | None) -> None:
    _print_states(judgement, out)
    _print_design(judgement, out)
    _print_headrooms(judgement, out)
    _print_chain(judgement, out)
    _print_load(judgement, out)
    _print_braking(judgement, out)
    if answer is not None and answer.next_settings:
        _print_next(answer, out)
    _print_order(judgement, out)
    if answer is not None:
        _print_proof(answer, out)
    head(out, "ASSUMPTIONS AND GUESSES")
    lines(out, (f"{remark.standing}: {remark.text}" for remark in judgement.assumptions))
    head(out, "CAUTIONS")
    lines(out, judgement.cautions)


def _print_states(judgement: Judgement, out: Page) -> None:
    """Rules that fail, then what is unknown, grouped, then what only a guess lets pass."""
    states = [finding.state for finding in judgement.findings]
    passing, failing, unknown = (states.count(s) for s in ("passes", "fails", "unknown"))
    out.print(Text(f"  {len(states)} findings: {passing} pass, {failing} fail, {unknown} unknown"))
    for finding in judgement.findings:
        if finding.state == "fails":
            hang(out, "FAILS  ", _finding(finding), "bold")
    groups: dict[tuple[str, str], list[str]] = {}
    for finding in judgement.findings:
        if finding.state == "unknown":
            subject = finding.subject
            if finding.rule == "start":
                subject += f" {figure(finding.actual)}, limit {figure(finding.limit)}"
            groups.setdefault((finding.rule, finding.note), []).append(subject)
    for (rule, note), subjects in groups.items():
        hang(out, "unknown", f"{rule} ({', '.join(dict.fromkeys(subjects))}): {note}")
    for axis in judgement.axes:
        low, high = axis.winding_temperature, axis.winding_temperature_high
        if high > axis.winding_limit >= low:
            text = (
                f"winding of {axis.axis}: {heated(low)} degC, but up to {heated(high)} degC if its "
                f"iron is lossy; limit {axis.winding_limit:.0f} degC"
            )
            hang(out, "measure", text)


def _finding(finding: Finding) -> str:
    compared = ""
    if finding.margin and finding.headroom is not None:
        compared = (
            f": {figure(finding.actual, 5)} against {figure(finding.limit, 5)}, headroom "
            f"{percent(finding.headroom)}, required {percent(finding.margin)}"
        )
    elif finding.actual is not None and finding.limit is not None:
        compared = f": {figure(finding.actual, 5)} against {figure(finding.limit, 5)}"
    elif finding.actual is not None:
        compared = f": {figure(finding.actual, 5)}"
    return f"{finding.rule} ({finding.subject}){compared}" + (
        f"; {finding.note}" if finding.note else ""
    )


def _print_design(judgement: Judgement, out: Page) -> None:
    head(out, "DESIGN")
    rows = []
    for choice, figures in zip(judgement.design.axes, judgement.axes, strict=True):
        motor = choice.motor + (f" ({choice.joining})" if choice.joining else "")
        peak, rms = f"{choice.peak:.3g} A peak", f"{choice.peak / 2**0.5:.3g} A RMS"
        by_rms = figures.current_basis == "rms"
        rows.append(
            (
                choice.axis,
                motor,
                choice.driver,
                rms if by_rms else peak,
                peak if by_rms else rms,
                f"{figures.rest_current_peak / choice.peak:.0%}",
                f"1/{figures.microsteps}",
            )
        )
    columns = ("axis", "motor", "driver", "set on driver", "which is", "at rest", "step")
    out.print(table(columns, rows, left=3, folds=(0, 1, 2)))
    for bus in judgement.design.buses:
        unit = "no supply named" if bus.supply is None else f"{bus.count} x {bus.supply}"
        out.print(Text(f"  bus: {bus.voltage:g} V from {unit}, all axes"))


def _print_headrooms(judgement: Judgement, out: Page) -> None:
    head(out, "HEADROOMS, AND WHERE EACH AXIS HAS LEAST")
    found = {(f.subject, f.rule): f for f in judgement.findings}
    rows = []
    for figures in judgement.axes:
        worst, hold = figures.worst_point, found[figures.axis, "holding"]
        rows.append(
            (
                figures.axis,
                percent(figures.torque_headroom),
                f"{worst.required_torque:.3g}",
                f"{worst.usable_torque:.3g}",
                f"{worst.speed * RPM:.0f}",
                worst.point,
                percent(hold.headroom),
                heated(figures.winding_temperature),
                heated(figures.winding_temperature_high),
                f"{figures.winding_limit:.0f}",
                f"{figures.case_temperature:.0f}",
            )
        )
    columns = (
        "axis",
        "torque",
        "needs N*m",
        "has N*m",
        "at rpm",
        "of",
        "holding",
        "winding",
        "lossy",
        "limit",
        "case",
    )
    out.print(table(columns, rows, folds=(0, 5)))
    torque = found[judgement.axes[0].axis, "torque"].margin
    peak = found["bus", "supply peak power"]
    lines(
        out,
        [
            f"Required: torque and holding {percent(torque)}; what is needed contains no margin.",
            "Winding (and if its iron is lossy), its limit, and the motor's case in degC.",
            f"Supply: headroom {percent(peak.headroom)}"
            + (
                ""
                if peak.headroom is None
                else f", which is {percent(1 / (1 + peak.headroom))} loading; "
                f"required {percent(peak.margin)}"
            )
            + ".",
        ],
    )


def _print_chain(judgement: Judgement, out: Page) -> None:
    head(out, "TORQUE FROM IDEAL TO USABLE AT THAT POINT, N*m")
    steps = [step.step for step in judgement.axes[0].chain]
    rows = [
        (
            figures.axis,
            *(f"{step.torque:.3g}" for step in figures.chain),
            f"{figures.chain[0].torque / figures.chain[-1].torque:.2f}"
            if figures.chain[-1].torque > 0
            else "-",
            f"{figures.voltage_share:.2f}",
        )
        for figures in judgement.axes
    ]
    columns = ("axis", *steps[:-1], "usable", "ideal/usable", "V share")
    out.print(table(columns, rows, folds=(0,)))
    lines(
        out,
        [
            "Each column is what is left after that step.",
            "V share: voltage that the full current asks for, over the bus; torque falls above 1, "
            "damping above 0.8.",
        ],
    )


def _print_load(judgement: Judgement, out: Page) -> None:
    for bus, figures in zip(judgement.design.buses, judgement.buses, strict=True):
        head(out, f"LOAD OF THE {bus.voltage:g} V SUPPLY")
        available = figures.available_power

        def row(
            name: str, watts: float, volts: float = bus.voltage, has: float | None = available
        ) -> tuple[str, ...]:
            return (
                name,
                f"{watts:.0f} W",
                f"{watts / volts:.2f} A",
                ("-" if not has else percent(watts / has)),
            )

        rows = [
            row("computed, mean", figures.mean_power),
            row("computed, peak", figures.peak_power),
        ]
        if available is not None:
            rows.append(row("supply gives, derated", available))
        rows += [
            row("rule of thumb", figures.rule_of_thumb_current * bus.voltage),
            row("all phase amperes + 20 %", figures.naive_current * bus.voltage),
            row("every axis at pull-out", figures.worst_power),
        ]
        out.print(table(("", "power", "current", "loading"), rows))
        lines(
            out,
            [
                "Rule of thumb: half the rated current per motor at 24 V, a third from 36 V. The "
                "last three rows are for comparison only and decide nothing."
            ],
        )


def _print_braking(judgement: Judgement, out: Page) -> None:
    head(out, "BRAKING: EMERGENCY STOP OF ALL AXES AT ONCE")
    for figures in judgement.buses:
        energy, risen = figures.returned_energy, figures.highest_voltage
        highest = "without limit" if risen is None else f"to {risen:.1f} V"
        if figures.absorbs_energy:
            text = f"{energy:.3g} J go back into the supply; the bus stays at {risen:.1f} V"
        else:
            held = f"{1e6 * figures.capacitance:.0f} uF that count"
            text = f"{energy:.3g} J into {held} lift the bus {highest}"
        out.print(Text(f"  {text}; limit {figures.voltage_limit:.1f} V"))


def _print_next(answer: Answer, out: Page) -> None:
    head(out, "THE NEXT HIGHER SETTING OF EACH DRIVER WOULD GIVE")
    rows = [
        (
            row.axis,
            f"{row.current_peak:.3g} A",
            percent(row.torque_headroom),
            f"{row.peak_power:.0f} W",
            f"{row.winding_temperature:.0f} degC",
            "all rules hold" if row.holds else f"breaks: {row.breaks}",
        )
        for row in answer.next_settings
    ]
    columns = ("axis", "peak", "torque", "peak power", "winding", "then")
    out.print(table(columns, rows, folds=(0, 5)))


def _print_order(judgement: Judgement, out: Page) -> None:
    head(out, "ORDER")
    currency = judgement.currency
    rows = []
    for line in judgement.order:
        stock = "unknown" if line.stock is None else str(line.stock)
        lead = "-" if line.lead_time is None else f"{line.lead_time:g} d"
        rows.append(
            (
                line.part,
                line.kind,
                line.supplier or "-",
                str(line.quantity),
                stock,
                lead,
                money(line.unit_price, currency),
                money(line.line_price, currency),
            )
        )
    columns = ("part", "", "from", "number", "stock", "lead", "each", "price")
    out.print(table(columns, rows, left=3, folds=(0, 2)))
    totals, machines = judgement.totals, judgement.quantity
    volume = "volume unknown" if totals.volume is None else f"{1000 * totals.volume:.3g} dm^3"
    mass = "mass unknown" if totals.mass is None else f"{totals.mass:.3g} kg"
    out.print(Text(f"  one machine: {money(totals.cost, currency)}, {volume}, {mass}"))
    if machines > 1:
        paid = None if totals.cost is None else machines * totals.cost
        out.print(Text(f"  all {machines} machines: {money(paid, currency)}"))
    leads = [line.lead_time for line in judgement.order if line.lead_time is not None]
    if leads:
        out.print(Text(f"  longest lead time: {max(leads):g} days"))


def _print_proof(answer: Answer, out: Page) -> None:
    head(out, "HOW WE KNOW")
    proof = answer.proof
    rows = [
        f"{proof.pairs} pairs of motor and driver (each joining counted) at "
        f"{len(proof.voltages)} voltages: {_voltages(proof.voltages)}.",
        f"{proof.judged} settings judged, {proof.adequate} options adequate; the others cannot be "
        "in a design this good.",
        f"{proof.solves} solves by CP-SAT; the judge recomputed the design without the search.",
    ]
    if answer.verdict == "proved":
        rows.append(
            "Proved: no choice from this catalogue does better, by this model and list of voltages."
        )
    else:
        rows.append("Not proved: the search was stopped; " + _gap(proof.gap))
    steps = ", ".join(f"{g.name} {g.step:.0e} {g.unit}" for g in answer.goals)
    rows.append(f"Goals are compared as integers, in steps of: {steps}.")
    if proof.second_route:
        rows.append(f"Second route: {proof.second_route}.")
    lines(out, [*rows, *_exclusions(answer)])


def _gap(gap: float | None) -> str:
    if gap is None:
        return "no bound is known."
    if gap == 0.0:
        return "the goal is at its best, only the order among equals is open."
    return f"another design could be at most {percent(gap, 1)} better."


def _voltages(voltages: Sequence[float]) -> str:
    """A list of voltages with runs of whole volts drawn together."""
    runs: list[list[float]] = []
    for volts in voltages:
        if runs and abs(volts - runs[-1][-1] - 1.0) < 1e-9:
            runs[-1].append(volts)
        else:
            runs.append([volts])
    shown = [f"{r[0]:g}" if len(r) == 1 else f"{r[0]:g} to {r[-1]:g}" for r in runs]
    return ", ".join(shown) + " V"


def _exclusions(answer: Answer) -> list[str]:
    reasons: dict[str, list[str]] = {}
    for row in answer.proof.exclusions:
        reasons.setdefault(row.reason, []).append(row.part)
    shown = []
    for reason, parts in reasons.items():
        more = f" and {len(parts) - MANY} more" if len(parts) > MANY else ""
        shown.append(f"Left out: {', '.join(parts[:MANY])}{more}: {reason}.")
    return shown


def _print_none(answer: Answer, out: Page) -> None:
    """No design: which rule turned away what, and what stands in the way."""
    if answer.verdict == "not proved":
        out.title(answer.machine, "stopped before any design was known")
        return
    out.title(answer.machine, "no design exists")
    lines(out, answer.reasons)
    stuck = {reason.removeprefix("no option fits axis ") for reason in answer.reasons}
    rows = [row for row in answer.rejections if row.axis in stuck]
    if rows:
        head(out, "OPTIONS TURNED AWAY, BY THE FIRST RULE EACH BREAKS")
        columns = ("axis", "rule", "options", "needs", "has", "headroom", "nearest miss")
        out.print(table(columns, [_rejection(row) for row in rows], left=2, folds=(0, 6)))
    head(out, "HOW WE KNOW")
    lines(out, [f"Second route: {answer.proof.second_route}.", *_exclusions(answer)])


def _rejection(row: Rejection) -> tuple[str, ...]:
    headroom = "-"
    if row.needs is not None and row.best is not None and row.needs.unit != "degC":
        short = row.best.value / row.needs.value - 1.0 if row.needs.value else None
        headroom = percent(short, 2 if short is not None and abs(short) < 0.01 else 0)
        if row.margin:
            headroom += f" of {percent(row.margin)}"
    needs, best = (figure(q, 5) for q in (row.needs, row.best))
    return row.axis, row.rule, str(row.count), needs, best, headroom, row.nearest
