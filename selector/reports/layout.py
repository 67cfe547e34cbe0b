"""What every text report is made of: a page of 100 columns, tables, lists and figures."""

from __future__ import annotations

import io
import math
import os
from collections.abc import Iterable, Sequence
from typing import TextIO

from rich.cells import cell_len
from rich.console import Console
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from ..domain.results import Quantity

WIDTH = 100
RPM = 30 / math.pi


class Page:
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

    def title(self, file: str, said: str) -> None:
        """The first line; what is said of a file with a long name stands below it, whole."""
        together = f"{file}: {said}"
        for line in [together] if cell_len(together) <= WIDTH else [f"{file}:", said]:
            self.print(Text(line, style="bold"))

    def finish(self) -> None:
        """Write it all."""
        lines = self.text.getvalue().splitlines()
        self.stream.write("\n".join(line.rstrip() for line in lines) + "\n")


def head(out: Page, text: str) -> None:
    out.print()
    out.print(Text(text, style="bold"))


def table(
    columns: Sequence[str],
    rows: Iterable[Sequence[str]],
    left: int = 1,
    folds: Sequence[int] = (0,),
) -> Padding:
    """Columns of text; the first ``left`` flush left, the others right; only ``folds`` may wrap."""
    grid = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="dim")
    for number, name in enumerate(columns):
        grid.add_column(
            name,
            justify="left" if number < left or number in folds else "right",
            overflow="fold",
            no_wrap=number not in folds,
        )
    for row in rows:
        grid.add_row(*(Text(cell) for cell in row))
    return Padding(grid, (0, 0, 0, 2))


def hang(out: Page, first: str, text: str, style: str = "") -> None:
    """A word in a narrow column, and text beside it that wraps under itself."""
    grid = Table.grid(padding=(0, 1, 0, 0))
    grid.add_column(width=len(first) + 2, justify="right", no_wrap=True)
    grid.add_column(overflow="fold")
    grid.add_row(Text(first, style=style), Text(text, style=style))
    out.print(grid)


def lines(out: Page, rows: Iterable[str]) -> None:
    for row in rows:
        hang(out, "-", row)


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
