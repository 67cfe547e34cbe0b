"""The choice as pure data: groups of options, one to be taken from each, and integer rows.

Knows nothing of machines or solvers, so that published instances, two solvers and an exhaustive
search can all be given the same model.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field


@dataclass(frozen=True)
class Row:
    """``least <= sum(coefficient * taken) <= most``; ``about`` says what it stands for."""

    terms: Mapping[int, int]
    most: int | None
    least: int | None = None
    about: str = ""


@dataclass
class Model:
    """Options are numbered 0, 1, ...; each belongs to one group."""

    groups: list[list[int]] = field(default_factory=list)
    rows: list[Row] = field(default_factory=list)
    size: int = 0

    def add_group(self, size: int) -> list[int]:
        """A new group of ``size`` options; returns their numbers."""
        numbers = list(range(self.size, self.size + size))
        self.size += size
        self.groups.append(numbers)
        return numbers

    def add_row(
        self, terms: Mapping[int, int], most: int | None, least: int | None = None, about: str = ""
    ) -> None:
        """A row; terms of coefficient 0 are dropped."""
        self.rows.append(Row({k: v for k, v in terms.items() if v}, most, least, about))

    def without(self, about: str) -> Model:
        """The same model with the rows of that name left out."""
        return Model(self.groups, [row for row in self.rows if row.about != about], self.size)


@dataclass(frozen=True)
class Outcome:
    """What a solver found: the options taken (None if there are none), the value and the bound.

    ``status`` is ``"optimal"``, ``"infeasible"``, ``"feasible"`` (stopped with a solution) or
    ``"unknown"`` (stopped without).
    """

    status: str
    taken: tuple[int, ...] | None = None
    value: int | None = None
    bound: int | None = None
