"""YAML files read as plain data with places; what is not plain data is refused, and nothing is ever raised."""

from __future__ import annotations

import io
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from ruamel.yaml import YAML

from benchrun.errors import Problem
from benchrun.yaml_source import MAX_BYTES, MAX_DEPTH, MAX_NODES, Placed, PlacedList, read_source, read_text


def told(text: str) -> list[str]:
    return [str(problem) for problem in read_text(text, "f.yaml").problems]


def test_data_and_places() -> None:
    source = read_text("a: 1\nb:\n  - x\n  - {c: -2.5 dBm, d: [true, null]}\n", "f.yaml")
    assert source.problems == []
    assert source.data == {"a": 1, "b": ["x", {"c": "-2.5 dBm", "d": [True, None]}]}
    assert source.mark(("a",)) == (1, 4)
    assert source.mark(("a",), at_key=True) == (1, 1)
    assert source.mark(("b", 0)) == (3, 5)
    assert source.mark(("b", 1, "c")) == (4, 9)
    assert source.mark(("b", 1, "c"), at_key=True) == (4, 6)
    assert source.mark(("b", 1, "d", 1)) == (4, 29)


def test_the_place_of_something_absent_is_that_of_what_it_is_absent_from() -> None:
    source = read_text("a:\n  b: {c: 1}\n", "f.yaml")
    assert source.mark(("a", "b", "nothing"), at_key=True) == (2, 3)
    assert source.mark(("nothing",)) == (1, 1)


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("42", 42),
        ("-7", -7),
        ("0", 0),
        ("0.6", 0.6),
        ("1e3", 1000.0),
        ("true", True),
        ("False", False),
        ("null", None),
        ("~", None),
        ("", None),
        ("'42'", "42"),
        ("0042", "0042"),
        ("+5", "+5"),
        ("-0", "-0"),
        ("yes", "yes"),
        ("off", "off"),
        ("0x1F", "0x1F"),
        ("1_000", "1_000"),
        (".inf", ".inf"),
        ("12:30", "12:30"),
        ("2026-12-01", "2026-12-01"),
    ],
)
def test_scalars_are_guessed_sparingly(text: str, value: object) -> None:
    source = read_text(f"x: {text}\n", "f.yaml")
    assert source.problems == []
    assert source.data == {"x": value}
    assert type(source.data["x"]) is type(value)


def test_a_decimal_comma_in_a_flow_mapping_is_put_back_together() -> None:
    source = read_text("sweep: {from: 3,5 GHz, to: 4 GHz}\n", "f.yaml")
    assert source.data == {"sweep": {"from": "3,5 GHz", "to": "4 GHz"}}
    assert source.mark(("sweep", "from")) == (1, 15)


@pytest.mark.parametrize("text", ["{a: 1, 5: }", "{a: x,5 GHz}", "{a: '3',5 GHz}", "{a: 3,5 GHz: 1}"])
def test_other_commas_stay_what_they_are(text: str) -> None:
    data = read_text(f"{text}\n", "f.yaml").data
    assert len(data) == 2


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("a: 1\na: 2\n", "f.yaml:2:1: 'a' stands here twice; keep one of them."),
        (
            "a: &x 1\n",
            "f.yaml:1:4: the anchor '&x' is not taken: write the value out where it is needed.",
        ),
        (
            "a: !!python/name:os.system\n",
            "f.yaml:1:4: the tag !!python/name:os.system is not taken: files are plain data.",
        ),
        (
            "<<: {a: 1}\n",
            "f.yaml:1:1: merge keys (<<) are not taken: write the values out where they are needed.",
        ),
        ("? {a: 1}\n: 2\n", "f.yaml:1:3: a key must be plain text."),
        ("a: 1\n---\nb: 2\n", "f.yaml:2:1: a second document begins here; a file holds one."),
        ("%YAML 1.1\n---\na: 1\n", "f.yaml:2:1: directives (%YAML, %TAG) are not taken."),
        ("", "f.yaml: is empty."),
        ("# only a comment\n", "f.yaml: is empty."),
        ("a: [1, 2\n", "f.yaml:2:1: this is not YAML: expected ',' or ']', but got '<stream end>'."),
        (
            "a:\n\tb: 1\n",
            "f.yaml:2:1: this is not YAML: found character '\\t' that cannot start any token. "
            "Lines are indented with spaces, never with tabs.",
        ),
        (
            "set: {pump.frequency: {frequency} - 7 MHz}\n",
            "f.yaml:1:35: this is not YAML: expected ',' or '}', but got '-'. "
            'A reference is written in quotes: "{frequency}".',
        ),
    ],
)
def test_what_is_refused_is_told_with_its_place(text: str, message: str) -> None:
    assert told(text) == [message]


