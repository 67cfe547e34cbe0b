"""Answers as text for a terminal: 100 columns, and as clear in black and white."""

from __future__ import annotations

import os
from collections.abc import Iterable, Sequence
from typing import TextIO

from rich.console import Console
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from .. import units
from ..domain.fields import Money
from ..domain.parts import Catalogue
from ..domain.results import Answer, Finding, Judgement, Quantity, Rejection
from ..errors import Fault

WIDTH = 100
RPM = 30 / 3.141592653589793
MANY = 12  # rows a list may have before it is cut


class _Console(Console):
    """Leaves a reader that went away to the command line, which ends the run in silence."""

    def on_broken_pipe(self) -> None:
        raise BrokenPipeError


def console(stream: TextIO) -> Console:
    """A console of the report's width; colour only on a terminal that wants it."""
    plain = not stream.isatty() or "NO_COLOR" in os.environ
    width = WIDTH if not stream.isatty() else min(WIDTH, Console(file=stream).width)
    return _Console(
        file=stream,
        width=width,
        no_color=plain,
        highlight=False,
        soft_wrap=False,
        force_terminal=None if not plain else False,
    )


# -- pieces -----------------------------------------------------------------------------------


def _head(out: Console, text: str) -> None:
    out.print()
    out.print(Text(text.upper(), style="bold"))


def _table(columns: Sequence[str], rows: Iterable[Sequence[str]], left: int = 1) -> Padding:
    """Columns of text; the first ``left`` flush left, the others right."""
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="dim")
    for number, name in enumerate(columns):
        table.add_column(name, justify="left" if number < left else "right", overflow="fold")
    for row in rows:
        table.add_row(*(Text(cell) for cell in row))
    return Padding(table, (0, 0, 0, 2))


def _lines(out: Console, rows: Iterable[str]) -> None:
    for row in rows:
        table = Table.grid(padding=(0, 1, 0, 0))
        table.add_column(width=2, justify="right")
        table.add_column(overflow="fold")
        table.add_row("-", Text(row))
        out.print(table)


def percent(share: float | None, digits: int = 0) -> str:
    """A share in per cent; a dash where there is none."""
    return "-" if share is None else f"{100 * share:.{digits}f} %"


def figure(quantity: Quantity | None) -> str:
    """A quantity in the unit people read it in."""
    if quantity is None:
        return "-"
    value, unit = quantity.value, quantity.unit
    shown = {
        "rad/s": ("rpm", RPM),
        "m": ("mm", 1e3),
        "F": ("uF", 1e6),
        "m^3": ("dm^3", 1e3),
        "1": ("", 1.0),
        "kg*m^2": ("g*cm^2", 1e7),
    }
    if unit == "Hz" and value >= 1e4:
        return f"{value / 1e3:.4g} kHz"
    name, factor = shown.get(unit, (unit, 1.0))
    return f"{value * factor:.4g} {name}".strip()


def heated(temperature: float) -> str:
    """A winding temperature; it has no end where each kelvin brings more heat than it sheds."""
    return "no end" if temperature >= 1000.0 else f"{temperature:.0f}"


def money(amount: float | None, currency: str) -> str:
    """An amount with its currency."""
    return "-" if amount is None else f"{amount:,.2f} {currency}".replace(",", " ")


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
    out = console(stream)
    if answer.judgement is None:
        _print_none(answer, out)
        return
    goals = ", ".join(_goal(g.name, g.value, g.unit) for g in answer.goals)
    out.print(Text(f"{answer.machine}: {answer.verdict}, {goals}", style="bold"))
    _print_judgement(answer.judgement, out, answer)


def print_judgement(judgement: Judgement, stream: TextIO) -> None:
    """What ``judge`` found."""
    out = console(stream)
    out.print(Text(f"{judgement.design.machine}: the design {judgement.verdict}", style="bold"))
    for name in judgement.changed:
        out.print(Text(f"  changed since the design was saved: {name}"))
    _print_judgement(judgement, out, None)


def _goal(name: str, value: float, unit: str) -> str:
    if unit == "m^3":
        return f"{name} {1000 * value:.4g} dm^3"
    return f"{name} {value:.4g} kg" if unit == "kg" else f"{name} {money(value, unit)}"


def _print_judgement(judgement: Judgement, out: Console, answer: Answer | None) -> None:
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
    _head(out, "assumptions and guesses")
    _lines(out, (f"{remark.standing}: {remark.text}" for remark in judgement.assumptions))
    _head(out, "cautions")
    _lines(out, judgement.cautions)


