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
from .load import build, exists, load_problem, read_node, short
from .yaml_text import Node, near_name

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
        if self.voltage is None and not self.buses:
            raise fault("missing-key", "voltage (and supply), or buses", "state one bus")
        if self.buses and (self.voltage is not None or self.supply is not None or self.count != 1):
            key = next(k for k in ("voltage", "supply", "count") if k in self.model_fields_set)
            raise fault("contradiction", f"no {key} beside buses", "state it in the bus", (key,))
        if len(self.buses) > 1:
            remedy = "this version judges one bus for all axes"
            raise fault("not-yet", "one bus", remedy, ("buses", 1))
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
    node, _ = read_node(file, str(path), faults)
    if node is None:
        raise InputFaults(faults)
    found = build(DesignFile, node, node.plain(), (), str(path), faults)
    home = Path(os.path.realpath(file) if file.is_symlink() else file).parent
    problem = _problem_of(node, home, str(path), faults)
    if found is None or problem is None:
        raise InputFaults(faults)
    design = found.design()
    faults += _unknown_names(problem, design, node, str(path))
    if faults:
        raise InputFaults(faults)
    return problem, design, _changed(found.record, problem.sources, home)


def _problem_of(node: Node, home: Path, shown: str, faults: list[Fault]) -> Problem | None:
    """The machine a design names and its catalogues, even where the design has other faults."""
    name = node.value.get("machine")
    if name is None or not isinstance(name.value, str) or not name.value:
        return None
    machine = home / name.value
    if not exists(machine):
        near = near_name(machine)
        hint = f'there is "{near}" beside it' if near else f"nothing at {short(str(machine))}"
        found = f"machine: {short(name.value)}"
        place = node.keys["machine"]
        faults.append(Fault(shown, *place, "missing-file", found, "a machine file", hint))
        return None
    try:
        return load_problem(machine)
    except InputFaults as error:
        faults += error.faults
        return None


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
            found, expected = f"{path[-1]}: {short(name)}", f"a part among the {kind}"
            add(path, "unknown-part", found, expected, hint)
        return entry

    def unknown_axis(path: tuple[Any, ...], name: str) -> None:
        near = difflib.get_close_matches(name, asked, n=1, cutoff=0.5)
        hint = f'closest: "{near[0]}"' if near else "axes: " + ", ".join(asked)
        add(path, "unknown-axis", f"axis: {short(name)}", "an axis of the machine", hint)

    asked = [axis.axis for axis in problem.machine.axes]
    given = [choice.axis for choice in design.axes]
    for k, choice in enumerate(design.axes):
        if choice.axis not in asked:
            unknown_axis(("axes", k, "axis"), choice.axis)
        if given.index(choice.axis) != k:
            found, remedy = f"axis: {short(choice.axis)}", "drop one of them"
            add(("axes", k, "axis"), "doubled-name", found, "each axis once", remedy)
        motor = part(("axes", k, "motor"), "motors", choice.motor)
        part(("axes", k, "driver"), "drivers", choice.driver)
        if motor is not None and joining_of(choice, motor.ways) is None:
            key = "motor" if choice.joining is None else "joining"
            found = f"joining: {short(choice.joining)}" if choice.joining else "no joining"
            near = difflib.get_close_matches(choice.joining or "", motor.ways, n=1, cutoff=0.5)
            hint = f'closest: "{near[0]}"' if near else f"say how {motor.part} is wired"
            hint = "leave joining out" if len(motor.ways) == 1 else hint
            add(("axes", k, key), "unknown-joining", found, " or ".join(motor.ways), hint)
    for missing in [name for name in asked if name not in given]:
        found, expected = f'no choice for axis "{missing}"', "every axis of the machine"
        add(("axes",), "missing-axis", found, expected, "add motor, driver and current for it")
    for k, bus in enumerate(design.buses):
        listed = node is not None and "buses" in node.value
        path: tuple[Any, ...] = ("buses", k) if listed else ()
        if bus.supply is not None:
            part((*path, "supply"), "supplies", bus.supply)
        for n, name in enumerate(bus.axes):
            if name not in asked:
                unknown_axis((*path, "axes", n), name)
        if bus.axes and set(bus.axes) < set(asked):
            remedy = "leave axes out to mean all"
            add((*path, "axes"), "not-yet", "axes off the bus", "all axes on the one bus", remedy)
    return faults


