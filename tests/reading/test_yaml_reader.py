"""YAML text becomes the values an engineer expects, with places; what is ambiguous or hostile is refused."""

from __future__ import annotations

import pytest

from outspread.errors import ModelError, Place
from outspread.reading.document import DEEPEST
from outspread.reading.yaml_reader import LARGEST_FILE, read_yaml


def refused(source: str | bytes) -> str:
    """The faults of the text, without the file's name."""
    with pytest.raises(ModelError) as caught:
        read_yaml("m", source.encode() if isinstance(source, str) else source)
    return str(caught.value)


# YAML 1.2.2, 10.3.2 (core schema): the regular expressions of null, bool, int and float.
@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("1e-3", 0.001),
        ("6.02e23", 6.02e23),
        ("1E+3", 1000.0),
        (".5", 0.5),
        ("5.", 5.0),
        ("-0.25", -0.25),
        ("+7", 7),
        ("0", 0),
        ("-0", 0),
        ("168", 168),
        ("true", True),
        ("False", False),
        ("null", None),
        ("~", None),
        ("", None),
        ("on", "on"),
        ("off", "off"),
        ("yes", "yes"),
        ("no", "no"),
        ("NO", "NO"),
        ("y", "y"),
        ("1e", "1e"),
        ("1.2.3", "1.2.3"),
        ("2025-03", "2025-03"),
        ("2025-03-01", "2025-03-01"),
        ("'1e-3'", "1e-3"),
        ('"no"', "no"),
        ("1/3", "1/3"),
        ("=", "="),
    ],
)
def test_scalar(text: str, value: object) -> None:
    """Unquoted scalars follow YAML 1.2, quoted ones are text."""
    assert read_yaml("m", f"a: {text}\n".encode()).value == {"a": value}


@pytest.mark.parametrize(
    "text",
    [
        "012",
        "-007",
        "00",
        "12:30",
        "1:20:30",
        "0x1F",
        "0o17",
        "0b11",
        "1_000",
        "1_0.5",
        ".inf",
        "-.INF",
        ".nan",
    ],
)
def test_ambiguous_scalars_are_refused_until_quoted(text: str) -> None:
    """What two readers read differently is refused at its place; in quotes it is text."""
    assert refused(f"a: {text}\n").startswith(f"m:1:4: `{text}` ")
    assert "quote it" in refused(f"a: {text}\n")
    assert read_yaml("m", f"a: '{text}'\n".encode()).value == {"a": text}


def test_keys_that_look_like_other_values_are_text() -> None:
    """A name `on`, `no` or `y` stays a name."""
    assert read_yaml("m", b"on: 1\nno: 2\ny: 3\n1: 4\n").value == {"on": 1, "no": 2, "y": 3, "1": 4}


def test_places_of_keys_and_values() -> None:
    """Lines and columns count from 1, in characters; quoted text starts behind its quote."""
    document = read_yaml("m", "é:\n  - {b: 'x + y', c: [1, 2]}\n".encode())
    assert document.key(("é", 0, "c")) == Place("m", 2, 18)
    assert document.at(("é", 0, "c", 1)) == Place("m", 2, 25)
    assert document.within(("é", 0, "b"), "x + y", 4, 5) == (Place("m", 2, 14), "    x + y\n        ^")


def test_place_of_a_missing_value_is_that_of_what_is_around_it() -> None:
    assert read_yaml("m", b"a:\n  b: 1\n").at(("a", "c", "d")) == Place("m", 2, 3)


def test_a_byte_order_mark_is_no_part_of_the_text() -> None:
    assert read_yaml("m", b"\xef\xbb\xbfa: 1\n").at(("a",)) == Place("m", 1, 4)


def test_long_formulas_are_shown_as_a_window_around_the_fault() -> None:
    """An excerpt has one line of text and its caret stands under the part to blame."""
    text = "a + " * 60 + "b"
    _, excerpt = read_yaml("m", f"f: {text}\n".encode()).within(("f",), text, len(text) - 1, len(text))
    line, caret = excerpt.split("\n")
    assert line[len(caret) - 1] == "b"
    assert len(line) < 110


