"""Answers as text for a terminal: 100 columns, and as clear in black and white."""

from __future__ import annotations

import io
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


class _Page:
    """Lines of text gathered at the report's width and written without trailing blanks.

    Always 100 columns: a narrower terminal wraps lines, which beats breaking figures in two.
    """

    def __init__(self, stream: TextIO) -> None:
        self.stream, self.text = stream, io.StringIO()
        colour = stream.isatty() and "NO_COLOR" not in os.environ
        self.console = Console(
            file=self.text, width=WIDTH, highlight=False, force_terminal=colour, no_color=not colour
        )
        self.print = self.console.print

    def title(self, text: str) -> None:
        """The first line."""
        self.print(Text(text, style="bold"))

    def finish(self) -> None:
        """Write it all."""
        lines = self.text.getvalue().splitlines()
        self.stream.write("\n".join(line.rstrip() for line in lines) + "\n")


# -- pieces -----------------------------------------------------------------------------------


def _head(out: _Page, text: str) -> None:
    out.print()
    out.print(Text(text, style="bold"))


def _table(
    columns: Sequence[str],
    rows: Iterable[Sequence[str]],
    left: int = 1,
    folds: Sequence[int] = (0,),
) -> Padding:
    """Columns of text; the first ``left`` flush left, the others right; only ``folds`` may wrap."""
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="dim")
    for number, name in enumerate(columns):
        table.add_column(
            name,
            justify="left" if number < left or number in folds else "right",
            overflow="fold",
            no_wrap=number not in folds,
        )
    for row in rows:
        table.add_row(*(Text(cell) for cell in row))
    return Padding(table, (0, 0, 0, 2))


def _hang(out: _Page, first: str, text: str, style: str = "") -> None:
    """A word in a narrow column, and text beside it that wraps under itself."""
    table = Table.grid(padding=(0, 1, 0, 0))
    table.add_column(width=len(first) + 2, justify="right", no_wrap=True)
    table.add_column(overflow="fold")
    table.add_row(Text(first, style=style), Text(text, style=style))
    out.print(table)


def _lines(out: _Page, rows: Iterable[str]) -> None:
    for row in rows:
        _hang(out, "-", row)


def percent(share: float | None, digits: int = 0) -> str:
    """A share in per cent; a dash where there is none."""
    return "-" if share is None else f"{100 * share:.{digits}f} %"


def figure(quantity: Quantity | None, digits: int = 4) -> str:
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
    return f"{value * factor:.{digits}g} {name}".strip()


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
    out = _Page(stream)
    if answer.judgement is None:
        _print_none(answer, out)
        out.finish()
        return
    goals = ", ".join(_goal(g.name, g.value, g.unit) for g in answer.goals)
    out.title(f"{answer.machine}: {answer.verdict}, {goals}")
    _print_judgement(answer.judgement, out, answer)
    out.finish()


def print_judgement(judgement: Judgement, stream: TextIO, name: str = "the design") -> None:
    """What ``judge`` found of the design of that name."""
    out = _Page(stream)
    machine = judgement.design.machine
    out.title(f"{name} for {machine}: the design {judgement.verdict}")
    for name in judgement.changed:
        out.print(Text(f"  changed since the design was saved: {name}"))
    _print_judgement(judgement, out, None)
    out.finish()


def _goal(name: str, value: float, unit: str) -> str:
    if unit == "m^3":
        return f"{name} {1000 * value:.4g} dm^3"
    return f"{name} {value:.4g} kg" if unit == "kg" else f"{name} {money(value, unit)}"


def _print_judgement(judgement: Judgement, out: _Page, answer: Answer | None) -> None:
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
    _head(out, "ASSUMPTIONS AND GUESSES")
    _lines(out, (f"{remark.standing}: {remark.text}" for remark in judgement.assumptions))
    _head(out, "CAUTIONS")
    _lines(out, judgement.cautions)


def _print_states(judgement: Judgement, out: _Page) -> None:
    """Rules that fail, then what is unknown, grouped, then what only a guess lets pass."""
    states = [finding.state for finding in judgement.findings]
    passing, failing, unknown = (states.count(s) for s in ("passes", "fails", "unknown"))
    out.print(Text(f"  {len(states)} findings: {passing} pass, {failing} fail, {unknown} unknown"))
    for finding in judgement.findings:
        if finding.state == "fails":
            _hang(out, "FAILS  ", _finding(finding), "bold")
    groups: dict[tuple[str, str], list[str]] = {}
    for finding in judgement.findings:
        if finding.state == "unknown":
            groups.setdefault((finding.rule, finding.note), []).append(finding.subject)
    for (rule, note), subjects in groups.items():
        _hang(out, "unknown", f"{rule} ({', '.join(dict.fromkeys(subjects))}): {note}")
    for axis in judgement.axes:
        low, high = axis.winding_temperature, axis.winding_temperature_high
        if high > axis.winding_limit >= low:
            text = (
                f"winding of {axis.axis}: {heated(low)} degC, but up to {heated(high)} degC if its "
                f"iron is lossy; limit {axis.winding_limit:.0f} degC"
            )
            _hang(out, "measure", text)


def _finding(finding: Finding) -> str:
    compared = ""
    if finding.margin and finding.headroom is not None:
        compared = (
            f": {figure(finding.actual)} against {figure(finding.limit)}, headroom "
            f"{percent(finding.headroom)}, required {percent(finding.margin)}"
        )
    elif finding.actual is not None and finding.limit is not None:
        compared = f": {figure(finding.actual)} against {figure(finding.limit)}"
    elif finding.actual is not None:
        compared = f": {figure(finding.actual)}"
    return f"{finding.rule} ({finding.subject}){compared}" + (
        f"; {finding.note}" if finding.note else ""
    )