def _print_states(judgement: Judgement, out: Console) -> None:
    """Rules that fail, then what is unknown, grouped, with what would settle it."""
    states = [finding.state for finding in judgement.findings]
    counts = {state: states.count(state) for state in ("passes", "fails", "unknown")}
    out.print(
        Text(
            f"  {len(states)} findings: {counts['passes']} pass, {counts['fails']} fail, "
            f"{counts['unknown']} unknown"
        )
    )
    for finding in judgement.findings:
        if finding.state == "fails":
            out.print(Text(f"  FAILS    {_finding(finding)}", style="bold"))
    groups: dict[tuple[str, str], list[str]] = {}
    for finding in judgement.findings:
        if finding.state == "unknown":
            groups.setdefault((finding.rule, finding.note), []).append(finding.subject)
    for (rule, note), subjects in groups.items():
        out.print(Text(f"  unknown  {rule} ({', '.join(dict.fromkeys(subjects))}): {note}"))


def _finding(finding: Finding) -> str:
    compared = ""
    if finding.margin and finding.headroom is not None:
        compared = (
            f": {figure(finding.actual)} against {figure(finding.limit)}, headroom "
            f"{percent(finding.headroom)}, margin {percent(finding.margin)}"
        )
    elif finding.actual is not None and finding.limit is not None:
        compared = f": {figure(finding.actual)} against {figure(finding.limit)}"
    elif finding.actual is not None:
        compared = f": {figure(finding.actual)}"
    return f"{finding.rule} ({finding.subject}){compared}" + (
        f"; {finding.note}" if finding.note else ""
    )


def _print_design(judgement: Judgement, out: Console) -> None:
    _head(out, "design")
    rows = []
    for choice, figures in zip(judgement.design.axes, judgement.axes, strict=True):
        motor = choice.motor + (f" ({choice.joining})" if choice.joining else "")
        rows.append(
            (
                choice.axis,
                motor,
                choice.driver,
                f"{choice.peak:.3g} A",
                f"{choice.peak / 2**0.5:.3g} A",
                f"{figures.rest_current_peak:.3g} A",
                f"1/{figures.microsteps}",
            )
        )
    out.print(
        _table(
            ("axis", "motor", "driver", "set, peak", "= RMS", "at rest, peak", "step"), rows, left=3
        )
    )
    for bus in judgement.design.buses:
        unit = "no supply named" if bus.supply is None else f"{bus.count} x {bus.supply}"
        out.print(Text(f"  bus: {bus.voltage:g} V from {unit}, all axes"))


def _print_headrooms(judgement: Judgement, out: Console) -> None:
    _head(out, "headrooms, and where each axis has least")
    by_axis: dict[tuple[str, str], Finding] = {(f.subject, f.rule): f for f in judgement.findings}
    rows = []
    for figures in judgement.axes:
        worst = figures.worst_point
        heat = by_axis[figures.axis, "winding temperature"]
        hold = by_axis[figures.axis, "holding"]
        limit = "-" if heat.limit is None else f"{heat.limit.value:.0f}"
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
                limit,
                f"{figures.case_temperature:.0f}",
            )
        )
    out.print(
        _table(
            (
                "axis",
                "torque",
                "needs N*m",
                "has N*m",
                "at rpm",
                "of",
                "holding",
                "winding",
                "if lossy",
                "limit",
                "case",
            ),
            rows,
        )
    )
    for bus in judgement.buses:
        out.print(
            Text(
                f"  supply {percent(bus.supply_headroom)}; "
                "20 % headroom is 83 % loading. Required figures contain no margin."
            )
        )


def _print_chain(judgement: Judgement, out: Console) -> None:
    _head(out, "torque from ideal to usable at that point, N*m")
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
    names = ["ideal", *(f"- {name}" for name in steps[1:])]
    out.print(_table(("axis", *names, "factor", "V share"), rows))


def _print_load(judgement: Judgement, out: Console) -> None:
    for bus, figures in zip(judgement.design.buses, judgement.buses, strict=True):
        _head(out, f"load of the {bus.voltage:g} V supply")
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
            row("every axis jammed", figures.worst_power),
        ]
        out.print(_table(("", "power", "current", "loading"), rows))
        out.print(Text("  The last three are for comparison only and decide nothing."))


def _print_braking(judgement: Judgement, out: Console) -> None:
    _head(out, "braking: emergency stop of all axes at once")
    for figures in judgement.buses:
        risen = figures.highest_voltage
        shown = "without limit" if risen is None else f"to {risen:.1f} V"
        out.print(
            Text(
                f"  {figures.returned_energy:.3g} J into {1e6 * figures.capacitance:.0f} uF lift "
                f"the bus {shown}; limit {figures.voltage_limit:.1f} V"
            )
        )


def _print_next(answer: Answer, out: Console) -> None:
    _head(out, "the next higher setting of each driver would give")
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
    out.print(_table(("axis", "peak", "torque", "peak power", "winding", "then"), rows))


