"""A catalogue as text: every part in one line."""

from __future__ import annotations

from typing import TextIO

from .. import units
from ..domain.fields import Money
from ..domain.parts import Catalogue
from .layout import Page, head, table


def print_catalogue(catalogue: Catalogue, path: str, stream: TextIO) -> None:
    """Every part of a catalogue in one line."""
    out = Page(stream)
    counts = f"{len(catalogue.motors)} motors, {len(catalogue.drivers)} drivers, " + (
        f"{len(catalogue.supplies)} supplies"
    )
    out.title(path, f"{counts}, no faults")
    head(out, "MOTORS")
    out.print(
        table(
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
    head(out, "DRIVERS")
    out.print(
        table(
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
    head(out, "SUPPLIES")
    out.print(
        table(
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
