"""A saved or hand-written design: read with every fault, written whole or not at all."""

from __future__ import annotations

import contextlib
import difflib
import os
import tempfile
from pathlib import Path
from typing import Any

import yaml
from pydantic import model_validator

from ..domain.fields import Count, Record, Text, Voltage, fault
from ..domain.machine import Problem, Source
from ..domain.results import Answer, AxisChoice, BusChoice, Design, joining_of
from ..errors import Fault, InputFaults
from .load import load_problem, read_node, read_record
from .yaml_text import Node

FIRST_LINE = "# A design by selector. `selector judge` reads machine, axes and buses.\n"


class DesignFile(Record):
    """What a design file may hold; one bus may be written without a list."""

    machine: Text
    axes: tuple[AxisChoice, ...]
    buses: tuple[BusChoice, ...] = ()
    voltage: Voltage | None = None
    supply: Text | None = None
    count: Count = 1
    record: Any = None

    @model_validator(mode="after")
    def _one_bus(self) -> DesignFile:
        if (self.voltage is None) == (not self.buses):
            raise fault("missing-key", "either voltage (and supply) or buses", "state one bus")
        if len(self.buses) > 1:
            raise fault("not-yet", "one bus", "this version judges one bus for all axes")
        return self

    def design(self) -> Design:
        """The choices in it."""
        single = BusChoice(voltage=self.voltage or 1.0, supply=self.supply, count=self.count)
        return Design(machine=self.machine, axes=self.axes, buses=self.buses or (single,))


def load_design(path: str | Path) -> tuple[Problem, Design, tuple[str, ...]]:
    """Read a design and the machine it names.

    Returns the problem, the design, and what changed since it was saved (file names).

    Raises
    ------
    InputFaults
        With every fault of the design, its machine and its catalogues.
    """
    file, faults = Path(path), list[Fault]()
    found, _ = read_record(file, str(path), DesignFile, faults)
    if found is None:
        raise InputFaults(faults)
    problem = load_problem(file.parent / found.machine)
    design = found.design()
    node, _ = read_node(file, str(path), faults)
    faults += _unknown_names(problem, design, node, str(path))
    if faults or node is None:
        raise InputFaults(faults)
    return problem, design, _changed(found.record, problem.sources, file.parent)


def check_design(problem: Problem, design: Design) -> None:
    """Raise InputFaults if a design made in Python names what the problem does not have."""
    faults = _unknown_names(problem, design, None, "design")
    if faults:
        raise InputFaults(faults)


def _unknown_names(problem: Problem, design: Design, node: Node | None, file: str) -> list[Fault]:
    faults: list[Fault] = []

    def add(path: tuple[Any, ...], name: str, found: str, expected: str, remedy: str = "") -> None:
        place = (0, 0) if node is None else node.at(path)[1]
        faults.append(Fault(file, *place, name, found, expected, remedy))

    def part(path: tuple[Any, ...], kind: str, name: str) -> Any:
        entry = problem.catalogue.find(kind, name)
        if entry is None:
            known = [p.part for p in getattr(problem.catalogue, kind)]
            near = difflib.get_close_matches(name, known, n=1, cutoff=0.5)
            hint = f'closest: "{near[0]}"' if near else f"the catalogues list {len(known)}"
            add(path, "unknown-part", f"{path[-1]}: {name}", f"a part among the {kind}", hint)
        return entry

    asked = [axis.axis for axis in problem.machine.axes]
    given = [choice.axis for choice in design.axes]
    for k, choice in enumerate(design.axes):
        if choice.axis not in asked:
            near = difflib.get_close_matches(choice.axis, asked, n=1, cutoff=0.5)
            hint = f'closest: "{near[0]}"' if near else "axes: " + ", ".join(asked)
            add(
                ("axes", k, "axis"),
                "unknown-axis",
                f"axis: {choice.axis}",
                "an axis of the machine",
                hint,
            )
        if given.index(choice.axis) != k:
            add(("axes", k, "axis"), "doubled-name", f"axis: {choice.axis}", "each axis once")
        motor = part(("axes", k, "motor"), "motors", choice.motor)
        part(("axes", k, "driver"), "drivers", choice.driver)
        if motor is not None and joining_of(choice, motor.ways) is None:
            add(
                ("axes", k, "motor" if choice.joining is None else "joining"),
                "unknown-joining",
                f"joining: {choice.joining or 'not stated'}",
                " or ".join(motor.ways),
                f"say how {motor.part} is wired",
            )
    for missing in [name for name in asked if name not in given]:
        add(
            ("axes",),
            "missing-axis",
            f'no choice for axis "{missing}"',
            "every axis of the machine",
        )
    for k, bus in enumerate(design.buses):
        listed = node is not None and "buses" in node.value
        path: tuple[Any, ...] = ("buses", k) if listed else ()
        if bus.supply is not None:
            part((*path, "supply"), "supplies", bus.supply)
        for n, name in enumerate(bus.axes):
            if name not in asked:
                add((*path, "axes", n), "unknown-axis", name, "an axis of the machine")
        if bus.axes and set(bus.axes) < set(asked):
            add((*path, "axes"), "not-yet", "axes off the bus", "all axes on the one bus")
    return faults