def _changed(record: Any, sources: tuple[Source, ...], folder: Path) -> tuple[str, ...]:
    """Names of the inputs that are not what they were when the design was saved."""
    if not isinstance(record, dict) or not isinstance(record.get("inputs"), list):
        return ()
    before = {
        os.path.realpath(folder / entry["file"]): (entry["file"], entry.get("sha256"))
        for entry in record["inputs"]
        if isinstance(entry, dict) and isinstance(entry.get("file"), str)
        if "\0" not in entry["file"]
    }
    now = {os.path.realpath(source.file): source for source in sources}
    changed = [s.file for key, s in now.items() if before.get(key, ("", ""))[1] != s.sha256]
    return (*changed, *(name for key, (name, _) in before.items() if key not in now))


def save_design(answer: Answer, path: str | Path, record: dict[str, Any]) -> None:
    """Write an answer's design with its record; the old file stays until the new one is whole.

    Raises
    ------
    InputFaults
        If there is no design, the place cannot be written, or something else stands there.
    """
    if answer.design is None:
        raise _unwritable(path, "no-design", "no design found", "a design")
    file = Path(os.path.realpath(path))
    try:
        if file.is_dir():
            raise _unwritable(path, "folder", "a folder", "a file name", "name a file in it")
        if file.exists() and not _is_ours(file):
            found, expected = (
                "a file that selector did not write",
                "a new name or an earlier design",
            )
            raise _unwritable(path, "occupied", found, expected, "choose another name")
        _write_whole(file, FIRST_LINE + design_text(answer, file.parent, record))
    except (OSError, ValueError) as error:
        found = getattr(error, "strerror", None) or str(error)
        expected, remedy = "a place that can be written", "check folder, permissions and space"
        raise _unwritable(path, "unwritable", found, expected, remedy) from None


def _unwritable(path: str | Path, *fields: str) -> InputFaults:
    return InputFaults([Fault(str(path), 0, 0, *fields)])


def design_text(answer: Answer, folder: Path, record: dict[str, Any]) -> str:
    """The YAML of a design, with paths relative to the folder it is written to."""
    assert answer.design is not None

    def relative(name: str) -> str:
        return Path(os.path.relpath(os.path.realpath(name), folder)).as_posix()

    assert answer.judgement is not None
    figures = {axis.axis: axis for axis in answer.judgement.axes}
    axes = [_axis(choice, figures[choice.axis].current_basis) for choice in answer.design.axes]
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


def _axis(choice: AxisChoice, basis: str) -> dict[str, Any]:
    """One axis as it is written: its setting as the driver's own sheet gives it."""
    data = choice.model_dump(exclude_none=True)
    peak = data.pop("current_peak")
    set_to = {"current_rms": peak / 2**0.5} if basis == "rms" else {"current_peak": peak}
    written: dict[str, Any] = {}
    for key, value in data.items():
        if key == "rest_current_peak":
            written |= {name: f"{amperes:.9g} A" for name, amperes in set_to.items()}
            value = f"{value:.9g} A"
        written[key] = value
    return written


def _is_ours(file: Path) -> bool:
    if not file.is_file():
        return False
    with file.open("rb") as stream:
        return stream.read(len(FIRST_LINE.encode())) == FIRST_LINE.encode()


def _write_whole(file: Path, text: str) -> None:
    handle, name = tempfile.mkstemp(prefix=f".{file.name[:100]}.", suffix=".part", dir=file.parent)
    try:
        with os.fdopen(handle, "w", encoding="utf-8") as stream:
            stream.write(text)
            stream.flush()
            os.fsync(stream.fileno())
        mode = file.stat().st_mode & 0o777 if file.exists() else 0o666 & ~_umask()
        Path(name).chmod(mode)
        Path(name).replace(file)
    except BaseException:
        with contextlib.suppress(OSError):
            Path(name).unlink()
        raise


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
