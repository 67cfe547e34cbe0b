"""Every faulty input ends with the right fault at the right place, and never with a traceback.

``bad/`` holds pairs: a faulty file, and beside it all that is said about it. The first word of a
name tells the command. Files that no editor would write are made here.
"""

from __future__ import annotations

import os
import re
from pathlib import Path
from random import Random

import pytest

from selector.cli import run_app

HERE = Path(__file__).parent
BAD = sorted((HERE / "bad").glob("*.yaml"))
COMMANDS = {"machine": "pick", "form": "pick", "design": "judge"}
PLACE = re.compile(
    r"(?P<file>[^:\n]+)(?::(?P<line>\d+):(?P<column>\d+))?: (?P<name>[a-z]+(-[a-z]+)*)"
)
GOOD_FILES = ["design.yaml", "machine.yaml", "parts.yaml"]
MACHINE = (HERE / "good" / "machine.yaml").read_text()
PARTS = (HERE / "good" / "parts.yaml").read_text()


def said(capsys, *arguments):
    """What a faulty call writes to standard error; nothing else, and exit code 2."""
    code = run_app([str(argument) for argument in arguments])
    written = capsys.readouterr()
    assert (code, written.out) == (2, ""), written.err
    assert "Traceback" not in written.err
    return written.err


def places(text):
    """File, line, column and name of each fault."""
    found = [PLACE.fullmatch(line) for line in text.splitlines() if not line.startswith(" ")][:-1]
    assert all(found), text
    return [(m["file"], int(m["line"] or 0), int(m["column"] or 0), m["name"]) for m in found]


@pytest.mark.parametrize("file", BAD, ids=lambda file: file.stem)
def test_a_faulty_file_is_told_with_place_finding_and_remedy(file, capsys, monkeypatch):
    monkeypatch.chdir(file.parent)
    command = COMMANDS.get(file.stem.partition("-")[0], "catalogue")
    assert said(capsys, command, file.name) == file.with_suffix(".txt").read_text()


@pytest.mark.parametrize("file", BAD, ids=lambda file: file.stem)
def test_what_is_told_of_a_file_is_in_order_and_stands_in_it(file):
    found = places(file.with_suffix(".txt").read_text())
    assert found == sorted(found)
    for name, line, column, _ in found:
        text = (file.parent / name).read_text().splitlines()
        assert line == column == 0 or column <= len(text[line - 1]) + 1


def test_every_bad_file_has_its_message_and_every_message_its_file():
    assert len(BAD) > 100
    assert {f.stem for f in BAD} == {f.stem for f in (HERE / "bad").glob("*.txt")}


def test_the_good_files_beside_them_are_good(capsys):
    for command, file in (("judge", "design"), ("pick", "machine"), ("catalogue", "parts")):
        assert run_app([command, str(HERE / "good" / f"{file}.yaml")]) == 0
    assert not capsys.readouterr().err


# -- files that no editor would write ---------------------------------------------------------


@pytest.mark.parametrize(
    ("data", "line", "column", "name", "part"),
    [
        (b"name: rig\0\n", 0, 0, "no-text", "a zero byte"),
        (b"\x7fELF\x02\x01\x01\0\0\0", 0, 0, "no-text", "save it as UTF-8 if it is text"),
        ("name: \xe9tui\n".encode("latin-1"), 1, 7, "no-text", "0xe9"),
        ("# \xfc\nname: ".encode() + b"\xfc\n", 2, 7, "no-text", "0xfc"),
        (MACHINE.encode("utf-16"), 1, 1, "no-text", "save the file as UTF-8"),
        (MACHINE.encode("utf-16-le"), 0, 0, "no-text", "save it as UTF-8"),
        (b"\xef\xbb\xbfname: \xff\n", 1, 7, "no-text", "0xff"),
        ("name: rig\u2028currency: EUR\n".encode(), 1, 10, "control-character", "U+2028"),
        ("name: \x9b31mrig\n".encode(), 1, 7, "control-character", "U+009B"),
        (b"a: 1\r\nb: &x 2\r\n", 2, 4, "anchor", "&x"),
        (b"[" * 900, 1, 22, "too-deep", "20 levels"),
        (b"[" * 100_000, 1, 1001, "too-deep", "20 levels"),
        (b"{a: " * 100_000, 1, 82, "too-deep", "20 levels"),
        (b"%YAML 3.0\n---\na: 1\n", 1, 1, "broken-yaml", ""),
        (b"%TAG ! tag:x,2000:\n---\na: !b 1\n", 3, 4, "tag", ""),
    ],
)
def test_bytes_that_are_no_text_of_ours(tmp_path, capsys, data, line, column, name, part):
    file = tmp_path / "machine.yaml"
    file.write_bytes(data)
    text = said(capsys, "pick", file)
    assert (str(file), line, column, name) in places(text)
    assert part in text


