"""The README is true: its output is what is printed, its examples run, no key is missing."""

import re
from pathlib import Path

import pytest

from selector.cli import run_app
from selector.domain.machine import Axis, Limits, Machine, Margins, Point, Tolerances

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")


@pytest.fixture(autouse=True)
def at_root(monkeypatch):
    monkeypatch.chdir(ROOT)


def block(language, text=README):
    return re.search(rf"```{language}\n(.*?)```", text, re.DOTALL).group(1)


def test_the_output_shown_is_what_the_command_prints(capsys):
    command = re.search(r"<!-- output of: selector (.*) -->", README).group(1)
    assert run_app(command.split()) == 0
    printed = [line.rstrip() for line in capsys.readouterr().out.splitlines()]
    shown = block("text").splitlines()
    assert len(shown) > 20
    assert printed[: len(shown)] == shown


def test_the_machine_shown_gets_a_design(tmp_path, capsys):
    file = tmp_path / "turntable.yaml"
    text = block("yaml").replace("../catalogues", str(ROOT / "catalogues"))
    file.write_text(text, encoding="utf-8")
    assert run_app(["pick", str(file)]) == 0
    assert "proved" in capsys.readouterr().out


def test_the_python_shown_runs(capsys):
    exec(compile(block("python"), "README.md", "exec"), {})
    printed = capsys.readouterr().out
    assert printed.startswith("proved ")
    assert "carousel" in printed


@pytest.mark.parametrize("record", [Machine, Axis, Point, Limits, Margins, Tolerances])
def test_every_key_of_a_machine_file_is_in_the_readme(record):
    missing = [name for name in record.model_fields if not re.search(rf"\b{name}\b", README)]
    allowed = {"buses"}  # only 1 so far
    assert set(missing) <= allowed
