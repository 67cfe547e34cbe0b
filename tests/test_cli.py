"""The command as its users meet it: exit codes, what goes where, and what JSON promises."""

from __future__ import annotations

import json
import math
import os
import pty
import re
import subprocess
import sys
import time
from pathlib import Path

import pytest
from rich.cells import cell_len

import selector
from selector.cli import run_app

ROOT = Path(__file__).parent.parent
GOOD = Path(__file__).parent / "inputs" / "good"
MACHINES = sorted(
    file for file in (ROOT / "examples").glob("*.yaml") if "\naxes:" in file.read_text()
    and "\ncatalogues:" in file.read_text()
)  # fmt: skip
DESIGNS = sorted(set((ROOT / "examples").glob("*.yaml")) - set(MACHINES))
EVERY_REPORT = [
    *(("pick", file) for file in MACHINES),
    *(("judge", file) for file in DESIGNS),
    ("catalogue", ROOT / "catalogues"),
]
REPORT_IDS = [f"{command} {file.stem}" for command, file in EVERY_REPORT]


@pytest.fixture
def rig(tmp_path):
    """A folder with a good machine, its catalogue and a design."""
    for file in GOOD.glob("*.yaml"):
        (tmp_path / file.name).write_text(file.read_text())
    return tmp_path


def edit(file, old, new):
    text = file.read_text()
    assert old in text
    file.write_text(text.replace(old, new))


def call(capsys, *arguments):
    """Exit code, standard output and standard error of a call within this process."""
    code = run_app([str(argument) for argument in arguments])
    written = capsys.readouterr()
    return code, written.out, written.err


def command(*arguments, **options):
    """The installed command in a process of its own."""
    return subprocess.run(
        [sys.executable, "-m", "selector", *map(str, arguments)],
        capture_output=True,
        encoding="utf-8",
        timeout=60,
        cwd=ROOT,
        **options,
    )


# -- exit codes -------------------------------------------------------------------------------


def test_0_when_there_is_an_answer(rig, capsys):
    for name, file in (("pick", "machine"), ("judge", "design"), ("catalogue", "parts")):
        code, out, err = call(capsys, name, rig / f"{file}.yaml")
        assert (code, err) == (0, "")
        assert out


def test_1_when_no_design_exists(rig, capsys):
    edit(rig / "machine.yaml", "0.12 N*m", "100 N*m")
    code, out, err = call(capsys, "pick", rig / "machine.yaml")
    assert (code, err) == (1, "")
    assert "no design exists" in out
    assert "feed" in out


def test_1_when_a_judged_design_fails(rig, capsys):
    edit(rig / "design.yaml", "current_peak: 1.5 A", "current_peak: 0.5 A")
    code, out, err = call(capsys, "judge", rig / "design.yaml")
    assert (code, err) == (1, "")
    assert "the design fails" in out
    assert re.search(r"FAILS\s+torque", out)


def test_2_for_a_fault_in_the_input(rig, capsys):
    edit(rig / "machine.yaml", "0.12 N*m", "0.12 V")
    code, out, err = call(capsys, "pick", rig / "machine.yaml")
    assert (code, out) == (2, "")
    assert err.startswith(f"{rig}/machine.yaml:8:38: wrong-kind\n")
    assert err.endswith("1 fault; nothing was computed\n")


def test_3_when_stopped_before_proof(rig, capsys):
    code, out, err = call(capsys, "pick", rig / "machine.yaml", "--seconds", "0")
    assert (code, err) == (3, "")
    assert "stopped" in out
    code, out, _ = call(capsys, "pick", rig / "machine.yaml", "--seconds", "0", "--json")
    assert (code, json.loads(out)["verdict"]) == (3, "not proved")


def test_3_when_the_user_stops_it(rig, capsys, monkeypatch):
    def interrupted(*_arguments):
        raise KeyboardInterrupt

    monkeypatch.setattr("selector.commands.pick.run", interrupted)
    code, out, err = call(capsys, "pick", rig / "machine.yaml")
    assert (code, out) == (3, "")
    assert err == "stopped; nothing was written\n"


def test_70_with_a_traceback_for_a_fault_of_the_program(rig, capsys, monkeypatch):
    def broken(*_arguments):
        raise ZeroDivisionError("by hand")

    monkeypatch.setattr("selector.commands.pick.run", broken)
    code, out, err = call(capsys, "pick", rig / "machine.yaml")
    assert (code, out) == (70, "")
    assert "Traceback" in err
    assert "please report it" in err


