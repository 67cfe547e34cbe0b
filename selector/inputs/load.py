"""Machine and catalogue files to a Problem; the faults of all files are gathered, then raised."""

from __future__ import annotations

import difflib
import hashlib
from pathlib import Path
from typing import Any, TypeVar

from pydantic import BaseModel, ValidationError

from ..domain.fields import CURRENCY, Money, Record
from ..domain.machine import Machine, Problem, Source
from ..domain.parts import Catalogue, Driver, Motor, Part, Supply
from ..errors import Fault, InputFaults
from .yaml_text import Node, near_name, parse, read_text

KINDS: dict[str, type[Part]] = {"motors": Motor, "drivers": Driver, "supplies": Supply}
LISTS_OR_KEYS = ("current_settings", "minimise")  # fields that take either
COMPUTED = ("origin", "price_table")  # fields of parts that no file states
LONGEST_SHOWN = 60
R = TypeVar("R", bound=Record)


def load_problem(path: str | Path) -> Problem:
    """Read a machine file and the catalogues it names.

    Raises
    ------
    InputFaults
        With every fault of every file, in order of file and place.
    """
    faults: list[Fault] = []
    node, source = read_node(Path(path), str(path), faults)
    if node is None or source is None:
        raise InputFaults(faults)
    machine = build(Machine, node, node.plain(), (), str(path), faults)
    files: list[Path] = []
    for name, place in _catalogue_names(node):
        named = Path(path).parent / name
        if exists(named):
            files += catalogue_files(named, faults)
            continue
        near = near_name(named)
        hint = f'there is "{near}" beside it' if near else f"nothing at {short(str(named))}"
        found, expected = f"catalogues: {short(name)}", "a catalogue file or folder"
        faults.append(Fault(str(path), *place, "missing-file", found, expected, hint))
    catalogue, sources = _read_catalogue(files, faults)
    if faults or machine is None:
        raise InputFaults(faults)
    return Problem(
        machine=machine, catalogue=catalogue, machine_file=str(path), sources=(source, *sources)
    )


def _catalogue_names(root: Node) -> list[tuple[str, tuple[int, int]]]:
    """Catalogues a machine file names, with their places, even if other keys are faulty."""
    node = root.value.get("catalogues")
    if node is None:
        return []
    listed = node.value if isinstance(node.value, list) else [node]
    return [(n.value, (n.line, n.column)) for n in listed if isinstance(n.value, str) and n.value]


def exists(path: Path) -> bool:
    """Whether there is such a file or folder, as far as anybody may look."""
    try:
        return path.exists()
    except PermissionError:  # what reads it will say so
        return True
    except (OSError, ValueError):  # a name too long or impossible
        return False


def load_catalogue(path: str | Path) -> Catalogue:
    """Read one catalogue file, or every ``.yaml`` file in a folder.

    Raises
    ------
    InputFaults
        With every fault of every file.
    """
    faults: list[Fault] = []
    catalogue, _ = _read_catalogue(catalogue_files(Path(path), faults), faults)
    if faults:
        raise InputFaults(faults)
    return catalogue


def catalogue_files(path: Path, faults: list[Fault]) -> list[Path]:
    """The files a catalogue path means, in order of name."""
    try:
        if not path.is_dir():
            return [path]
        files = sorted(p for p in path.iterdir() if p.suffix in (".yaml", ".yml"))
    except OSError as error:
        found = error.strerror or str(error)
        faults.append(Fault(str(path), 0, 0, "unreadable", found, "a path that can be read"))
        return []
    if not files:
        remedy = "put .yaml files into it or name another folder"
        found, expected = "no .yaml file", "catalogue files"
        faults.append(Fault(str(path), 0, 0, "empty-folder", found, expected, remedy))
    return files


def read_node(path: Path, shown: str, faults: list[Fault]) -> tuple[Node | None, Source | None]:
    """A file's data with places and its hash; faults of form go into ``faults``."""
    data, text, found = read_text(path, shown)
    faults += found
    if found:
        return None, None
    node, found = parse(text, shown)
    faults += found
    if node is not None and not isinstance(node.value, dict):
        found_shape = "a list" if isinstance(node.value, list) else "bare text"
        expected = "keys with values at the top of the file"
        place = (node.line, node.column)
        if not node.spoiled:
            faults.append(Fault(shown, *place, "wrong-shape", found_shape, expected))
        node = None
    return node, Source(file=shown, sha256=hashlib.sha256(data).hexdigest())


