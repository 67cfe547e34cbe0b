"""Every public physics function explains itself, names its standing, and its example runs."""

from __future__ import annotations

import doctest
import importlib
import inspect
import pkgutil
import re

import pytest

import selector.physics

STANDING = re.compile(r"Standing: (published|derived|practice|simulated|measured|memory|guess)\b")
MODULES = [
    importlib.import_module(f"selector.physics.{found.name}")
    for found in pkgutil.iter_modules(selector.physics.__path__)
]
FUNCTIONS = [
    pytest.param(member, id=f"{module.__name__.rpartition('.')[2]}.{name}")
    for module in MODULES
    for name, member in inspect.getmembers(module, inspect.isfunction)
    if member.__module__ == module.__name__ and not name.startswith("_")
]


def sections_of(function):
    """Sections of a numpydoc text by heading; the text before them under ''."""
    lines = inspect.getdoc(function).splitlines()
    found = {"": []}
    heading = ""
    for line, following in zip(lines, [*lines[1:], ""], strict=True):
        if following and set(following) == {"-"}:
            heading = line
            found[heading] = []
        elif not (line and set(line) == {"-"}):
            found[heading].append(line)
    return {name: "\n".join(body) for name, body in found.items()}


def parameters_of(text):
    """Text under each name of a Parameters section; names joined by commas share theirs."""
    described = {}
    for entry in re.split(r"\n(?=\S)", text.strip()):
        names, _, rest = entry.partition(" : ")
        for name in names.split(","):
            described[name.strip()] = rest
    return described


def test_all_five_modules_are_looked_at():
    names = {module.__name__.rpartition(".")[2] for module in MODULES}
    assert {"torque", "power", "braking", "thermal", "supply"} <= names
    assert len(FUNCTIONS) > 25


@pytest.mark.parametrize("function", FUNCTIONS)
def test_every_section_is_there(function):
    assert function.__doc__, "no docstring"
    sections = sections_of(function)
    for heading in ("Parameters", "Returns", "Notes", "Examples"):
        assert sections.get(heading, "").strip(), f"no {heading}"
    summary = sections[""].splitlines()[0]
    assert summary.endswith("."), "the first line is a sentence of its own"


@pytest.mark.parametrize("function", FUNCTIONS)
def test_every_argument_is_named_with_its_unit(function):
    described = parameters_of(sections_of(function)["Parameters"])
    assert list(described) == list(inspect.signature(function).parameters)
    without = [name for name, text in described.items() if not re.search(r"\[[^\]]+\]", text)]
    assert not without, f"no unit in brackets: {without}"


@pytest.mark.parametrize("function", FUNCTIONS)
def test_the_notes_tell_the_standing(function):
    assert STANDING.search(sections_of(function)["Notes"])


@pytest.mark.parametrize("function", FUNCTIONS)
def test_a_function_that_raises_says_so(function):
    assert ("raise " not in inspect.getsource(function)) or "Raises" in sections_of(function)


@pytest.mark.parametrize("function", FUNCTIONS)
def test_the_example_gives_what_it_shows(function):
    scope = vars(inspect.getmodule(function))
    (case,) = doctest.DocTestFinder(recurse=False).find(function, function.__name__, globs=scope)
    assert case.examples, "nothing to run"
    shown: list[str] = []
    failed = doctest.DocTestRunner(verbose=False).run(case, out=shown.append).failed
    assert not failed, "".join(shown)
