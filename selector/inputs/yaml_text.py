"""YAML text to plain data that knows where each key and value stands; no meaning.

Built on libyaml's events, because plain loading turns ``no`` into False and ``12:30`` into 750,
lets the last of two equal keys win, and forgets the places. Here every scalar stays text.
"""

from __future__ import annotations

import codecs
import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import yaml

from ..errors import Fault

LARGEST_FILE = 64 * 1024 * 1024
DEEPEST = 20
TOO_DEEP = "lists or keys within each other"
# What YAML bars from a file unless it is escaped, and line ends that no editor counts.
_BARRED = re.compile(
    "[^\t\n\r\x20-\x7e\xa0-\u2027\u202a-\ud7ff\ue000-\ufefe\uff00-\ufffd\U00010000-\U0010ffff]"
)


@dataclass
class Node:
    """A value with its place: ``value`` is text, a list of nodes, or a dict of key to node.

    ``spoiled`` marks a value whose fault is known already, so that nobody reports it again.
    """

    value: Any
    line: int
    column: int
    keys: dict[str, tuple[int, int]] = field(default_factory=dict)
    spoiled: bool = False

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
            self.fault(mark, "too-deep", TOO_DEEP, f"at most {DEEPEST} levels")
            raise _Refused
        self.refuse_marks_of_reuse(event)
        line, column = mark.line + 1, mark.column + 1
        if isinstance(event, yaml.AliasEvent):
            return Node("", line, column, spoiled=True)
        if isinstance(event, yaml.ScalarEvent):
            empty = event.value == "" and not event.style
            return Node(event.value, line, column, spoiled=empty)
        if isinstance(event, yaml.SequenceStartEvent):
            items = []
            while not isinstance(event := next(self.events), yaml.SequenceEndEvent):
                items.append(self.node(event, depth + 1))
                self.refuse_emptiness(event, event.start_mark, "-")
            return Node(items, line, column)
        return self.mapping(line, column, depth)

    def mapping(self, line: int, column: int, depth: int) -> Node:
        values: dict[str, Node] = {}
        keys: dict[str, tuple[int, int]] = {}
        while not isinstance(event := next(self.events), yaml.MappingEndEvent):
            mark, plain = event.start_mark, not getattr(event, "style", "none")
            key = self.node(event, depth + 1)
            following = next(self.events)
            value = self.node(following, depth + 1)
            if not isinstance(key.value, str):
                self.fault(mark, "odd-key", "a list as key", "a word as key")
                continue
            self.refuse_emptiness(event, mark, ":")
            self.refuse_emptiness(following, mark, f"{key.value}:")
            name = key.value
            if name == "<<" and plain:
                self.fault(mark, "merge-key", "<<", "keys written out", "repeat them here")
            elif name in values:
                first = keys[name][0]
                remedy = f"it stands in line {first} already; drop one"
                self.fault(mark, "doubled-key", f'"{name}" a second time', "each key once", remedy)
            elif not key.spoiled:
                values[name], keys[name] = value, (mark.line + 1, mark.column + 1)
        return Node(values, line, column, keys)

    def refuse_emptiness(self, event: Any, mark: Any, found: str) -> None:
        if isinstance(event, yaml.ScalarEvent) and event.value == "" and not event.style:
            found = f"{found} without a value" if found != ":" else "no key before the colon"
            remedy = "fill it in or drop the line"
            if re.match(r"\d", found):  # the tail of a decimal comma inside { }
                remedy = "write the decimal sign as a point"
            self.fault(mark, "empty-value", found, "key and value", remedy)

    def refuse_marks_of_reuse(self, event: Any) -> None:
        mark = event.start_mark
        if isinstance(event, yaml.AliasEvent):
            self.fault(mark, "alias", f"*{event.anchor}", "a value written out", "repeat it here")
        elif event.anchor is not None:
            self.fault(mark, "anchor", f"&{event.anchor}", "no anchor", "remove it")
        if getattr(event, "tag", None) not in (None, "!"):
            self.fault(mark, "tag", str(event.tag), "no tag", "remove it, the key says the kind")


