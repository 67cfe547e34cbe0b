"""Chooses motors, drivers, settings, bus voltage and supply for machines with stepping motors.

>>> import selector
>>> problem = selector.load_problem("examples/seed-dispenser.yaml")  # doctest: +SKIP
>>> answer = selector.pick(problem)  # doctest: +SKIP
>>> answer.to_frame()  # doctest: +SKIP
"""

from __future__ import annotations

from typing import Any

__version__ = "0.1.0"

# Loaded when first asked for, so that the command line answers at once.
_HOMES = {
    "load_problem": "workflow",
    "load_catalogue": "workflow",
    "pick": "workflow",
    "judge_design": "workflow",
    "judge_file": "workflow",
    "load_design": "inputs.design_file",
    "Catalogue": "domain.parts",
    "Motor": "domain.parts",
    "Driver": "domain.parts",
    "Supply": "domain.parts",
    "Machine": "domain.machine",
    "Axis": "domain.machine",
    "Point": "domain.machine",
    "Problem": "domain.machine",
    "Design": "domain.results",
    "AxisChoice": "domain.results",
    "BusChoice": "domain.results",
    "Answer": "domain.results",
    "Judgement": "domain.results",
    "Finding": "domain.results",
    "InputFaults": "errors",
    "SelectorError": "errors",
}

__all__ = ["__version__", *_HOMES]


def __getattr__(name: str) -> Any:
    from importlib import import_module

    if name in _HOMES:
        return getattr(import_module(f"{__name__}.{_HOMES[name]}"), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
