"""A design comes back as it was saved, and saving never leaves half a file or another's."""

from __future__ import annotations

import os
import stat
import subprocess
import sys
from pathlib import Path

import pytest
import yaml

import selector
from selector.cli import run_app
from selector.domain.results import Design
from selector.errors import InputFaults
from selector.inputs.design_file import FIRST_LINE, load_design, save_design

GOOD = Path(__file__).parent / "good"
BY_HAND = """\
machine: machine.yaml
voltage: 24 V
supply: tarn-24
axes:
  - {axis: feed, motor: plover-4, driver: moss-30, current_peak: 1.5 A}
  - axis: lift
    motor: plover-8
    joining: parallel
    driver: moss-30
    current_peak: 2 A
"""


@pytest.fixture
def rig(tmp_path):
    """A folder with the good machine and its catalogue."""
    folder = tmp_path / "rig"
    folder.mkdir()
    for name in ("machine.yaml", "parts.yaml"):
        (folder / name).write_text((GOOD / name).read_text())
    return folder


@pytest.fixture
def answer(rig):
    return selector.pick(selector.load_problem(rig / "machine.yaml"))


def faults_of(call, *arguments):
    with pytest.raises(InputFaults) as caught:
        call(*arguments)
    return [fault.name for fault in caught.value.faults]


def test_a_saved_design_is_judged_as_it_was_chosen(rig, answer):
    save_design(answer, rig / "design.yaml", {"note": "kept"})
    judgement = selector.judge_file(rig / "design.yaml")
    assert judgement.findings == answer.judgement.findings
    assert judgement.axes == answer.judgement.axes
    assert judgement.buses == answer.judgement.buses
    assert judgement.order == answer.judgement.order
    assert judgement.changed == ()


def test_saving_again_gives_the_same_bytes(rig, capsys):
    design, machine = rig / "design.yaml", str(rig / "machine.yaml")
    written = []
    for _ in range(3):
        assert run_app(["pick", machine, "--save", str(design)]) == 0
        written.append(design.read_bytes())
    assert len(set(written)) == 1
    assert f"design kept in {design}" in capsys.readouterr().err


def test_a_saved_design_says_what_it_is_and_what_it_rests_on(rig, answer):
    save_design(answer, rig / "design.yaml", {"verdict": answer.verdict})
    text = (rig / "design.yaml").read_text()
    assert text.startswith(FIRST_LINE)
    data = yaml.safe_load(text)
    assert data["machine"] == "machine.yaml"
    assert [axis["axis"] for axis in data["axes"]] == ["feed", "lift"]
    assert [entry["file"] for entry in data["record"]["inputs"]] == ["machine.yaml", "parts.yaml"]
    assert str(rig) not in text


def test_a_saved_design_works_from_every_folder(rig, answer, tmp_path, monkeypatch, capsys):
    elsewhere = tmp_path / "kept" / "deep"
    elsewhere.mkdir(parents=True)
    save_design(answer, elsewhere / "design.yaml", {})
    assert "machine: ../../rig/machine.yaml" in (elsewhere / "design.yaml").read_text()
    for folder, path in ((tmp_path, "kept/deep/design.yaml"), (elsewhere, "design.yaml")):
        monkeypatch.chdir(folder)
        assert run_app(["judge", path]) == 0
        assert "changed" not in capsys.readouterr().out