def parse(text: str, file: str) -> tuple[Node | None, list[Fault]]:
    """Read YAML text; returns the data with places, if any, and the faults of form."""
    if (barred := _BARRED.search(text)) is not None:
        found = f"the control character U+{ord(barred.group()):04X}"
        place = _place(text, barred.start())
        return None, [Fault(file, *place, "control-character", found, "text", "remove it")]
    reader = _Reader(file, text)
    try:
        node = reader.document()
    except _Refused:
        return None, reader.faults
    except yaml.YAMLError as error:
        reader.faults.append(_broken(error, text, file))
        return None, reader.faults
    if node is None:
        reader.faults.append(Fault(file, 0, 0, "empty-file", "nothing in it", "keys and values"))
    return node, reader.faults


def _place(text: str, position: int) -> tuple[int, int]:
    """Line and column of a position in a text."""
    before = text[:position]
    return before.count("\n") + 1, position - before.rfind("\n")


def _broken(error: yaml.YAMLError, text: str, file: str) -> Fault:
    """What stopped the parser: its own words, clearer ones for the usual slips."""
    mark = getattr(error, "problem_mark", None)
    found = str(getattr(error, "problem", None) or getattr(error, "reason", error))
    expected, remedy = "YAML that can be read", "check indents, quotes and colons near this place"
    if "quoted scalar" in str(getattr(error, "context", None)) and "end of" in found:
        mark, found = getattr(error, "context_mark", mark), "a quote that is never closed"
        remedy = "close it"
    line, column = (mark.line + 1, mark.column + 1) if mark else (0, 0)
    if "nesting depth" in found:
        return Fault(file, line, column, "too-deep", TOO_DEEP, f"at most {DEEPEST} levels")
    lines = re.split("\r\n|[\n\r]", text)
    if mark and mark.line < len(lines) and re.match(" *\t", lines[mark.line]):
        found, expected, remedy = "a tab before the text", "spaces", "indent with spaces"
    return Fault(file, line, column, "broken-yaml", found, expected, remedy)


def read_text(path: Path, shown: str) -> tuple[bytes, str, list[Fault]]:
    """Bytes and text of a file, or the fault that it is missing, a folder, huge or binary."""

    def failed(
        name: str, found: str, expected: str, remedy: str = "", place: tuple[int, int] = (0, 0)
    ) -> tuple[bytes, str, list[Fault]]:
        return b"", "", [Fault(shown, *place, name, found, expected, remedy)]

    limit = f"at most {LARGEST_FILE // 2**20} MiB"
    try:
        if path.is_dir():
            return failed("folder", "a folder", "a file", "name a file in it")
        if not path.exists():
            near = near_name(path)
            hint = f'there is "{near}" beside it' if near else "check name and folder"
            return failed("missing-file", "no such file", "a file", hint)
        if not path.is_file():
            return failed("no-file", "a device or pipe", "a file", "save the text in a file")
        if path.stat().st_size > LARGEST_FILE:
            return failed("huge-file", f"{path.stat().st_size} bytes", limit)
        with path.open("rb") as stream:
            data = stream.read(LARGEST_FILE + 1)
    except (OSError, ValueError) as error:
        found = getattr(error, "strerror", None) or str(error)
        return failed("unreadable", found, "a file that can be read", "check name and permissions")
    if len(data) > LARGEST_FILE:
        return failed("huge-file", f"more than {LARGEST_FILE} bytes", limit)
    try:
        text = data.removeprefix(codecs.BOM_UTF8).decode("utf-8")
    except UnicodeDecodeError as error:
        readable = error.object[: error.start].decode("utf-8")
        place, found = (
            _place(readable, len(readable)),
            f"the byte 0x{error.object[error.start]:02x}",
        )
        return failed("no-text", found, "UTF-8 text", "save the file as UTF-8", place)
    if "\0" in text:
        remedy = "save it as UTF-8 if it is text"
        return failed("no-text", "a zero byte, as in a binary file", "UTF-8 text", remedy)
    return data, text, []


def near_name(path: Path) -> str | None:
    """The name beside a missing file that is most like its own."""
    import difflib

    try:
        names = [entry.name for entry in path.parent.iterdir()]
    except (OSError, ValueError):
        return None
    return next(iter(difflib.get_close_matches(path.name, names, n=1, cutoff=0.6)), None)
