"""DEVELOPERS.md lists every physics function with the standing its docstring states."""

import importlib
import inspect
import re
from pathlib import Path

TEXT = (Path(__file__).parent.parent / "DEVELOPERS.md").read_text(encoding="utf-8")
MODULES = ("torque", "power", "braking", "thermal", "supply")


def functions():
    for name in MODULES:
        module = importlib.import_module(f"selector.physics.{name}")
        for function, value in inspect.getmembers(module, inspect.isfunction):
            if not function.startswith("_") and value.__module__ == module.__name__:
                yield f"{name}.{function}", value


def test_the_table_names_each_function_with_its_standing():
    rows = dict(re.findall(r"^\| `(\w+\.\w+)` \|.*\| ([a-z]+)", TEXT, re.MULTILINE))
    stated = {}
    for name, function in functions():
        stated[name] = re.search(r"Standing:\s+([a-z]+)", inspect.getdoc(function)).group(1)
    assert rows == stated