def test_a_byte_order_mark_and_windows_line_ends_are_no_fault(tmp_path, capsys):
    (tmp_path / "parts.yaml").write_text(PARTS)
    file = tmp_path / "machine.yaml"
    file.write_bytes(b"\xef\xbb\xbf" + MACHINE.replace("\n", "\r\n").encode())
    assert run_app(["pick", str(file)]) == 0
    assert "proved" in capsys.readouterr().out


def test_a_huge_file_is_refused_unread(tmp_path, capsys):
    file = tmp_path / "machine.yaml"
    with file.open("wb") as stream:
        stream.truncate(64 * 1024 * 1024 + 1)
    text = said(capsys, "pick", file)
    assert places(text) == [(str(file), 0, 0, "huge-file")]
    assert "67108865 bytes" in text
    assert "at most 64 MiB" in text


@pytest.mark.parametrize("command", ["pick", "judge", "catalogue"])
def test_a_missing_file_comes_with_the_name_most_like_it(command, tmp_path, capsys):
    (tmp_path / "carriage.yaml").write_text(MACHINE)
    text = said(capsys, command, tmp_path / "cariage.yaml")
    assert places(text) == [(str(tmp_path / "cariage.yaml"), 0, 0, "missing-file")]
    assert 'there is "carriage.yaml" beside it' in text
    assert "check name and folder" in said(capsys, command, tmp_path / "nowhere" / "x.yaml")


@pytest.mark.parametrize("command", ["pick", "judge"])
def test_a_folder_is_no_machine_and_no_design(command, tmp_path, capsys):
    assert places(said(capsys, command, tmp_path)) == [(str(tmp_path), 0, 0, "folder")]


def test_a_catalogue_folder_without_yaml_is_named(tmp_path, capsys):
    (tmp_path / "notes.txt").write_text("nothing")
    text = said(capsys, "catalogue", tmp_path)
    assert places(text) == [(str(tmp_path), 0, 0, "empty-folder")]
    machine = tmp_path / "machine.yaml"
    (tmp_path / "parts").mkdir()
    machine.write_text(MACHINE.replace("parts.yaml", "parts"))
    assert places(said(capsys, "pick", machine)) == [(f"{tmp_path}/parts", 0, 0, "empty-folder")]


@pytest.mark.parametrize("command", ["pick", "judge", "catalogue"])
@pytest.mark.parametrize("device", ["/dev/zero", "/dev/null"])
def test_a_device_is_not_read(command, device, capsys):
    if not Path(device).exists():
        pytest.skip("there is no such device here")
    assert places(said(capsys, command, device)) == [(device, 0, 0, "no-file")]


def test_a_pipe_is_not_waited_for(tmp_path, capsys):
    os.mkfifo(tmp_path / "pipe.yaml")
    assert places(said(capsys, "pick", tmp_path / "pipe.yaml"))[0][3] == "no-file"
    assert places(said(capsys, "catalogue", tmp_path))[0][3] == "no-file"


@pytest.mark.skipif(os.geteuid() == 0, reason="root may read everything")
def test_a_file_that_may_not_be_read(tmp_path, capsys):
    file = tmp_path / "machine.yaml"
    file.write_text(MACHINE)
    file.chmod(0)
    text = said(capsys, "pick", file)
    assert places(text) == [(str(file), 0, 0, "unreadable")]
    assert "Permission denied" in text


def test_a_file_whose_reading_fails_is_named(tmp_path, capsys, monkeypatch):
    file = tmp_path / "machine.yaml"
    file.write_text(MACHINE)

    def refuse(*_arguments, **_options):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(Path, "open", refuse)
    text = said(capsys, "pick", file)
    assert places(text) == [(str(file), 0, 0, "unreadable")]
    assert "Permission denied" in text