def _print_design(judgement: Judgement, out: _Page) -> None:
    _head(out, "DESIGN")
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
    out.print(_table(columns, rows, left=3, folds=(0, 1, 2)))
    for bus in judgement.design.buses:
        unit = "no supply named" if bus.supply is None else f"{bus.count} x {bus.supply}"
        out.print(Text(f"  bus: {bus.voltage:g} V from {unit}, all axes"))


def _print_headrooms(judgement: Judgement, out: _Page) -> None:
    _head(out, "HEADROOMS, AND WHERE EACH AXIS HAS LEAST")
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
    out.print(_table(columns, rows, folds=(0, 5)))
    torque = found[judgement.axes[0].axis, "torque"].margin
    peak = found["bus", "supply peak power"]
    _lines(
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


def _print_chain(judgement: Judgement, out: _Page) -> None:
    _head(out, "TORQUE FROM IDEAL TO USABLE AT THAT POINT, N*m")
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
    out.print(_table(columns, rows, folds=(0,)))
    _lines(
        out,
        [
            "Each column is what is left after that step.",
            "V share: voltage that the full current asks for, over the bus; torque falls above 1, "
            "damping above 0.8.",
        ],
    )


def _print_load(judgement: Judgement, out: _Page) -> None:
    for bus, figures in zip(judgement.design.buses, judgement.buses, strict=True):
        _head(out, f"LOAD OF THE {bus.voltage:g} V SUPPLY")
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
        out.print(_table(("", "power", "current", "loading"), rows))
        _lines(
            out,
            [
                "Rule of thumb: half the rated current per motor at 24 V, a third from 36 V. The "
                "last three rows are for comparison only and decide nothing."
            ],
        )


def _print_braking(judgement: Judgement, out: _Page) -> None:
    _head(out, "BRAKING: EMERGENCY STOP OF ALL AXES AT ONCE")
    for figures in judgement.buses:
        energy, risen = figures.returned_energy, figures.highest_voltage
        highest = "without limit" if risen is None else f"to {risen:.1f} V"
        if figures.absorbs_energy:
            text = f"{energy:.3g} J go back into the supply; the bus stays at {risen:.1f} V"
        else:
            held = f"{1e6 * figures.capacitance:.0f} uF that count"
            text = f"{energy:.3g} J into {held} lift the bus {highest}"
        out.print(Text(f"  {text}; limit {figures.voltage_limit:.1f} V"))


def _print_next(answer: Answer, out: _Page) -> None:
    _head(out, "THE NEXT HIGHER SETTING OF EACH DRIVER WOULD GIVE")
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
    out.print(_table(columns, rows, folds=(0, 5)))


def _print_order(judgement: Judgement, out: _Page) -> None:
    _head(out, "ORDER")
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
    out.print(_table(columns, rows, left=3, folds=(0, 2)))
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


def _print_proof(answer: Answer, out: _Page) -> None:
    _head(out, "HOW WE KNOW")
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
    if proof.second_route:
        rows.append(f"Second route: {proof.second_route}.")
    _lines(out, [*rows, *_exclusions(answer)])


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


def _print_none(answer: Answer, out: _Page) -> None:
    """No design: which rule turned away what, and what stands in the way."""
    if answer.verdict == "not proved":
        out.title(f"{answer.machine}: stopped before any design was known")
        return
    out.title(f"{answer.machine}: no design exists")
    _lines(out, answer.reasons)
    stuck = {reason.removeprefix("no option fits axis ") for reason in answer.reasons}
    rows = [row for row in answer.rejections if row.axis in stuck]
    if rows:
        _head(out, "OPTIONS TURNED AWAY, BY THE FIRST RULE EACH BREAKS")
        columns = ("axis", "rule", "options", "needs", "has", "headroom", "nearest miss")
        out.print(_table(columns, [_rejection(row) for row in rows], left=2, folds=(0, 6)))
    _head(out, "HOW WE KNOW")
    _lines(out, [f"Second route: {answer.proof.second_route}.", *_exclusions(answer)])


def _rejection(row: Rejection) -> tuple[str, ...]:
    headroom = "-"
    if row.needs is not None and row.best is not None and row.needs.unit != "degC":
        short = row.best.value / row.needs.value - 1.0 if row.needs.value else None
        headroom = percent(short, 2 if short is not None and abs(short) < 0.01 else 0)
        if row.margin:
            headroom += f" of {percent(row.margin)}"
    needs, best = (figure(q, 5) for q in (row.needs, row.best))
    return row.axis, row.rule, str(row.count), needs, best, headroom, row.nearest


# -- catalogue --------------------------------------------------------------------------------


def print_catalogue(catalogue: Catalogue, path: str, stream: TextIO) -> None:
    """Every part of a catalogue in one line."""
    out = _Page(stream)
    counts = f"{len(catalogue.motors)} motors, {len(catalogue.drivers)} drivers, " + (
        f"{len(catalogue.supplies)} supplies"
    )
    out.title(f"{path}: {counts}, no faults")
    _head(out, "MOTORS")
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
    _head(out, "DRIVERS")
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
    _head(out, "SUPPLIES")
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
    out.finish()


def _price(price: Money | None) -> str:
    return "-" if price is None else f"{price.amount} {price.currency or ''}".strip()


def _stock(stock: int | None) -> str:
    return "unknown" if stock is None else str(stock)