def build(
    record: type[R], root: Node, data: Any, path: tuple[Any, ...], file: str, faults: list[Fault]
) -> R | None:
    """One record from plain data; its faults get the places of ``root`` along ``path``."""
    try:
        return record.model_validate(data)
    except ValidationError as error:
        for detail in error.errors(include_url=False):
            loc = path + _as_written(detail["loc"])
            if not _spoiled(root, loc):
                faults.append(_fault(record, root, path, dict(detail), file))
        return None


def _as_written(loc: tuple[Any, ...]) -> tuple[Any, ...]:
    """A path without the steps that only tell a list from keys."""
    before = (None, *loc)
    return tuple(
        step
        for k, step in enumerate(loc)
        if not (before[k] in LISTS_OR_KEYS and step in ("list", "keys"))
    )


def _spoiled(root: Node, path: tuple[Any, ...]) -> bool:
    """Whether the form of the value at the end of a path is at fault already."""
    node = root
    for step in path:
        inside = step in node.value if isinstance(node.value, dict) else isinstance(step, int)
        if not inside or isinstance(node.value, str):
            return False
        node = node.value[step]
    return node.spoiled


def _fault(
    record: type[Record], root: Node, path: tuple[Any, ...], detail: dict[str, Any], file: str
) -> Fault:
    context = detail.get("ctx", {})
    loc = (*_as_written(detail["loc"]), *context.get("at", ()))
    node, place = root.at(path + loc)
    keys = [step for step in loc if isinstance(step, str)]
    key = keys[-1] if keys else ""
    kind = detail["type"]
    if kind == "missing":
        owner, _ = root.at(path + loc[:-1])
        found, place = f"no {key}{_named(owner, ' in ')}", (owner.line, owner.column)
        return Fault(file, *place, "missing-key", found, key, "add the key")
    if isinstance(node.value, dict) and (not loc or isinstance(loc[-1], int)):
        key = ""
    found = _written(key, node) if path + loc else "the whole file"
    if kind == "extra_forbidden":
        hint = _known(key, _known_keys(record, loc[:-1]))
        return Fault(file, *place, "unknown-key", found, "a key known here", hint)
    if kind == "selector":
        return Fault(file, *place, context["name"], found, context["expected"], context["remedy"])
    if kind == "literal_error":
        choices = [c.strip("'") for c in context["expected"].replace(" or ", ", ").split(", ")]
        near = difflib.get_close_matches(str(node.value)[:LONGEST_SHOWN], choices, n=1, cutoff=0.5)
        hint = f'did you mean "{near[0]}"?' if near else ""
        words = f"{', '.join(choices[:-1])} or {choices[-1]}" if choices[1:] else choices[0]
        return Fault(file, *place, "unknown-word", found, words, hint)
    if "tuple" in kind or "list" in kind:
        return Fault(file, *place, "wrong-shape", found, "a list, each item after a dash")
    if "string" in kind or "float" in kind:
        return Fault(file, *place, "wrong-shape", found, "one value")
    return Fault(file, *place, "wrong-shape", found, "keys with values")


def _known(key: str, known: list[str]) -> str:
    """The key that was meant, or all there are."""
    near = difflib.get_close_matches(key[:LONGEST_SHOWN], known, n=1, cutoff=0.6)
    return f'closest known key: "{near[0]}"' if near else "known: " + ", ".join(known)


def short(text: str) -> str:
    """A text cut to what a message has room for."""
    text = " ".join(text.splitlines())
    return text if len(text) <= LONGEST_SHOWN else text[: LONGEST_SHOWN - 3] + "..."


def _written(key: str, node: Node) -> str:
    """A key and its value as in the file, cut to one line."""
    if not key and (name := _named(node)):
        return name
    return short(f"{key}: {_flow(node)}" if key else _flow(node))


def _flow(node: Node, depth: int = 0) -> str:
    """A value on one line; no more of a long one than anybody reads."""
    if isinstance(node.value, str):
        return node.value
    if depth > 3:
        return "..."
    if isinstance(node.value, list):
        return "[" + ", ".join(_flow(item, depth + 1) for item in node.value[:9]) + "]"
    items = list(node.value.items())[:9]
    return "{" + ", ".join(f"{key}: {_flow(item, depth + 1)}" for key, item in items) + "}"