@pytest.mark.parametrize("command", ["pick", "judge", "catalogue"])
@pytest.mark.parametrize("name", ["x" * 5000, "a\0b", "", "\x1b[31mred", "\udcff.yaml"])
def test_odd_names_of_files_are_faults_too(command, name, capsys, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    text = said(capsys, command, name)
    assert "\x1b" not in text
    text.encode("utf-8")


@pytest.mark.parametrize("name", ["x" * 400, '"a\\0b"', "/", "~", '"\\e[31m"'])
def test_odd_names_of_catalogues_are_faults_too(name, capsys, tmp_path):
    file = tmp_path / "machine.yaml"
    file.write_text(MACHINE.replace("parts.yaml", name))
    text = said(capsys, "pick", file)
    assert "\x1b" not in text
    assert "\0" not in text


# -- several faults ----------------------------------------------------------------------------


def test_faults_of_all_files_come_in_one_run_by_file_and_place(tmp_path, capsys):
    (tmp_path / "b-motors.yaml").write_text(
        PARTS.replace("1.7 A", "1700 A").replace("1.5 ohm", "1.5 V").replace("moss-30", "plover-4")
    )
    (tmp_path / "c-more.yaml").write_text("motors:\n  - part: plover-8\n    price: 3 eur\n")
    (tmp_path / "d-broken.yaml").write_text('motors: "\n')
    machine = tmp_path / "a-machine.yaml"
    catalogues = "[b-motors.yaml, c-more.yaml, d-broken.yaml, e-missing.yaml]"
    machine.write_text(
        MACHINE.replace("parts.yaml", catalogues)
        .replace("240 rpm", "240 Nm")
        .replace("0.05 N*m", "0,05 N*m")
    )
    found = [
        (Path(f).name, line, name) for f, line, _, name in places(said(capsys, "pick", machine))
    ]
    assert found == [
        ("a-machine.yaml", 3, "missing-file"),
        ("a-machine.yaml", 8, "wrong-kind"),
        ("a-machine.yaml", 10, "no-number"),
        ("b-motors.yaml", 12, "absurd-size"),
        ("b-motors.yaml", 13, "wrong-kind"),
        *[("c-more.yaml", 2, "missing-key")] * 6,
        ("c-more.yaml", 3, "no-price"),
        ("d-broken.yaml", 1, "broken-yaml"),
    ]


def test_a_part_named_in_two_files_is_told_where_it_stands_already(tmp_path, capsys):
    (tmp_path / "one.yaml").write_text(PARTS)
    (tmp_path / "two.yml").write_text("currency: EUR\n" + PARTS[PARTS.index("supplies:") :])
    text = said(capsys, "catalogue", tmp_path)
    assert places(text) == [(f"{tmp_path}/two.yml", 3, 5, "doubled-part")]
    line = PARTS[: PARTS.index("part: tarn-24")].count("\n") + 1
    assert f"it stands at {tmp_path}/one.yaml:{line}:5 already" in text


def test_one_fault_is_told_once(tmp_path, capsys):
    file = tmp_path / "machine.yaml"
    (tmp_path / "parts.yaml").write_text(PARTS)
    file.write_text(MACHINE.replace("EUR", "&e EUR").replace("name: rig", "name:"))
    text = said(capsys, "pick", file)
    assert [(line, name) for _, line, _, name in places(text)] == [
        (1, "empty-value"),
        (2, "anchor"),
    ]
    assert text.endswith("2 faults; nothing was computed\n")


def test_a_driven_point_may_have_a_negative_torque(tmp_path, capsys):
    (tmp_path / "parts.yaml").write_text(PARTS)
    file = tmp_path / "machine.yaml"
    file.write_text(MACHINE.replace("torque: 0.12", "torque: -0.12"))
    assert run_app(["pick", str(file)]) in (0, 1)
    assert not capsys.readouterr().err


# -- slips at random ---------------------------------------------------------------------------

PIECES = ["", "yes", "0", "-1", "1e9", "1e-9", "[]", "{}", "[a, [b]]", "{a: {b: c}}", "~", "5 V",
          "7 %", "2 A", "0 N*m", "peak", "''", "- x", "é", "1 mm x 2 mm", "{1: 2}"]  # fmt: skip


def slipped(text, random):
    """A good file with one slip: a line lost, doubled, moved or indented, or another value."""
    lines = text.splitlines()
    at = random.randrange(len(lines))
    kind = random.choice(["lose", "double", "move", "indent", "value", "value", "value", "inner"])
    if kind == "lose":
        del lines[at]
    elif kind == "double":
        lines.insert(at, lines[at])
    elif kind == "move":
        lines.insert(random.randrange(len(lines)), lines.pop(at))
    elif kind == "indent":
        lines[at] = "  " + lines[at]
    elif kind == "value":
        lines[at] = lines[at].split(": ")[0] + ": " + random.choice(PIECES)
    else:
        values = list(re.finditer(r"(?<=: )[^,{}\[\]]+", lines[at])) or [re.match("", lines[at])]
        value = random.choice(values)
        start, end = value.span()
        lines[at] = lines[at][:start] + random.choice(PIECES) + lines[at][end:]
    return "\n".join(lines) + "\n"


@pytest.mark.parametrize("seed", range(24))
def test_a_random_slip_never_ends_in_a_traceback(seed, tmp_path, capsys):
    random = Random(seed)
    for _ in range(10):
        texts = {name: (HERE / "good" / name).read_text() for name in GOOD_FILES}
        for name in random.sample(GOOD_FILES, random.choice([1, 1, 2])):
            texts[name] = slipped(texts[name], random)
        for name, text in texts.items():
            (tmp_path / name).write_text(text)
        code = run_app(["judge", str(tmp_path / "design.yaml")])
        written = capsys.readouterr()
        assert code in (0, 1, 2), written.err
        assert bool(written.err) == (code == 2)
        if code == 2:
            assert places(written.err)
