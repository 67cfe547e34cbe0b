"""YAML text to plain data that knows where each key and value stands; no meaning.

Built on libyaml's events, because plain loading turns ``no`` into False and ``12:30`` into 750,
lets the last of two equal keys win, and forgets the places. Here every scalar stays text.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import yaml

from ..errors import Fault

LARGEST_FILE = 64 * 1024 * 1024
DEEPEST = 20


@dataclass
class Node:
    """A value with its place: ``value`` is text, a list of nodes, or a dict of key to node."""

    value: Any
    line: int
    column: int
    keys: dict[str, tuple[int, int]] = field(default_factory=dict)

    def plain(self) -> Any:
        """The value as text, lists and dicts."""
        if isinstance(self.value, dict):
            return {key: node.plain() for key, node in self.value.items()}
        if isinstance(self.value, list):
            return [node.plain() for node in self.value]
        return self.value

    def at(self, path: tuple[Any, ...]) -> tuple[Node, tuple[int, int]]:
        """The deepest node along a path, and the place of the key or item that leads to it."""
        node, place = self, (self.line, self.column)
        for step in path:
            if isinstance(node.value, dict) and step in node.value:
                place, node = node.keys[step], node.value[step]
            elif isinstance(node.value, list) and isinstance(step, int) and step < len(node.value):
                node = node.value[step]
                place = (node.line, node.column)
        return node, place


class _Refused(Exception):
    """Ends the reading of a file whose structure cannot be followed."""


class _Reader:
    def __init__(self, file: str, text: str) -> None:
        self.file, self.faults = file, list[Fault]()
        self.events: Iterator[Any] = iter(yaml.parse(text, Loader=yaml.CLoader))

    def fault(self, mark: Any, name: str, found: str, expected: str, remedy: str = "") -> None:
        place = (mark.line + 1, mark.column + 1)
        self.faults.append(Fault(self.file, *place, name, found, expected, remedy))

    def document(self) -> Node | None:
        next(self.events)
        event = next(self.events)
        if isinstance(event, yaml.StreamEndEvent):
            return None
        node = self.node(next(self.events), 0)
        next(self.events)
        event = next(self.events)
        if not isinstance(event, yaml.StreamEndEvent):
            self.fault(
                event.start_mark,
                "second-document",
                "---",
                "one document in a file",
                "put the second one into a file of its own",
            )
        return node

    def node(self, event: Any, depth: int) -> Node:
        mark = event.start_mark
        if depth > DEEPEST:
            self.fault(mark, "too-deep", "lists within lists", f"at most {DEEPEST} levels")
            raise _Refused
        self.refuse_marks_of_reuse(event)
        line, column = mark.line + 1, mark.column + 1
        if isinstance(event, yaml.AliasEvent):
            return Node("", line, column)
        if isinstance(event, yaml.ScalarEvent):
            if event.value == "" and event.style is None:
                self.fault(mark, "empty-value", "nothing", "a value", "fill it in or drop the key")
            return Node(event.value, line, column)
        if isinstance(event, yaml.SequenceStartEvent):
            items = []
            while not isinstance(event := next(self.events), yaml.SequenceEndEvent):
                items.append(self.node(event, depth + 1))
            return Node(items, line, column)
        return self.mapping(line, column, depth)

    def mapping(self, line: int, column: int, depth: int) -> Node:
        values: dict[str, Node] = {}
        keys: dict[str, tuple[int, int]] = {}
        while not isinstance(event := next(self.events), yaml.MappingEndEvent):
            mark = event.start_mark
            key = self.node(event, depth + 1).value
            value = self.node(next(self.events), depth + 1)
            if not isinstance(key, str):
                self.fault(mark, "odd-key", "a list as key", "a word as key")
            elif key in values:
                first = keys[key][0]
                self.fault(
                    mark,
                    "doubled-key",
                    f"{key}: again",
                    f'"{key}" once',
                    f"it stands in line {first} already; drop one",
                )
            else:
                values[key], keys[key] = value, (mark.line + 1, mark.column + 1)
        return Node(values, line, column, keys)

    def refuse_marks_of_reuse(self, event: Any) -> None:
        mark = event.start_mark
        if isinstance(event, yaml.AliasEvent):
            self.fault(mark, "alias", f"*{event.anchor}", "a value written out", "repeat it here")
        elif event.anchor is not None:
            self.fault(mark, "anchor", f"&{event.anchor}", "no anchors", "remove it")
        if getattr(event, "tag", None) not in (None, "!"):
            self.fault(mark, "tag", str(event.tag), "no tags", "remove it")


def parse(text: str, file: str) -> tuple[Node | None, list[Fault]]:
    """Read YAML text; returns the data with places, if any, and the faults of form."""
    reader = _Reader(file, text)
    try:
        node = reader.document()
    except _Refused:
        return None, reader.faults
    except yaml.YAMLError as error:
        mark = getattr(error, "problem_mark", None)
        line, column = (mark.line + 1, mark.column + 1) if mark else (0, 0)
        problem = str(getattr(error, "problem", None) or getattr(error, "reason", error))
        reader.faults.append(
            Fault(
                file,
                line,
                column,
                "broken-yaml",
                problem,
                "YAML that can be read",
                "check indents, quotes and colons near this place",
            )
        )
        return None, reader.faults
    if node is None:
        reader.faults.append(Fault(file, 0, 0, "empty-file", "nothing in it", "keys and values"))
    return node, reader.faults


def read_text(path: Path, shown: str) -> tuple[bytes, str, list[Fault]]:
    """Bytes and text of a file, or the fault that it is missing, a folder, huge or binary."""

    def failed(
        name: str, found: str, expected: str, remedy: str = ""
    ) -> tuple[bytes, str, list[Fault]]:
        return b"", "", [Fault(shown, 0, 0, name, found, expected, remedy)]

    try:
        if path.is_dir():
            return failed("folder", "a folder", "a file")
        if not path.exists():
            near = _near(path)
            hint = f'there is "{near}" beside it' if near else "check name and folder"
            return failed("missing-file", "no such file", "a file", hint)
        if not path.is_file():
            return failed("no-file", "a device or pipe", "a file")
        if path.stat().st_size > LARGEST_FILE:
            limit = f"at most {LARGEST_FILE // 2**20} MiB"
            return failed("huge-file", f"{path.stat().st_size} bytes", limit)
        data = path.read_bytes()
    except OSError as error:
        return failed("unreadable", error.strerror or str(error), "a file that can be read")
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        found = f"byte 0x{data[error.start]:02x} in line {line}"
        return failed("no-text", found, "UTF-8 text", "save the file as UTF-8")
    if "\0" in text:
        return failed("no-text", "a zero byte", "UTF-8 text", "this is a binary file")
    return data, text, []


def _near(path: Path) -> str | None:
    import difflib

    try:
        names = [entry.name for entry in path.parent.iterdir()]
    except OSError:
        return None
    return next(iter(difflib.get_close_matches(path.name, names, n=1, cutoff=0.6)), None)