@pytest.mark.parametrize(
    ("arguments", "part"),
    [
        ([], "Usage:"),
        (["frob"], "No such command 'frob'"),
        (["pick"], "Missing argument"),
        (["pick", "a.yaml", "b.yaml"], "unexpected extra argument"),
        (["pick", "a.yaml", "--frob"], "--frob"),
        (["--frob"], "--frob"),
        (["pick", "a.yaml", "--save"], "--save"),
        (["pick", "a.yaml", "--seconds", "-1"], "--seconds"),
        (["pick", "a.yaml", "--seconds", "nan"], "--seconds"),
        (["pick", "a.yaml", "--seconds", "soon"], "--seconds"),
        (["judge", "--seconds", "3", "a.yaml"], "--seconds"),
        (["catalogue"], "Missing argument"),
    ],
)
def test_2_for_a_call_that_is_wrong(arguments, part, capsys):
    code, out, err = call(capsys, *arguments)
    assert (code, out) == (2, "")
    assert part in err
    assert "Traceback" not in err


def test_the_installed_command_ends_with_the_same_codes(rig):
    edit(rig / "design.yaml", "1.5 A", "0.5 A")
    codes = [
        command("--version").returncode,
        command("judge", rig / "design.yaml").returncode,
        command("judge", rig / "none.yaml").returncode,
        command("pick", rig / "machine.yaml", "--seconds", "0").returncode,
        command("frob").returncode,
    ]
    assert codes == [0, 1, 2, 3, 2]


# -- help -------------------------------------------------------------------------------------


def test_the_version_is_told(capsys):
    assert call(capsys, "--version") == (0, f"selector {selector.__version__}\n", "")


@pytest.mark.parametrize("name", ["", "pick", "judge", "catalogue"])
def test_help_is_an_answer(name, capsys):
    code, out, err = call(capsys, *name.split(), "--help")
    assert (code, err) == (0, "")
    assert out.startswith(f"Usage: selector {name}".strip())
    assert "--help" in out


def test_help_comes_at_once():
    seconds = []
    for _ in range(3):
        start = time.monotonic()
        assert command("--help").returncode == 0
        seconds.append(time.monotonic() - start)
    assert min(seconds) < 1.0


@pytest.mark.parametrize(
    ("arguments", "by_typer"),
    [
        (["--help"], set()),
        (["--version"], set()),
        (["pick", "--help"], {"pydantic"}),  # some releases of typer read arguments with it
        (["frob"], {"pydantic"}),
    ],
)
def test_help_loads_no_library_of_the_search(arguments, by_typer):
    code = (
        "import sys; from selector.cli import run_app; run_app(sys.argv[1:]);"
        "print('LOADED', *sys.modules)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, *arguments], capture_output=True, text=True, timeout=60
    )
    name, *modules = done.stdout.splitlines()[-1].split()
    assert name == "LOADED"
    heavy = {"numpy", "pydantic", "ortools", "pint", "pandas", "scipy", "yaml"}
    assert heavy & set(modules) <= by_typer


# -- text -------------------------------------------------------------------------------------


@pytest.mark.parametrize(("name", "file"), EVERY_REPORT, ids=REPORT_IDS)
def test_no_line_is_wider_than_100_columns_and_none_has_control_codes(name, file, capsys):
    code, out, err = call(capsys, name, file)
    assert (code, err) == (0, "")
    assert max(cell_len(line) for line in out.splitlines()) <= 100
    assert not re.search(r"[\x00-\x09\x0b-\x1f\x7f-\x9f]", out)


def test_long_names_are_folded_not_cut(rig, capsys):
    name = "the-feed-of-the-long-name-" * 6 + "end"
    edit(rig / "machine.yaml", "axis: feed", f"axis: {name}")
    edit(rig / "parts.yaml", "plover-4", "很长的名字-" * 20 + "end")
    code, out, err = call(capsys, "pick", rig / "machine.yaml")
    assert (code, err) == (0, "")
    assert max(cell_len(line) for line in out.splitlines()) <= 100
    code, out, _ = call(capsys, "catalogue", rig / "parts.yaml")
    assert code == 0
    assert max(cell_len(line) for line in out.splitlines()) <= 100


def test_brackets_in_names_are_no_markup(rig, capsys):
    edit(rig / "machine.yaml", "axis: feed", 'axis: "[bold red]x[/]"')
    code, out, _ = call(capsys, "pick", rig / "machine.yaml")
    assert code == 0
    assert "[bold red]x[/]" in out


@pytest.mark.parametrize("extra", [{}, {"NO_COLOR": "1"}, {"FORCE_COLOR": "1", "TERM": "xterm"}])
def test_a_pipe_gets_no_colours(rig, extra):
    for arguments in (["judge", rig / "design.yaml"], ["judge", rig / "none.yaml"], ["frob"]):
        done = command(*arguments, env=os.environ | extra)
        assert "\x1b" not in done.stdout + done.stderr