def test_alias_bomb() -> None:
    """Nine levels of nine aliases, 10^9 values when expanded, are refused at the first anchor."""
    lines = ["a: &a [lol]"]
    for before, name in zip("abcdefgh", "bcdefghi", strict=True):
        lines.append(f"{name}: &{name} [{', '.join([f'*{before}'] * 9)}]")
    message = refused("\n".join(lines))
    assert message.split("\n")[0] == (
        "m:1:4: the anchor `&a` is not allowed; write each value out where it is used"
    )
    assert "m:2:8: the alias `*a` is not allowed; write the value out" in message.split("\n")


def test_merge_keys_need_aliases_and_are_refused() -> None:
    assert "m:2:5: the alias `*b` is not allowed" in refused("a: &b {c: 1}\n<<: *b\n")


def test_a_file_over_one_mebibyte() -> None:
    message = refused(b"a: " + b"x" * LARGEST_FILE)
    assert message == (
        "m: the file has 1,048,579 bytes, and a model has at most 1,048,576; "
        "put long tables into a CSV file beside the model"
    )


def test_many_values() -> None:
    """A file of a hundred thousand empty lists is refused without building them all."""
    assert refused("[" + "[]," * 100_000 + "]").startswith("m:1:149999: more than 50,000 values; ")


@pytest.mark.parametrize("opening", ["[", "{a: ", "- "])
def test_deep_nesting(opening: str) -> None:
    """Forty levels are read, the forty-first is refused, and 100,000 cost nothing more."""
    assert f"more than {DEEPEST} levels deep" in refused(opening * 41)
    assert f"more than {DEEPEST} levels deep" in refused(opening * 100_000)


def test_forty_levels_are_read() -> None:
    assert read_yaml("m", ("[" * 40 + "]" * 40).encode()).value


@pytest.mark.parametrize(
    ("source", "message"),
    [
        (b"\x00\x01\x02", "m: this is not a text file; a model is YAML text in UTF-8"),
        (b"\x89PNG\r\n\x1a\n\x00", "m: this is not a text file; a model is YAML text in UTF-8"),
        (b"\xff\xfea\x00", "m: the file is UTF-16 text, and a model is UTF-8; save it as UTF-8"),
        (b"a: 1\nb: \xe9t\xe9\n", "m:2:4: this byte is not UTF-8 text; save the file as UTF-8"),
        (b"a: 1\n\tb: 2\n", "m:2:1: a tab in the indentation; indent with spaces"),
        (b"a: \x1b[0m\n", "m:1:4: the control character U+001B cannot stand in a model; remove it"),
        (b"a: 1\nb\nc: 2\n", "m:2:1: a key without `:`; write `key: value`"),
        (b"a: 'x\n", "m:2:1: a quote is not closed before the end of the file"),
        (b"a: @x\n", "m:1:4: a value cannot start with '@'; quote the text"),
        (
            b"? [a]\n: 1\n",
            "m:1:3: a key must be a single word, and this is a list or a group; "
            "quote the text that starts with a bracket",
        ),
        (b"a: 1\na: 2\n", "m:2:1: the key `a` occurs twice in one group, first in line 1; remove one"),
    ],
)  # fmt: skip
def test_text_that_is_no_model(source: bytes, message: str) -> None:
    assert refused(source) == message


@pytest.mark.parametrize("source", ["", "\n\n", "# only a comment\n", "---\n...\n", "null\n", "\ufeff"])
def test_empty_file(source: str) -> None:
    assert refused(source) == (
        "m: the file is empty; a model begins with `outspread: 1`, "
        "and `outspread new NAME` writes one to start from"
    )


def test_all_faults_of_the_text_are_reported_at_once() -> None:
    assert refused("a: 012\nb: *c\nb: !d e\n").count("\n") == 3


def test_a_flood_of_faults_is_cut_short() -> None:
    assert refused("- 012\n" * 10_000).count("\n") < 200