def _print_order(judgement: Judgement, out: Console) -> None:
    _head(out, "order")
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
    out.print(
        _table(("part", "", "from", "number", "stock", "lead", "each", "price"), rows, left=3)
    )
    totals = judgement.totals
    volume = "-" if totals.volume is None else f"{1000 * totals.volume:.3g} dm^3"
    mass = "-" if totals.mass is None else f"{totals.mass:.3g} kg"
    out.print(Text(f"  one machine: {money(totals.cost, currency)}, {volume}, {mass}"))


def _print_proof(answer: Answer, out: Console) -> None:
    _head(out, "how we know")
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
        gap = (
            "no bound is known" if proof.gap is None else f"at most {percent(proof.gap, 1)} better"
        )
        rows.append(f"Not proved: the search was stopped; another design could be {gap}.")
    if proof.second_route:
        rows.append(f"Second route: {proof.second_route}.")
    _lines(out, [*rows, *_exclusions(answer)])


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


def _print_none(answer: Answer, out: Console) -> None:
    """No design: which rule turned away what, and what stands in the way."""
    if answer.verdict == "not proved":
        out.print(Text(f"{answer.machine}: stopped before any design was known", style="bold"))
        return
    out.print(Text(f"{answer.machine}: no design exists", style="bold"))
    _lines(out, answer.reasons)
    stuck = {reason.removeprefix("no option fits axis ") for reason in answer.reasons}
    rows = [row for row in answer.rejections if not stuck & _axes(answer) or row.axis in stuck]
    if rows:
        _head(out, "options turned away, by the first rule each breaks")
        out.print(
            _table(
                ("axis", "rule", "options", "needs", "has", "nearest miss"),
                [_rejection(row) for row in rows],
                left=2,
            )
        )
    _head(out, "how we know")
    _lines(out, [f"Second route: {answer.proof.second_route}.", *_exclusions(answer)])


def _axes(answer: Answer) -> set[str]:
    return {row.axis for row in answer.rejections}


def _rejection(row: Rejection) -> tuple[str, ...]:
    return (row.axis, row.rule, str(row.count), figure(row.needs), figure(row.best), row.nearest)


# -- catalogue --------------------------------------------------------------------------------


def print_catalogue(catalogue: Catalogue, path: str, stream: TextIO) -> None:
    """Every part of a catalogue in one line."""
    out = console(stream)
    counts = f"{len(catalogue.motors)} motors, {len(catalogue.drivers)} drivers, " + (
        f"{len(catalogue.supplies)} supplies"
    )
    out.print(Text(f"{path}: {counts}, no faults", style="bold"))
    _head(out, "motors")
    out.print(
        _table(
            (
                "part",
                "frame",
                "torque",
                "current",
                "phase",
                "inductance",
                "inertia",
                "wires",
                "price",
                "stock",
            ),
            [
                (
                    m.part,
                    units.write("length", m.frame, "mm"),
                    f"{m.holding_torque:.3g} N*m",
                    f"{m.rated_current:g} A",
                    f"{m.phase_resistance:.3g} ohm",
                    f"{1e3 * m.phase_inductance:.3g} mH",
                    "-" if m.rotor_inertia is None else f"{1e7 * m.rotor_inertia:.3g} g*cm^2",
                    str(m.wires),
                    _price(m.price),
                    _stock(m.stock),
                )
                for m in catalogue.motors
            ],
        )
    )
    _head(out, "drivers")
    out.print(
        _table(
            ("part", "voltage", "settings, peak", "finest step", "motors", "price", "stock"),
            [
                (
                    d.part,
                    f"{d.supply_voltage.min:g}-{d.supply_voltage.max:g} V",
                    f"{d.peak_settings[0]:.3g}-{d.peak_settings[-1]:.3g} A",
                    f"1/{max(d.microsteps)}",
                    str(d.channels),
                    _price(d.price),
                    _stock(d.stock),
                )
                for d in catalogue.drivers
            ],
        )
    )
    _head(out, "supplies")
    out.print(
        _table(
            ("part", "voltage", "trim", "power", "current", "units", "price", "stock"),
            [
                (
                    s.part,
                    f"{s.voltage:g} V",
                    f"{s.trim.min:g}-{s.trim.max:g} V" if s.trim else "-",
                    f"{s.power:g} W",
                    f"{s.current:.3g} A",
                    str(s.parallel),
                    _price(s.price),
                    _stock(s.stock),
                )
                for s in catalogue.supplies
            ],
        )
    )


def _price(price: Money | None) -> str:
    return "-" if price is None else f"{price.amount} {price.currency or ''}".strip()


def _stock(stock: int | None) -> str:
    return "unknown" if stock is None else str(stock)