def on_a_terminal(arguments, **environment):
    """What the command writes when both its streams are a terminal."""
    leader, follower = pty.openpty()
    env = {k: v for k, v in os.environ.items() if k not in ("NO_COLOR", "FORCE_COLOR")}
    with subprocess.Popen(
        [sys.executable, "-m", "selector", *map(str, arguments)],
        stdout=follower,
        stderr=follower,
        stdin=subprocess.DEVNULL,
        env=env | {"TERM": "xterm-256color", "COLUMNS": "120"} | environment,
    ):
        os.close(follower)
        pieces = []
        try:
            while piece := os.read(leader, 65536):
                pieces.append(piece)
        except OSError:  # the other side is closed
            pass
    os.close(leader)
    return b"".join(pieces).decode()


def test_a_terminal_gets_colours_unless_they_are_not_wanted(rig):
    arguments = ["judge", rig / "design.yaml"]
    assert "\x1b[" in on_a_terminal(arguments)
    assert "\x1b" not in on_a_terminal(arguments, NO_COLOR="1")


def test_progress_is_for_a_terminal_only(rig):
    done = command("pick", rig / "machine.yaml")
    assert done.stderr == ""
    assert "judging the design" not in done.stdout


@pytest.mark.parametrize("encoding", ["ascii", "cp1252"])
def test_a_narrow_encoding_ends_no_run(rig, encoding):
    edit(rig / "machine.yaml", "axis: feed", "axis: fødeønske-很")
    done = subprocess.run(
        [sys.executable, "-m", "selector", "pick", str(rig / "machine.yaml")],
        capture_output=True,
        env=os.environ | {"PYTHONIOENCODING": encoding},
        timeout=60,
    )
    assert (done.returncode, done.stderr) == (0, b"")


# -- where the words go -----------------------------------------------------------------------


def test_faults_go_to_standard_error_and_answers_to_standard_output(rig):
    good, bad = command("judge", rig / "design.yaml"), command("judge", rig / "none.yaml")
    assert good.stdout
    assert not good.stderr
    assert bad.stderr
    assert not bad.stdout


def test_json_is_alone_on_standard_output_when_a_design_is_kept(rig):
    done = command("pick", rig / "machine.yaml", "--json", "--save", rig / "kept.yaml")
    assert json.loads(done.stdout)["verdict"] == "proved"
    assert done.stderr == f"design kept in {rig}/kept.yaml\n"


@pytest.mark.parametrize("extra", [[], ["--json"]])
@pytest.mark.parametrize(("name", "file"), [("judge", "design"), ("catalogue", "parts")])
def test_a_reader_that_went_away_ends_the_run_in_silence(rig, name, file, extra):
    reading, writing = os.pipe()
    os.close(reading)
    with os.fdopen(writing, "wb") as closed:
        done = subprocess.run(
            [sys.executable, "-m", "selector", name, str(rig / f"{file}.yaml"), *extra],
            stdout=closed,
            stderr=subprocess.PIPE,
            timeout=60,
        )
    assert (done.returncode, done.stderr) == (0, b"")


@pytest.mark.parametrize("extra", ["", "--json"])
def test_a_full_disk_is_no_fault_of_the_program(rig, extra):
    if not Path("/dev/full").exists():
        pytest.skip("there is no full device here")
    with Path("/dev/full").open("wb") as full:
        done = subprocess.run(
            [sys.executable, "-m", "selector", "judge", str(rig / "design.yaml"), *extra.split()],
            stdout=full,
            stderr=subprocess.PIPE,
            text=True,
            timeout=60,
        )
    assert done.returncode == 2
    assert done.stderr == "the answer could not be written: No space left on device\n"


def test_closed_streams_end_no_run(rig):
    line = f'"{sys.executable}" -m selector judge "{rig}/design.yaml" >&- 2>&-'
    assert subprocess.run(["sh", "-c", line], timeout=60).returncode == 0


# -- JSON -------------------------------------------------------------------------------------

KEYS = {"totals", "axes", "buses", "findings", "order", "assumptions", "cautions", "verdict"}
AXIS = {"axis", "motor", "reduction", "driver", "current_peak", "bus", "torque_headroom",
        "worst_point"}  # fmt: skip
BUS = {"voltage", "supply", "count", "mean_power", "peak_power", "supply_headroom",
       "highest_voltage", "voltage_limit"}  # fmt: skip
