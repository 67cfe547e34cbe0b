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
from .yaml_text import Node, parse, read_text

KINDS: dict[str, type[Part]] = {"motors": Motor, "drivers": Driver, "supplies": Supply}
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
        found = catalogue_files(Path(path).parent / name, faults)
        if not found[:1] or found[0].exists():
            files += found
        else:
            near = catalogue_files(Path(path).parent / name, [])[0]
            faults.append(
                Fault(
                    str(path),
                    *place,
                    "missing-file",
                    f"catalogues: {name}",
                    "a catalogue file or folder",
                    f"nothing at {near}",
                )
            )
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
    if not path.is_dir():
        return [path]
    files = sorted(p for p in path.iterdir() if p.suffix in (".yaml", ".yml"))
    if not files:
        faults.append(Fault(str(path), 0, 0, "empty-folder", "no .yaml file", "catalogue files"))
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
        faults.append(
            Fault(
                shown,
                node.line,
                node.column,
                "wrong-shape",
                "a list or bare text",
                "keys with values at the top of the file",
            )
        )
        node = None
    return node, Source(file=shown, sha256=hashlib.sha256(data).hexdigest())


def read_record(
    path: Path, shown: str, record: type[R], faults: list[Fault]
) -> tuple[R | None, Source | None]:
    """A whole file as one record; faults of form and meaning go into ``faults``."""
    before = len(faults)
    node, source = read_node(path, shown, faults)
    if node is None:
        return None, source
    made = build(record, node, node.plain(), (), shown, faults)
    return (made if len(faults) == before else None), source


def build(
    record: type[R], root: Node, data: Any, path: tuple[Any, ...], file: str, faults: list[Fault]
) -> R | None:
    """One record from plain data; its faults get the places of ``root`` along ``path``."""
    try:
        return record.model_validate(data)
    except ValidationError as error:
        for detail in error.errors(include_url=False):
            faults.append(_fault(record, root, path, dict(detail), file))
        return None


def _fault(
    record: type[Record], root: Node, path: tuple[Any, ...], detail: dict[str, Any], file: str
) -> Fault:
    loc = tuple(step for step in detail["loc"] if not _is_branch(step))
    node, place = root.at(path + loc)
    key = str(loc[-1]) if loc else ""
    context = detail.get("ctx", {})
    kind = detail["type"]
    if kind == "extra_forbidden":
        known = _known_keys(record, loc[:-1])
        near = difflib.get_close_matches(key, known, n=1, cutoff=0.6)
        hint = f'closest known key: "{near[0]}"' if near else "known: " + ", ".join(known)
        return Fault(file, *place, "unknown-key", _written(key, node), "a key known here", hint)
    if kind == "missing":
        owner, place = root.at(path + loc[:-1])
        what = _named(owner)
        return Fault(
            file,
            owner.line,
            owner.column,
            "missing-key",
            f"no {key}{what}",
            f"{key}",
            "add the key",
        )
    if kind == "selector":
        return Fault(
            file,
            *place,
            context["name"],
            _written(key, node),
            context["expected"],
            context["remedy"],
        )
    if kind == "literal_error":
        found = str(node.value)
        choices = [c.strip("'") for c in context["expected"].replace(" or ", ", ").split(", ")]
        near = difflib.get_close_matches(found, choices, n=1, cutoff=0.5)
        hint = f'did you mean "{near[0]}"?' if near else ""
        return Fault(file, *place, "unknown-word", _written(key, node), " or ".join(choices), hint)
    shape = "a list, each item after a dash" if "tuple" in kind else "keys with values"
    return Fault(file, *place, "wrong-shape", _written(key, node), shape)


def _is_branch(step: Any) -> bool:
    """Whether pydantic put the step there to name a branch of a union, not a key."""
    return isinstance(step, str) and ("[" in step or step in ("SettingRange", "Worth"))


def _written(key: str, node: Node) -> str:
    value = node.value
    if isinstance(value, str):
        shown = value if len(value) <= 60 else value[:57] + "..."
        return f"{key}: {shown}".replace("\n", " ") if key and not key.isdigit() else shown
    if isinstance(value, dict):
        return f"{key}{_named(node)}".strip() or "this entry"
    return f"{key}: a list" if key else "a list"


def _named(node: Node) -> str:
    if isinstance(node.value, dict):
        for key in ("part", "axis", "point", "load", "name"):
            if key in node.value and isinstance(node.value[key].value, str):
                return f' in {key} "{node.value[key].value}"'
    return ""


def _known_keys(record: type[Record], loc: tuple[Any, ...]) -> list[str]:
    fields: Any = record
    for step in loc:
        if isinstance(step, str) and step in getattr(fields, "model_fields", {}):
            fields = _record_in(fields.model_fields[step].annotation) or fields
    return [name for name in fields.model_fields if name not in ("origin", "price_table")]


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
    known = [*KINDS, "currency", "note"]
    if currency is not None and not CURRENCY.match(str(currency.value)):
        faults.append(
            Fault(
                file,
                *root.keys["currency"],
                "no-currency",
                _written("currency", currency),
                "three capitals such as EUR",
            )
        )
        return
    for key, node in root.value.items():
        if key not in known:
            near = difflib.get_close_matches(key, known, n=1, cutoff=0.6)
            hint = f'closest known key: "{near[0]}"' if near else "known: " + ", ".join(known)
            faults.append(
                Fault(file, *root.keys[key], "unknown-key", f"{key}:", "a kind of part", hint)
            )
        elif key in KINDS and not isinstance(node.value, list):
            faults.append(
                Fault(
                    file,
                    *root.keys[key],
                    "wrong-shape",
                    _written(key, node),
                    "a list of parts, each after a dash",
                )
            )
        elif key in KINDS:
            for index, entry in enumerate(node.value):
                data = entry.plain()
                made = build(KINDS[key], root, data, (key, index), file, faults)
                if made is not None:
                    origin = f"{file}:{entry.line}:{entry.column}"
                    parts[key].append(_placed(made, origin, currency, faults))


def _placed(part: Part, origin: str, currency: Node | None, faults: list[Fault]) -> Part:
    price = part.price
    if price is not None and price.currency is None:
        if currency is None:
            file, line, column = origin.rsplit(":", 2)
            faults.append(
                Fault(
                    file,
                    int(line),
                    int(column),
                    "no-currency",
                    f'price of "{part.part}" without currency',
                    "a currency",
                    "put `currency: EUR` at the top of the file",
                )
            )
        else:
            price = Money(price.amount, str(currency.value))
    return part.model_copy(update={"origin": origin, "price": price})


def _refuse_doubled(parts: dict[str, list[Part]], faults: list[Fault]) -> None:
    seen: dict[str, Part] = {}
    for entries in parts.values():
        for entry in entries:
            if entry.part in seen:
                file, line, column = entry.origin.rsplit(":", 2)
                faults.append(
                    Fault(
                        file,
                        int(line),
                        int(column),
                        "doubled-part",
                        f"part: {entry.part}",
                        "a name of its own for each part",
                        f"it stands at {seen[entry.part].origin} already",
                    )
                )
            seen.setdefault(entry.part, entry)