def test_aliases_are_refused_where_they_stand() -> None:
    assert told("a: &x [1]\nb: *x\nc: *x\n") == [
        "f.yaml:1:4: the anchor '&x' is not taken: write the value out where it is needed.",
        "f.yaml:2:4: the alias '*x' is not taken: write the value out where it is needed.",
        "f.yaml:3:4: the alias '*x' is not taken: write the value out where it is needed.",
    ]


def test_aliases_that_multiply_cost_nothing() -> None:
    lines = ["a0: &a0 [x]", *(f"a{n}: &a{n} [*a{n - 1}, *a{n - 1}]" for n in range(1, 200))]
    source = read_text("\n".join(lines), "f.yaml")
    assert len(source.problems) == 200 + 2 * 199


def test_depth_is_bounded() -> None:
    assert read_text("[" * MAX_DEPTH + "]" * MAX_DEPTH, "f.yaml").problems == []
    deep = told("[" * 50_000)
    assert deep == [f"f.yaml:1:{MAX_DEPTH + 2}: nested deeper than {MAX_DEPTH} levels; no file of this kind is."]


def test_number_of_values_is_bounded() -> None:
    (message,) = told("[" + "1," * (MAX_NODES + 10) + "]")
    assert message.endswith(f": more than {MAX_NODES} values; no file of this kind is.")


def test_files_that_cannot_be_read_are_told(tmp_path: Path) -> None:
    missing, folder, binary, large = (tmp_path / name for name in ("missing.yaml", "folder", "binary", "large"))
    folder.mkdir()
    binary.write_bytes(b"a: \xff\xfe")
    large.write_bytes(b"a" * (MAX_BYTES + 1))
    assert read_source(missing).problems == [
        Problem(str(missing), 0, 0, "there is no such file. Check the name and the folder.")
    ]
    assert read_source(folder).problems == [Problem(str(folder), 0, 0, "is a folder, not a file.")]
    assert read_source(binary).problems == [Problem(str(binary), 0, 0, "is not UTF-8 text (byte 3). Save it as UTF-8.")]
    assert read_source(large).problems == [
        Problem(str(large), 0, 0, f"is larger than {MAX_BYTES} bytes; no file of this kind is.")
    ]


def test_an_unreadable_file_is_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refused(_path: Path) -> bytes:
        raise PermissionError(13, "Permission denied")

    path = tmp_path / "locked.yaml"
    path.write_text("a: 1\n", "utf-8")
    monkeypatch.setattr(Path, "read_bytes", refused)
    assert [str(problem) for problem in read_source(path).problems] == [f"{path}: cannot be read (Permission denied)."]


def test_a_byte_order_mark_is_no_mistake(tmp_path: Path) -> None:
    path = tmp_path / "f.yaml"
    path.write_bytes(b"\xef\xbb\xbfa: 1\n")
    assert read_source(path).data == {"a": 1}


@given(st.text(max_size=200))
def test_any_text_is_data_or_told(text: str) -> None:
    source = read_text(text, "f.yaml")
    assert source.data is not None or source.problems


@given(st.text(alphabet="ab:-{}[],&*!|>'\"#%?<\n\t 1.", max_size=80))
def test_any_text_of_yaml_signs_is_data_or_told(text: str) -> None:
    source = read_text(text, "f.yaml")
    lines = text.count("\n") + 2
    assert all(0 <= problem.line <= lines for problem in source.problems)


KEYS = st.text("abcdefgh-", min_size=1, max_size=8).filter(lambda key: not key.startswith("-"))
# Without ":" and "?": the writer leaves those unquoted that begin a text, and its own reader takes them for signs.
WORDS = st.sampled_from("abcXYZ \u00e4\u00b5.0123456789eE+-'\"#,_/{}[]&*!|>%@`~")
DATA = st.recursive(
    st.none() | st.booleans() | st.integers(-(10**9), 10**9) | st.text(WORDS, max_size=20),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(KEYS, inner, max_size=4),
    max_leaves=20,
)


@given(st.dictionaries(KEYS, DATA, min_size=1, max_size=5))
def test_what_another_writer_writes_is_read_with_its_places(data: dict[str, Any]) -> None:
    # ruamel.yaml writes; the constructor that reads it back here is ours.
    stream = io.StringIO()
    writer = YAML(typ="safe", pure=True)
    writer.representer.ignore_aliases = lambda *_: True
    writer.dump(data, stream)
    source = read_text(stream.getvalue(), "f.yaml")
    assert source.problems == []
    assert source.data == data
    _check_places(source.data, source.text.split("\n"))


def _check_places(data: Any, lines: list[str]) -> None:
    if isinstance(data, Placed):
        for key, value in data.items():
            line, column = data.keys_at[key]
            assert lines[line - 1][column - 1 :].lstrip("'\"").startswith(key)
            _check_places(value, lines)
    elif isinstance(data, PlacedList):
        assert len(data) == len(data.items_at)
        for value in data:
            _check_places(value, lines)
