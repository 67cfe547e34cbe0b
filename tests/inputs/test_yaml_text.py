"""Text to plain data: every place is right, nothing is guessed, and no text breaks the reader."""

from __future__ import annotations

import pytest
import yaml
from hypothesis import example, given, settings
from hypothesis import strategies as st

from selector.inputs.yaml_text import DEEPEST, LARGEST_FILE, Node, parse, read_text

NESTED = """\
# a comment
name: rig
axes:
  - axis: über
    points: [{speed: 300 rpm, torque: 1 N*m},
             {speed: 5 rpm}]
  -   axis: "x: y"   # spaces
limits: {voltage: {min: 9 V}}
note: |
  two
  lines
"""


def read(text):
    """The data of faultless text."""
    node, faults = parse(text, "f.yaml")
    assert not faults
    return node


@pytest.mark.parametrize(
    ("path", "value", "place"),
    [
        (("name",), (2, 7), (2, 1)),
        (("axes",), (4, 3), (3, 1)),
        (("axes", 0), (4, 5), (4, 5)),
        (("axes", 0, "axis"), (4, 11), (4, 5)),
        (("axes", 0, "points"), (5, 13), (5, 5)),
        (("axes", 0, "points", 0), (5, 14), (5, 14)),
        (("axes", 0, "points", 0, "torque"), (5, 39), (5, 31)),
        (("axes", 0, "points", 1, "speed"), (6, 22), (6, 15)),
        (("axes", 1, "axis"), (7, 13), (7, 7)),
        (("limits", "voltage", "min"), (8, 25), (8, 20)),
        (("note",), (9, 7), (9, 1)),
    ],
)
def test_each_value_and_its_key_know_where_they_stand(path, value, place):
    node, found = read(NESTED).at(path)
    assert (node.line, node.column) == value
    assert found == place


def test_a_path_that_leads_nowhere_ends_at_the_last_thing_there_is():
    node, place = read(NESTED).at(("axes", 1, "points", 3, "speed"))
    assert (node.line, node.column) == place == (7, 7)


def test_nested_data_come_out_plain():
    assert read(NESTED).plain() == {
        "name": "rig",
        "axes": [
            {
                "axis": "über",
                "points": [{"speed": "300 rpm", "torque": "1 N*m"}, {"speed": "5 rpm"}],
            },
            {"axis": "x: y"},
        ],
        "limits": {"voltage": {"min": "9 V"}},
        "note": "two\nlines\n",
    }


@pytest.mark.parametrize(
    "text",
    ["yes", "no", "on", "off", "true", "null", "~", "12:30", "010", "0x1f", "1e3", "1_000", ".nan",
     ".inf", "2026-01-02", "3.10", "-0", "="],
)  # fmt: skip
def test_bare_words_and_figures_stay_text(text):
    assert read(f"key: {text}\nlist: [{text}]\n{text}: key\n").plain() == {
        "key": text,
        "list": [text],
        text: "key",
    }


def test_quotes_say_that_nothing_is_meant():
    assert read("note: ''\nother: \"\"\n").plain() == {"note": "", "other": ""}
    node, faults = parse("note:\n", "f.yaml")
    assert node.value["note"].spoiled
    assert [fault.name for fault in faults] == ["empty-value"]


def test_nesting_is_read_as_deep_as_it_says_and_no_deeper():
    assert read("[" * (DEEPEST + 1) + "]" * (DEEPEST + 1))
    _, faults = parse("[" * (DEEPEST + 2) + "]" * (DEEPEST + 2), "f.yaml")
    assert [(fault.name, fault.column) for fault in faults] == [("too-deep", DEEPEST + 2)]


def test_all_faults_of_form_come_together():
    _, faults = parse("a: &x 1\nb: *x\na: 2\nc: !t 3\nd:\n", "f.yaml")
    assert [(fault.line, fault.name) for fault in faults] == [
        (1, "anchor"),
        (2, "alias"),
        (3, "doubled-key"),
        (4, "tag"),
        (5, "empty-value"),
    ]


def test_a_file_that_grows_while_it_is_read_is_refused(tmp_path, monkeypatch):
    file = tmp_path / "f.yaml"
    file.write_text("a: 1\n")
    monkeypatch.setattr("selector.inputs.yaml_text.LARGEST_FILE", 3)
    assert [fault.name for fault in read_text(file, "f")[2]] == ["huge-file"]
    assert LARGEST_FILE == 2**26


def nodes(node):
    """A node and all below it."""
    yield node
    below = node.value.values() if isinstance(node.value, dict) else node.value
    for inner in below if isinstance(node.value, dict | list) else ():
        yield from nodes(inner)


YAMLISH = st.text(alphabet=" \n\t-:?[]{},&*!|>'\"%@#~<=ab1é\r\x85\u2028\ufeff\x00\x1b", max_size=60)


@settings(max_examples=600)
@given(st.one_of(st.text(max_size=80), YAMLISH))
@example("%")
@example("---")
@example("...\n---\n")
@example("? ? ? a")
@example("\ufeff")
@example("a: b\n\ufeffc: d")
@example("- - - - *a")
@example("<<: <<")
@example("!<tag:x> a: !<!> b")
@example("a: \ud800")
def test_no_text_breaks_the_reader(text):
    node, faults = parse(text, "f.yaml")
    lines = text.count("\n") + text.count("\r") + 1
    for fault in faults:
        assert 0 <= fault.line <= lines + 1
        assert fault.found
        assert fault.expected
    if node is None:
        assert faults
    else:
        assert all(isinstance(inner, Node) for inner in nodes(node))


PLAIN = st.text(alphabet=st.characters(codec="utf-8", categories=("L", "N", "P", "S", "Zs")))
DATA = st.recursive(
    PLAIN,
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(PLAIN, inner, max_size=4),
    max_leaves=12,
)


@settings(max_examples=150)
@given(DATA)
def test_what_another_writer_writes_is_read_back(data):
    text = yaml.dump(data, Dumper=Quoting, allow_unicode=True)
    assert read(text).plain() == data


class Quoting(yaml.SafeDumper):
    """Writes every text between quotes and repeats what is equal."""

    def ignore_aliases(self, data):
        return True

    def represent_text(self, data):
        return self.represent_scalar("tag:yaml.org,2002:str", data, style='"')


Quoting.add_representer(str, Quoting.represent_text)