def _named(node: Node, before: str = "") -> str:
    """How an entry calls itself, such as ``part "A1"``; nothing where it has no name."""
    if isinstance(node.value, dict):
        for key in ("part", "axis", "point", "load"):
            name = node.value.get(key)
            if name is not None and isinstance(name.value, str) and name.value:
                return f'{before}{key} "{short(name.value)}"'
    return ""


def _known_keys(record: type[Record], loc: tuple[Any, ...]) -> list[str]:
    fields: Any = record
    for step in loc:
        if isinstance(step, str) and step in getattr(fields, "model_fields", {}):
            fields = _record_in(fields.model_fields[step].annotation) or fields
    return [name for name in fields.model_fields if name not in COMPUTED]


def _record_in(annotation: Any) -> type[BaseModel] | None:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    for inner in getattr(annotation, "__args__", ()):
        if (found := _record_in(inner)) is not None:
            return found
    return None


def _read_catalogue(files: list[Path], faults: list[Fault]) -> tuple[Catalogue, tuple[Source, ...]]:
    parts: dict[str, list[Part]] = {kind: [] for kind in KINDS}
    sources = []
    for file in dict.fromkeys(files):
        node, source = read_node(file, str(file), faults)
        if source is not None:
            sources.append(source)
        if node is not None:
            _read_parts(node, str(file), parts, faults)
    _refuse_doubled(parts, faults)
    return Catalogue(**{kind: tuple(entries) for kind, entries in parts.items()}), tuple(sources)


def _read_parts(root: Node, file: str, parts: dict[str, list[Part]], faults: list[Fault]) -> None:
    currency = root.value.get("currency")
    if currency is not None and not CURRENCY.match(str(currency.value)):
        if not currency.spoiled:
            found, expected = _written("currency", currency), "three capitals such as EUR"
            faults.append(Fault(file, *root.keys["currency"], "no-currency", found, expected))
        currency = Node("XTS", currency.line, currency.column)  # so that one fault brings no others
    for key, node in root.value.items():
        if key not in (*KINDS, "currency", "note"):
            hint = _known(key, [*KINDS, "currency", "note"])
            found, expected = _written(key, node), "a kind of part"
            faults.append(Fault(file, *root.keys[key], "unknown-key", found, expected, hint))
        elif key in KINDS and not isinstance(node.value, list):
            if not node.spoiled:
                found, expected = _written(key, node), "a list of parts, each after a dash"
                faults.append(Fault(file, *root.keys[key], "wrong-shape", found, expected))
        elif key in KINDS:
            for index, entry in enumerate(node.value):
                data = _without_computed(entry, KINDS[key], file, faults)
                made = build(KINDS[key], root, data, (key, index), file, faults)
                if made is not None:
                    origin = f"{file}:{entry.line}:{entry.column}"
                    parts[key].append(_placed(made, origin, currency, faults))


def _without_computed(entry: Node, kind: type[Part], file: str, faults: list[Fault]) -> Any:
    """An entry's data; fields that are not the user's to state are unknown keys."""
    data = entry.plain()
    if not isinstance(data, dict):
        return data
    for key in COMPUTED:
        if data.pop(key, None) is not None:
            hint = _known(key, _known_keys(kind, ()))
            found, expected = _written(key, entry.value[key]), "a key known here"
            faults.append(Fault(file, *entry.keys[key], "unknown-key", found, expected, hint))
    return data


def _placed(part: Part, origin: str, currency: Node | None, faults: list[Fault]) -> Part:
    price = part.price
    if price is not None and price.currency is None:
        if currency is None:
            found, remedy = f'price of "{part.part}" without currency', "currency: EUR"
            remedy = f"put `{remedy}` at the top of the file"
            faults.append(_at(origin, "no-currency", found, "a currency", remedy))
        else:
            price = Money(price.amount, str(currency.value))
    return part.model_copy(update={"origin": origin, "price": price})


def _refuse_doubled(parts: dict[str, list[Part]], faults: list[Fault]) -> None:
    seen: dict[str, Part] = {}
    for entries in parts.values():
        for entry in entries:
            if entry.part in seen:
                found, expected = f"part: {short(entry.part)}", "a name of its own for each part"
                remedy = f"it stands at {seen[entry.part].origin} already; rename one"
                faults.append(_at(entry.origin, "doubled-part", found, expected, remedy))
            seen.setdefault(entry.part, entry)


def _at(origin: str, *fields: str) -> Fault:
    file, line, column = origin.rsplit(":", 2)
    return Fault(file, int(line), int(column), *fields)
