"""What a design means: the bus with its axes, and every figure the bus rules compare."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TypeVar

from ..domain.machine import Machine, Problem
from ..domain.parts import SUPPLY_TOLERANCE, Part, Supply
from ..domain.results import Design, joining_of
from ..physics import braking, supply
from .cases import AxisCase

T = TypeVar("T")


@dataclass(frozen=True)
class BusCase:
    """The bus of a design with its axes."""

    problem: Problem
    design: Design
    axes: tuple[AxisCase, ...]
    supply: Supply | None
    count: int
    voltage: float

    @classmethod
    def of(cls, problem: Problem, design: Design, known: BusCase | None = None) -> BusCase:
        """The case of a design; KeyError names what the problem does not have.

        Axes that stand in ``known`` with the same choice and voltage are taken from it, with what
        was computed of them.
        """
        machine, catalogue = problem.machine, problem.catalogue
        bus = design.buses[0]
        unit = None
        if bus.supply is not None:
            unit = _found(catalogue.find("supplies", bus.supply), bus.supply)
        spread = SUPPLY_TOLERANCE if unit is None else unit.spread
        choices = {choice.axis: choice for choice in design.axes}
        cases: list[AxisCase] = []
        for axis in machine.axes:
            choice = _found(choices.get(axis.axis), axis.axis)
            motor = _found(catalogue.find("motors", choice.motor), choice.motor)
            driver = _found(catalogue.find("drivers", choice.driver), choice.driver)
            joining = _found(joining_of(choice, motor.ways), f"joining of {choice.axis}")
            case = AxisCase(machine, axis, choice, motor, driver, joining, bus.voltage, spread)
            before = known.axes[len(cases)] if known is not None else case
            cases.append(before if before == case else case)
        return cls(problem, design, tuple(cases), unit, bus.count, bus.voltage)

    @property
    def machine(self) -> Machine:
        """[-]"""
        return self.problem.machine

    @property
    def spread(self) -> float:
        """Half-width of the supply's voltage as a share."""
        return SUPPLY_TOLERANCE if self.supply is None else self.supply.spread

    @property
    def absorbs_energy(self) -> bool:
        """Whether the supply takes energy back."""
        return self.supply is not None and self.supply.absorbs_energy

    @property
    def trip(self) -> float | None:
        """Voltage at which the supply switches itself off, if stated. [V]"""
        return None if self.supply is None else self.supply.overvoltage_trip

    @property
    def lowest(self) -> float:
        """Bus voltage with the supply at its low end; cables are not counted. [V]"""
        return self.voltage * (1.0 - self.spread)

    @property
    def highest(self) -> float:
        """Bus voltage with the supply at its high end. [V]"""
        return self.voltage * (1.0 + self.spread)

    @property
    def derated_share(self) -> float:
        """Share of the supply's rating left at the ambient; 0 without a supply."""
        if self.supply is None:
            return 0.0
        steps = [(step.at, step.share) for step in self.supply.derating]
        return supply.derated_share(self.machine.ambient, steps, self.supply.max_ambient)

    @property
    def available_power(self) -> float | None:
        """Continuous power at the set voltage, derated, of all units; None without any. [W]"""
        unit = self.supply
        if unit is None:
            return None
        return float(
            supply.supply_power(
                self.voltage, unit.power, unit.current, self.derated_share, self.count
            )
        )

    @cached_property
    def mean_power(self) -> float:
        """Of the axes by their duty, and the other loads. [W]"""
        return sum(case.mean_power for case in self.axes) + self.machine.fixed_power

    @cached_property
    def peak_power(self) -> float:
        """Of the worst stage: here every axis at its peak at once. [W]"""
        return (
            max(
                sum(case.peak_power for case in self.axes if case.axis.axis in stage.axes)
                for stage in self.machine.stages
            )
            + self.machine.fixed_power
        )

    @cached_property
    def returned_energy(self) -> float:
        """Of an emergency stop of all axes at once. [J]"""
        return sum(case.returned_energy for case in self.axes)

    @property
    def capacitance(self) -> float:
        """That can be counted on: stated capacitors less 20 %. [F]"""
        held = sum(case.driver.bus_capacitance or 0.0 for case in self.axes)
        if self.supply is not None:
            held += self.count * (self.supply.output_capacitance or 0.0)
        return braking.CAPACITOR_SHARE * (held + self.machine.bus_capacitance)

    @property
    def risen_voltage(self) -> float:
        """Highest moment: after an emergency stop; infinite without any capacitor. [V]"""
        if self.absorbs_energy:
            return self.highest
        return float(braking.risen_voltage(self.highest, self.returned_energy, self.capacitance))

    @property
    def voltage_limit(self) -> float:
        """What the highest moment must stay under for the drivers. [V]"""
        use = self.machine.margins.voltage_use
        return min(use * case.driver.supply_voltage.max for case in self.axes)

    @cached_property
    def parts(self) -> dict[str, tuple[str, Part, int]]:
        """Each part used, with its kind and number in one machine, in order of use."""
        used: dict[str, tuple[str, Part, int]] = {}
        listed: list[tuple[str, Part, int]] = []
        for case in self.axes:
            listed += [("motor", case.motor, 1), ("driver", case.driver, 1)]
        if self.supply is not None:
            listed.append(("supply", self.supply, self.count))
        for kind, part, number in sorted(
            listed, key=lambda row: ("motor", "driver", "supply").index(row[0])
        ):
            before = used.get(part.part, (kind, part, 0))[2]
            used[part.part] = (kind, part, before + number)
        return used


def _found(value: T | None, name: str) -> T:
    if value is None:
        raise KeyError(name)
    return value
