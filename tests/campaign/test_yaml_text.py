"""What YAML would let pass in silence is an error; what older YAML rules would change is left as written."""

from __future__ import annotations

import re

import pytest
import yaml

from planner.campaign.yaml_text import read_yaml
from planner.errors import InputError


def read(tmp_path, text):
    path = tmp_path / "x.yaml"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return read_yaml(path, "x.yaml")


def test_the_key_on_dates_and_sexagesimal_angles_stay_text(tmp_path):
    text = "on: 2026-11-10\nra: 06:14:22.10\nyes: no\nsmall: 1e-3\nnumber: 012\nnone:\ntruth: true\nlist: [1, 2.5]\n"
    data, _ = read(tmp_path, text)
    assert data == {
        "on": "2026-11-10", "ra": "06:14:22.10", "yes": "no", "small": 1e-3, "number": 12, "none": None,
        "truth": True, "list": [1, 2.5],
    }  # fmt: skip
    assert yaml.safe_load(text) != data  # the reason for our own rules


def test_every_key_and_item_has_its_line(tmp_path):
    _, source = read(tmp_path, "a: 1\nb:\n  - x\n  - {c: 3,\n     d: 4}\n")
    assert source.lines[("a",)] == 1
    assert source.lines[("b",)] == 2
    assert source.lines[("b", 0)] == 3
    assert source.lines[("b", 1, "c")] == 4
    assert source.lines[("b", 1, "d")] == 5


def test_lines_count_line_ends_of_other_systems(tmp_path):
    _, source = read(tmp_path, b"\xef\xbb\xbfa: 1\r\nb: 2\r\nc: 3\r\n")
    assert [source.lines[(key,)] for key in "abc"] == [1, 2, 3]


def test_aliases_repeat_a_value_as_written(tmp_path):
    data, source = read(tmp_path, "a: &x {b: 1}\nc: *x\n")
    assert data == {"a": {"b": 1}, "c": {"b": 1}}
    assert source.lines[("c",)] == 2


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "x.yaml: the file is empty"),
        ("# only a comment\n", "x.yaml: the file is empty"),
        (b"a: 1\nb: \xff\n", "x.yaml:2: byte 0xff is not UTF-8 text; save the file as UTF-8"),
        (b"a: 1\nb: \x07\n", "x.yaml:2: not valid YAML"),
        ("a: 1\nb: [1, 2\nc: 3\n", "x.yaml:3: not valid YAML"),
        ("a: 1\n\tb: 2\n", "x.yaml:2: not valid YAML"),
        ("a: 1\n---\nb: 2\n", "x.yaml:2: not valid YAML: expected a single document"),
        ("a: 1\nb: 2\na: 3\n", "x.yaml:3: key 'a' stands twice; the first is on line 1"),
        ("a:\n  - {b: 1, b: 1}\n", "x.yaml:2: key 'b' stands twice; the first is on line 2"),
        ("'a': 1\na: 2\n", "x.yaml:2: key 'a' stands twice"),
        ("[1]: 2\n", "x.yaml:1: a key must be a word"),
        (
            "a: !!python/object:os.system x\n",
            "x.yaml:1: the tag 'tag:yaml.org,2002:python/object:os.system' is not known",
        ),
        ("a: !own {b: 1}\n", "x.yaml:1: the tag '!own' is not known here; write the plain value"),
        ("a: &x [1, *x]\n", "x.yaml:1: an alias refers to a value that contains it"),
        ("a: " + "9" * 5000 + "\n", "x.yaml:1: '9999"),
    ],
)
def test_text_that_cannot_be_used_is_told_with_its_line(tmp_path, text, message):
    with pytest.raises(InputError, match=re.escape(message)):
        read(tmp_path, text)


def test_aliases_that_multiply_are_stopped(tmp_path):
    """Nine levels of ten aliases each would be a thousand million values."""
    text = "a0: &a0 [1,1,1,1,1,1,1,1,1,1]\n"
    for n in range(1, 9):
        text += f"a{n}: &a{n} [{','.join([f'*a{n - 1}'] * 10)}]\n"
    with pytest.raises(InputError, match=r"x\.yaml:1: the file holds more than 200000 values"):
        read(tmp_path, text)


@pytest.mark.parametrize("text", ["- " * 70 + "1\n", "- " * 2000 + "1\n", "[" * 20000 + "]" * 20000])
def test_text_nested_beyond_reason_is_refused_and_not_a_crash(tmp_path, text):
    """Each depth ends in another part of the reader: our own count, Python's limit, the YAML library's limit."""
    with pytest.raises(InputError, match=r"nested more than 60 levels deep|exceeded maximum nesting depth"):
        read(tmp_path, text)


def test_a_folder_in_place_of_a_file_is_told(tmp_path):
    with pytest.raises(InputError, match=r"x\.yaml: cannot be read: Is a directory"):
        read_yaml(tmp_path, "x.yaml")