FINDING = {"rule", "subject", "actual", "limit", "headroom", "state", "standing"}
ORDER = {"part", "quantity", "unit_price", "line_price"}
UNITS = {"N*m", "A", "V", "W", "Hz", "J", "F", "degC", "K", "rad/s", "kg", "m^3", "day", "EUR",
         "1", "ohm", "H", "m", "deg", "kg*m^2", "s", ""}  # fmt: skip


def refuse(constant):
    raise AssertionError(f"{constant} in JSON")


def loaded(out):
    return json.loads(out, parse_constant=refuse)


def every(data, path=()):
    """Each value with its path, containers too."""
    yield path, data
    inner = enumerate(data) if isinstance(data, list) else getattr(data, "items", tuple)()
    for key, value in inner:
        yield from every(value, (*path, key))


def check_answer(data):
    """What every answer promises about its keys and figures."""
    assert set(data) >= KEYS
    assert all(set(row) >= AXIS for row in data["axes"])
    assert all(set(row) >= BUS for row in data["buses"])
    assert all(set(row) >= FINDING for row in data["findings"])
    assert all(set(row) >= ORDER for row in data["order"])
    assert {row["state"] for row in data["findings"]} <= {"passes", "fails", "unknown"}
    for path, value in every(data):
        if isinstance(value, float):
            assert math.isfinite(value), path
        if isinstance(value, dict) and "unit" in value and path[0] not in ("goal", "goals"):
            assert set(value) == {"value", "unit"}, path
            assert value["unit"] in UNITS, path
    for key in ("current_peak", "winding_temperature", "peak_power"):
        assert all(set(row[key]) == {"value", "unit"} for row in data["axes"])
    for key in ("voltage", "mean_power", "peak_power", "voltage_limit"):
        assert all(set(row[key]) == {"value", "unit"} for row in data["buses"])


@pytest.mark.parametrize(("name", "file"), EVERY_REPORT[:-1], ids=REPORT_IDS[:-1])
def test_json_of_an_answer_keeps_its_promises(name, file, capsys):
    code, out, err = call(capsys, name, file, "--json")
    assert (code, err) == (0, "")
    data = loaded(out)
    check_answer(data)
    assert data["axes"]
    assert data["cautions"]
    assert data["verdict"] == ("proved" if name == "pick" else "holds")
    if name == "pick":
        assert set(data["goal"]) == {"name", "value", "unit", "step", "proved_bound"}
        assert data["goal"] == data["goals"][0]
        assert all(len(entry["sha256"]) == 64 for entry in data["inputs"])


def test_json_says_the_same_as_the_records(rig, capsys):
    answer = selector.pick(selector.load_problem(rig / "machine.yaml"))
    data = loaded(call(capsys, "pick", rig / "machine.yaml", "--json")[1])
    for row, choice, figures in zip(
        data["axes"], answer.design.axes, answer.judgement.axes, strict=True
    ):
        assert (row["motor"], row["driver"]) == (choice.motor, choice.driver)
        assert row["current_peak"] == {"value": choice.peak, "unit": "A"}
        assert row["torque_headroom"] == figures.torque_headroom
        assert row["worst_point"]["speed"]["unit"] == "rad/s"
    cost = sum(line["line_price"]["value"] for line in data["order"])
    assert data["totals"]["cost"] == {"value": pytest.approx(cost), "unit": "EUR"}
    assert data["goal"]["value"] == pytest.approx(cost)


def test_json_without_a_design_has_the_same_keys(rig, capsys):
    edit(rig / "machine.yaml", "0.12 N*m", "100 N*m")
    code, out, _ = call(capsys, "pick", rig / "machine.yaml", "--json")
    data = loaded(out)
    assert code == 1
    assert data["verdict"] == "none exists"
    assert data["goal"] is None
    assert data["reasons"]
    check_answer(data)


def test_json_of_a_design_without_a_supply_leaves_gaps_open(rig, capsys):
    edit(rig / "design.yaml", "supply: tarn-24\n", "")
    data = loaded(call(capsys, "judge", rig / "design.yaml", "--json")[1])
    check_answer(data)
    assert data["buses"][0]["supply"] is None
    assert data["buses"][0]["supply_headroom"] is None
    assert "unknown" in {row["state"] for row in data["findings"]}


def test_json_of_a_catalogue_is_read_back(capsys):
    code, out, _ = call(capsys, "catalogue", ROOT / "catalogues", "--json")
    data = loaded(out)
    assert code == 0
    assert set(data) == {"motors", "drivers", "supplies"}
    assert all(data.values())
    for motor in data["motors"]:
        assert motor["holding_torque"]["unit"] == "N*m"
        assert motor["price"]["unit"] == "EUR"