def test_a_design_saved_with_relative_paths_works_from_another_folder(rig, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert run_app(["pick", "rig/machine.yaml", "--save", "design.yaml"]) == 0
    monkeypatch.chdir(rig)
    assert selector.judge_file("../design.yaml").changed == ()


def test_a_design_saved_through_a_link_to_a_folder_finds_its_machine(rig, answer, tmp_path):
    (tmp_path / "kept" / "deep").mkdir(parents=True)
    (tmp_path / "link").symlink_to(tmp_path / "kept" / "deep")
    save_design(answer, tmp_path / "link" / "design.yaml", {})
    for path in ("link/design.yaml", "kept/deep/design.yaml"):
        assert selector.judge_file(tmp_path / path).changed == ()


def test_ten_lines_by_hand_are_a_design(rig):
    (rig / "design.yaml").write_text(BY_HAND)
    assert BY_HAND.count("\n") == 10
    judgement = selector.judge_file(rig / "design.yaml")
    assert judgement.verdict == "holds"
    assert judgement.changed == ()
    assert [choice.joining for choice in judgement.design.axes] == [None, "parallel"]


def test_one_bus_may_be_written_as_a_list_of_one(rig):
    (rig / "one.yaml").write_text(BY_HAND)
    written = "buses: [{voltage: 24 V, supply: tarn-24, axes: [lift, feed]}]\n"
    (rig / "two.yaml").write_text(BY_HAND.replace("voltage: 24 V\nsupply: tarn-24\n", written))
    one, two = (selector.judge_file(rig / name) for name in ("one.yaml", "two.yaml"))
    assert one.findings == two.findings


def test_without_a_supply_what_depends_on_it_is_unknown(rig, capsys):
    (rig / "design.yaml").write_text(BY_HAND.replace("supply: tarn-24\n", ""))
    judgement = selector.judge_file(rig / "design.yaml")
    unknown = {finding.rule for finding in judgement.findings if finding.state == "unknown"}
    assert any("supply" in rule for rule in unknown)
    assert judgement.buses[0].available_power is None
    assert judgement.buses[0].peak_power > 0
    assert run_app(["judge", str(rig / "design.yaml")]) in (0, 1)
    assert "no supply named" in capsys.readouterr().out


def test_an_rms_setting_is_the_peak_over_the_root_of_two(rig):
    (rig / "design.yaml").write_text(
        BY_HAND.replace("current_peak: 2 A", "current_rms: 1.4142136 A")
    )
    _, design, _ = load_design(rig / "design.yaml")
    assert design.axes[1].peak == pytest.approx(2.0, rel=1e-7)


def test_changed_inputs_are_named(rig, answer, capsys):
    save_design(answer, rig / "design.yaml", {})
    parts = rig / "parts.yaml"
    parts.write_text(parts.read_text() + "# one more line\n")
    assert [Path(name).name for name in selector.judge_file(rig / "design.yaml").changed] == [
        "parts.yaml"
    ]
    assert run_app(["judge", str(rig / "design.yaml")]) == 0
    assert "changed since the design was saved:" in capsys.readouterr().out


def test_added_and_dropped_inputs_are_named(rig, answer):
    save_design(answer, rig / "design.yaml", {})
    machine = rig / "machine.yaml"
    (rig / "parts.yaml").rename(rig / "other.yaml")
    machine.write_text(machine.read_text().replace("parts.yaml", "other.yaml"))
    changed = {Path(name).name for name in selector.judge_file(rig / "design.yaml").changed}
    assert changed == {"machine.yaml", "other.yaml", "parts.yaml"}


@pytest.mark.parametrize(
    "record",
    ["record: none\n", "record: [1, 2]\n", "record: {inputs: 3}\n", "record: {inputs: [3, [4]]}\n",
     "record: {inputs: [{file: [a]}, {file: {b: c}}, {sha256: d}]}\n",
     "record: {inputs: [{file: machine.yaml}]}\n", 'record: {inputs: [{file: "a\\0b"}]}\n'],
)  # fmt: skip
def test_a_record_that_was_edited_breaks_nothing(rig, record, capsys):
    (rig / "design.yaml").write_text(BY_HAND + record)
    assert run_app(["judge", str(rig / "design.yaml")]) == 0
    assert not capsys.readouterr().err


# -- what saving refuses ----------------------------------------------------------------------


def test_a_file_of_somebody_else_is_not_overwritten(rig, answer):
    file = rig / "machine.yaml"
    before = file.read_bytes()
    assert faults_of(save_design, answer, file, {}) == ["occupied"]
    assert file.read_bytes() == before
    assert sorted(p.name for p in rig.iterdir()) == ["machine.yaml", "parts.yaml"]


@pytest.mark.parametrize("text", ["", FIRST_LINE[:-1], f"\n{FIRST_LINE}", BY_HAND])
def test_only_the_first_line_of_ours_lets_a_file_be_replaced(rig, answer, text):
    file = rig / "design.yaml"
    file.write_text(text)
    assert faults_of(save_design, answer, file, {}) == ["occupied"]
    assert file.read_text() == text


@pytest.mark.parametrize(
    "place", ["missing/design.yaml", "", "machine.yaml/design.yaml", "x" * 300]
)
def test_a_place_that_cannot_be_written_is_a_fault(rig, answer, place):
    assert faults_of(save_design, answer, rig / place, {})[0] in ("unwritable", "folder")
    assert sorted(p.name for p in rig.iterdir()) == ["machine.yaml", "parts.yaml"]


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write everywhere")
def test_a_read_only_folder_is_a_fault(rig, answer):
    rig.chmod(0o555)
    try:
        assert faults_of(save_design, answer, rig / "design.yaml", {}) == ["unwritable"]
    finally:
        rig.chmod(0o755)


def test_a_read_only_file_system_is_a_fault(answer):
    if os.access("/proc", os.W_OK) and not Path("/proc/self").exists():
        pytest.skip("there is no such file system here")
    assert faults_of(save_design, answer, "/proc/design.yaml", {}) == ["unwritable"]


def test_devices_and_pipes_are_left_alone(rig, answer):
    os.mkfifo(rig / "pipe.yaml")
    assert faults_of(save_design, answer, rig / "pipe.yaml", {}) == ["occupied"]
    if Path("/dev/zero").exists():
        assert faults_of(save_design, answer, "/dev/zero", {}) == ["occupied"]


def test_there_is_nothing_to_save_without_a_design(rig, answer):
    none = answer.model_copy(update={"judgement": None})
    assert faults_of(save_design, none, rig / "design.yaml", {}) == ["no-design"]


def test_a_design_that_cannot_be_kept_does_not_cost_the_answer(rig, capsys):
    machine = str(rig / "machine.yaml")
    assert run_app(["pick", machine, "--save", str(rig / "none" / "design.yaml")]) == 2
    written = capsys.readouterr()
    assert "proved" in written.out
    assert "unwritable" in written.err
    assert "the design was not kept" in written.err
    assert "nothing was computed" not in written.err


def test_a_design_that_does_not_exist_is_not_kept(rig, capsys):
    machine = rig / "machine.yaml"
    machine.write_text(machine.read_text().replace("0.12 N*m", "100 N*m"))
    design = rig / "design.yaml"
    assert run_app(["pick", str(machine), "--save", str(design)]) == 1
    assert not design.exists()
    assert "no design to keep" in capsys.readouterr().err


# -- whole or not at all ----------------------------------------------------------------------


def other(answer):
    """The same answer with a design that reads differently."""
    axes = tuple(a.model_copy(update={"current_peak": 9.0}) for a in answer.design.axes)
    design = Design(machine=answer.design.machine, axes=axes, buses=answer.design.buses)
    judgement = answer.judgement.model_copy(update={"design": design})
    return answer.model_copy(update={"judgement": judgement})


@pytest.mark.parametrize("step", ["fsync", "replace", "chmod", "open"])
@pytest.mark.parametrize("error", [OSError(28, "No space left on device"), KeyboardInterrupt()])
def test_a_write_that_fails_leaves_the_old_file_and_nothing_else(
    rig, answer, monkeypatch, step, error
):
    file = rig / "design.yaml"
    save_design(answer, file, {})
    before = file.read_bytes()

    def fail(*_arguments, **_options):
        raise error

    owner = {"fsync": os, "open": os}.get(step, Path)
    monkeypatch.setattr(owner, {"open": "fdopen"}.get(step, step), fail)
    expected = InputFaults if isinstance(error, OSError) else KeyboardInterrupt
    with pytest.raises(expected):
        save_design(other(answer), file, {})
    monkeypatch.undo()
    assert file.read_bytes() == before
    assert sorted(p.name for p in rig.iterdir()) == ["design.yaml", "machine.yaml", "parts.yaml"]


def test_the_rights_of_a_replaced_file_stay_and_a_new_one_has_the_usual_ones(rig, answer):
    file, plain = rig / "design.yaml", rig / "plain"
    plain.touch()
    save_design(answer, file, {})
    assert stat.S_IMODE(file.stat().st_mode) == stat.S_IMODE(plain.stat().st_mode)
    file.chmod(0o640)
    save_design(other(answer), file, {})
    assert stat.S_IMODE(file.stat().st_mode) == 0o640


def test_a_link_stays_a_link(rig, answer, tmp_path):
    target, link = tmp_path / "target.yaml", rig / "design.yaml"
    save_design(answer, target, {})
    link.symlink_to(target)
    save_design(other(answer), link, {})
    assert link.is_symlink()
    assert "9 A" in target.read_text()
    assert selector.load_design(link)


# Prepares an answer once, then lets child after child write it and kills each at another moment.
WRITER = """
import os, shutil, signal, sys, time
from selector import pick, load_problem
from selector.inputs.design_file import save_design
machine, design, copies = sys.argv[1:]
answer = pick(load_problem(machine))
for round in range(15):
    child = os.fork()
    if not child:
        for number in range(1, 10**9):
            padding = ["x" * 60] * 1000
            save_design(answer, design, {"number": number, "padding": padding, "last": number})
    time.sleep(0.05 + 0.007 * round)
    os.kill(child, signal.SIGKILL)
    os.waitpid(child, 0)
    if os.path.exists(design):
        shutil.copy(design, f"{copies}/{round}")
"""


def test_a_writer_that_is_killed_leaves_a_whole_file(rig, tmp_path):
    file, copies = rig / "design.yaml", tmp_path / "copies"
    copies.mkdir()
    arguments = [str(rig / "machine.yaml"), str(file), str(copies)]
    subprocess.run([sys.executable, "-c", WRITER, *arguments], check=True, timeout=60)
    found = list(copies.iterdir())
    assert len(found) > 5, "too few rounds lived long enough to write"
    for copy in found:
        text = copy.read_text()
        assert text.startswith(FIRST_LINE)
        record = yaml.load(text, Loader=yaml.CSafeLoader)["record"]
        assert record["number"] == record["last"]
        assert len(record["padding"]) == 1000
    left = [p.name for p in rig.iterdir() if p.suffix in (".yaml", ".yml")]
    assert sorted(left) == ["design.yaml", "machine.yaml", "parts.yaml"]
    assert selector.judge_file(file).verdict == "holds"