def _changed(record: Any, sources: tuple[Source, ...], folder: Path) -> tuple[str, ...]:
    """Names of the inputs that are not what they were when the design was saved."""
    if not isinstance(record, dict) or not isinstance(record.get("inputs"), list):
        return ()
    before = {
        os.path.normpath(folder / entry["file"]): entry.get("sha256")
        for entry in record["inputs"]
        if isinstance(entry, dict) and "file" in entry
    }
    now = {os.path.normpath(source.file): source.sha256 for source in sources}
    changed = [name for name, digest in now.items() if before.get(name) != digest]
    return (*changed, *(name for name in before if name not in now))


def save_design(answer: Answer, path: str | Path, record: dict[str, Any]) -> None:
    """Write an answer's design with its record; the old file stays until the new one is whole.

    Raises
    ------
    InputFaults
        If there is no design, the place cannot be written, or something else stands there.
    """
    file = Path(path)
    if answer.design is None:
        raise InputFaults([Fault(str(path), 0, 0, "no-design", "no design found", "a design")])
    if file.exists() and not _is_ours(file):
        raise InputFaults(
            [
                Fault(
                    str(path),
                    0,
                    0,
                    "occupied",
                    "a file that selector did not write",
                    "a new name or an earlier design",
                    "choose another name",
                )
            ]
        )
    _write_whole(file, FIRST_LINE + design_text(answer, file.parent, record))


def design_text(answer: Answer, folder: Path, record: dict[str, Any]) -> str:
    """The YAML of a design, with paths relative to the folder it is written to."""
    assert answer.design is not None

    def relative(name: str) -> str:
        return Path(os.path.relpath(name, folder)).as_posix()

    axes = [
        {
            key: f"{value:.12g} A" if key in ("current_peak", "rest_current_peak") else value
            for key, value in choice.model_dump(exclude_none=True).items()
        }
        for choice in answer.design.axes
    ]
    buses = [
        bus.model_dump(exclude_none=True)
        | {"voltage": f"{bus.voltage:.12g} V", "axes": list(bus.axes)}
        for bus in answer.design.buses
    ]
    inputs = [{"file": relative(s.file), "sha256": s.sha256} for s in answer.sources]
    data = {
        "machine": relative(answer.machine),
        "axes": axes,
        "buses": buses,
        "record": {"version": answer.version, "inputs": inputs, **record},
    }
    return str(yaml.safe_dump(data, sort_keys=False, allow_unicode=True, width=100))


def _is_ours(file: Path) -> bool:
    try:
        with file.open("rb") as stream:
            return stream.readline() == FIRST_LINE.encode()
    except OSError:
        return False


def _write_whole(file: Path, text: str) -> None:
    try:
        handle, name = tempfile.mkstemp(prefix=f".{file.name}.", dir=file.parent)
    except OSError as error:
        raise InputFaults(
            [
                Fault(
                    str(file),
                    0,
                    0,
                    "unwritable",
                    error.strerror or str(error),
                    "a folder that can be written",
                )
            ]
        ) from None
    try:
        with os.fdopen(handle, "w", encoding="utf-8") as stream:
            stream.write(text)
            stream.flush()
            os.fsync(stream.fileno())
        mode = file.stat().st_mode & 0o777 if file.exists() else 0o666 & ~_umask()
        Path(name).chmod(mode)
        Path(name).replace(file)
    except BaseException as error:
        with contextlib.suppress(OSError):
            Path(name).unlink()
        if isinstance(error, OSError):
            raise InputFaults(
                [
                    Fault(
                        str(file),
                        0,
                        0,
                        "unwritable",
                        error.strerror or str(error),
                        "a place that can be written",
                    )
                ]
            ) from None
        raise


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
