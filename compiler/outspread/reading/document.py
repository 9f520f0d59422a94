"""Text of a model file, or a Python mapping, to plain values with the place of every key and value.

YAML by the events of the parser with the scalars of YAML 1.2's core schema; whatever two readers could
take for two different things is refused here. What the keys mean is left to `shape` and `build`.
"""

from __future__ import annotations

import json
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from numbers import Integral, Real

import yaml

from outspread.errors import Fault, ModelError, Place
from outspread.reading.words import quoted

Path = tuple[str | int, ...]

LARGEST_FILE = 1 << 20  # bytes
DEEPEST = 40  # levels of mappings and lists
MOST_VALUES = 200_000


@dataclass(frozen=True)
class Spot:
    """Where a value stands and how it was written.

    `text`: a scalar as written, without quotes; "" for mappings and lists. `first`: column of the first
    character of `text` if each of its characters stands in the file one to one, else 0.
    """

    place: Place
    text: str = ""
    first: int = 0


@dataclass(frozen=True)
class Document:
    """A file's values (dict, list, str, int, float, bool, None) and where each key and each value stands."""

    file: str
    source: bytes
    value: object
    keys: Mapping[Path, Place] = field(repr=False)
    spots: Mapping[Path, Spot] = field(repr=False)

    def at(self, path: Path) -> Place:
        """Place of the value at `path`, or of the nearest thing around it that exists."""
        while path and path not in self.spots:
            path = path[:-1]
        return self.spots[path].place if path in self.spots else Place(self.file)

    def key(self, path: Path) -> Place:
        """Place of the key at `path`; of the value where there is no such key."""
        return self.keys.get(path) or self.at(path)

    def text(self, path: Path) -> str:
        """The scalar at `path` as written."""
        return self.spots[path].text

    def within(self, path: Path, text: str, start: int, end: int) -> tuple[Place, str]:
        """Place of text[start:end] of the scalar at `path`, with an excerpt that puts a caret under it."""
        spot = self.spots.get(path)
        place = self.at(path)
        if spot is not None and spot.first and spot.text == text:
            place = Place(place.file, place.line, spot.first + start)
        return place, _caret(text, start, end)


def _caret(text: str, start: int, end: int) -> str:
    """The text on one line and carets under [start, end), a window of it where it is long."""
    flat = "".join(" " if c.isspace() else c if c.isprintable() else "�" for c in text)
    start = max(0, min(start, len(flat)))
    end = max(start + 1, min(end, len(flat)))
    low, high = (0, len(flat)) if len(flat) <= 90 else (max(0, start - 40), start + 50)
    lead, trail = ("…" if low else ""), ("…" if high < len(flat) else "")
    carets = "^" * max(1, min(end, high) - start)
    return f"    {lead}{flat[low:high]}{trail}\n    {' ' * (len(lead) + start - low)}{carets}"


# --- scalars ---------------------------------------------------------------------------------------------

_INTEGER = re.compile(r"[-+]?(?:0|[1-9][0-9]*)\Z")
_FLOAT = re.compile(r"[-+]?(?:\.[0-9]+|[0-9]+(?:\.[0-9]*)?)(?:[eE][-+]?[0-9]+)?\Z")
_LEADING_ZERO = re.compile(r"[-+]?0[0-9_]+\Z")
_SEXAGESIMAL = re.compile(r"[-+]?[0-9][0-9_]*(?::[0-5]?[0-9])+(?:\.[0-9_]*)?\Z")
_OTHER_BASE = re.compile(r"[-+]?0[xob][0-9a-fA-F_]+\Z")
_UNDERSCORED = re.compile(r"[-+]?[0-9][0-9_]*(?:\.[0-9_]*)?(?:[eE][-+]?[0-9]+)?\Z")
_NOT_FINITE = re.compile(r"(?:[-+]?\.(?:inf|Inf|INF)|\.(?:nan|NaN|NAN))\Z")
_WORDS: dict[str, bool | None] = {
    "": None, "~": None, "null": None, "Null": None, "NULL": None,
    "true": True, "True": True, "TRUE": True, "false": False, "False": False, "FALSE": False,
}  # fmt: skip


def _plain(text: str) -> tuple[object, str]:
    """Value of an unquoted scalar by YAML 1.2's core schema, and what is wrong with it ("" if nothing).

    Refused as ambiguous: whatever YAML 1.1 and 1.2 read as two different values, or both read as a number
    that the writer may have meant as text.
    """
    if text in _WORDS:
        return _WORDS[text], ""
    if _LEADING_ZERO.match(text):
        return None, f"{quoted(text)} can be read as octal or as decimal; quote it, or drop the leading zeros"
    if _INTEGER.match(text):
        value = int(text) if len(text) <= 300 else math.inf
        return value, "" if math.isfinite(value) else f"{quoted(text)} is too long for a number"
    if _FLOAT.match(text):
        real = float(text)
        if not math.isfinite(real):
            return None, f"{quoted(text)} is too large for a number; the largest is 1.7e308"
        if real == 0 and re.search(r"[1-9]", re.split("[eE]", text)[0]):
            return (
                None,
                f"{quoted(text)} is too small for a number and would be read as 0; the smallest is 1e-308",
            )
        return real, ""
    if _SEXAGESIMAL.match(text):
        return None, f"{quoted(text)} can be read as a number to base 60 or as text; quote it"
    if _OTHER_BASE.match(text):
        return (
            None,
            f"{quoted(text)} can be read as a number to another base or as text; quote it, or write it in decimal",
        )
    if "_" in text and _UNDERSCORED.match(text):
        return None, f"{quoted(text)} can be read as a number or as text; quote it, or drop the underscores"
    if _NOT_FINITE.match(text):
        return None, f"{quoted(text)} is no finite number; leave out a limit that does not exist, or quote it"
    return text, ""


# --- YAML ------------------------------------------------------------------------------------------------

#: what the parser says (a part of it) -> what an engineer needs to hear
_PARSER_WORDS = {
    "mapping values are not allowed": "a colon followed by a space cannot stand here; quote the text that contains it, or check the indentation",
    "could not find expected ':'": "a key without `:`; write `key: value`",
    "did not find expected key": "the indentation or the quotes do not fit here; keys of one group start in one column",
    "did not find expected '-' indicator": "the indentation does not fit here; the `-` of one list stand in one column",
    "did not find expected ',' or": "a `{…}` or `[…]` is not closed or lacks a comma before this",
    "found unexpected end of stream": "a quote is not closed before the end of the file",
    "found unknown escape character": "an unknown escape in a double-quoted text; use single quotes, in which `\\` is an ordinary character",
    "found character that cannot start any token": "this character cannot start a value; quote the text",
    "did not find expected node content": "a value is missing here",
    "block sequence entries are not allowed": "a list cannot start on this line; put `-` on a new line under the key",
    "did not find expected <document start>": "text that belongs to no key; write `key: value`, or check the indentation",
}


def _parser_fault(file: str, error: yaml.YAMLError, text: str) -> Fault:
    mark = getattr(error, "problem_mark", None)
    problem = str(getattr(error, "problem", None) or getattr(error, "reason", None) or "unknown reason")
    if mark is None:
        return Fault(Place(file), f"this is not YAML ({problem}); the file must be YAML text in UTF-8")
    lines = text.split("\n")
    line = lines[mark.line] if mark.line < len(lines) else ""
    place = Place(file, mark.line + 1, mark.column + 1)
    indentation = line[: len(line) - len(line.lstrip())]
    if "\t" in indentation:
        column = indentation.index("\t") + 1
        return Fault(Place(file, mark.line + 1, column), "a tab in the indentation; indent with spaces")
    if line[mark.column : mark.column + 1] in {"@", "`"}:
        return Fault(place, f"a value cannot start with {line[mark.column]!r}; quote the text")
    for part, words in _PARSER_WORDS.items():
        if part in problem:
            return Fault(place, words)
    return Fault(place, f"this is not YAML here ({problem}); check the quotes and the indentation")


def _decode(file: str, source: bytes) -> str:
    """The file's text without byte-order mark; ModelError for what is no readable UTF-8 text."""

    def refuse(message: str, line: int = 0, column: int = 0) -> ModelError:
        return ModelError([Fault(Place(file, line, column), message)])

    if len(source) > LARGEST_FILE:
        raise refuse(
            f"the file has {len(source):,} bytes, and a model has at most {LARGEST_FILE:,}; "
            "put long tables into a CSV file beside the model"
        )
    if source.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise refuse("the file is UTF-16 text, and a model is UTF-8; save it as UTF-8")
    if b"\0" in source:
        raise refuse("this is not a text file; a model is YAML text in UTF-8")
    try:
        text = source.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        before = source[: error.start].decode("utf-8-sig")
        line, column = before.count("\n") + 1, len(before) - before.rfind("\n")
        raise refuse("this byte is not UTF-8 text; save the file as UTF-8", line, column) from None
    odd = re.search(r"[^\t\n\r\x20-\x7e\x85\xa0-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]", text)
    if odd:
        before = text[: odd.start()]
        raise refuse(
            f"the control character U+{ord(odd[0]):04X} cannot stand in a model; remove it",
            before.count("\n") + 1,
            len(before) - before.rfind("\n"),
        )
    return text


class _Collector:
    """One pass over the parser's events, with an explicit stack so that depth costs no recursion."""

    def __init__(self, file: str, text: str):
        self.file, self.text = file, text
        self.keys: dict[Path, Place] = {}
        self.spots: dict[Path, Spot] = {}
        self.faults: list[Fault] = []
        self.root: object = None
        self.documents = 0
        self.count = 0
        self.stack: list[tuple[Path, dict[str, object] | list[object]]] = []
        self.pending: list[str | None] = []  # per open container: the key whose value comes next

    def place(self, mark: yaml.Mark) -> Place:
        return Place(self.file, mark.line + 1, mark.column + 1)

    def refuse(self, mark: yaml.Mark, message: str) -> None:
        self.faults.append(Fault(self.place(mark), message))

    def run(self) -> None:
        loader = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
        for event in yaml.parse(self.text, Loader=loader):
            if isinstance(event, yaml.DocumentStartEvent):
                self.documents += 1
                if self.documents > 1:
                    self.refuse(event.start_mark, "a second document starts here; a model file holds one")
                    return
            elif isinstance(event, yaml.AliasEvent):
                self.refuse(
                    event.start_mark, f"the alias `*{event.anchor}` is not allowed; write the value out"
                )
                self.put(event.start_mark, None, Spot(self.place(event.start_mark)))
            elif isinstance(event, yaml.ScalarEvent):
                self.scalar(event)
            elif isinstance(event, yaml.MappingStartEvent | yaml.SequenceStartEvent):
                self.open(event)
            elif isinstance(event, yaml.MappingEndEvent | yaml.SequenceEndEvent):
                self.stack.pop()
                self.pending.pop()
            if len(self.stack) > DEEPEST:
                self.refuse(
                    event.start_mark,
                    f"values are nested more than {DEEPEST} levels deep here; no model needs that",
                )
                return
            if self.count > MOST_VALUES:
                self.refuse(
                    event.start_mark,
                    f"more than {MOST_VALUES:,} values; put long tables into a CSV file beside the model",
                )
                return

    def marks(self, event: yaml.NodeEvent) -> None:
        if event.anchor is not None:
            self.refuse(
                event.start_mark,
                f"the anchor `&{event.anchor}` is not allowed; write each value out where it is used",
            )
        tag = getattr(event, "tag", None)
        if tag is not None and not (
            isinstance(event, yaml.ScalarEvent) and tag == "!" and not event.implicit[0]
        ):
            self.refuse(
                event.start_mark,
                f"the tag {quoted(tag)} is not allowed; remove it, or quote the text that starts with `!`",
            )

    def wants_key(self) -> bool:
        return bool(self.stack) and isinstance(self.stack[-1][1], dict) and self.pending[-1] is None

    def open(self, event: yaml.MappingStartEvent | yaml.SequenceStartEvent) -> None:
        self.marks(event)
        container: dict[str, object] | list[object] = {} if isinstance(event, yaml.MappingStartEvent) else []
        if self.wants_key():
            self.refuse(
                event.start_mark,
                "a key must be a single word, and this is a list or a group; quote the text that starts with a bracket",
            )
            raise ModelError(self.faults)
        path = self.put(event.start_mark, container, Spot(self.place(event.start_mark)))
        self.stack.append((path, container))
        self.pending.append(None)

    def scalar(self, event: yaml.ScalarEvent) -> None:
        self.marks(event)
        text = event.value
        if self.wants_key():
            self.begin_key(event.start_mark, text)
            return
        value: object = text
        if event.implicit[0]:
            value, wrong = _plain(text)
            if wrong:
                self.refuse(event.start_mark, wrong)
        self.put(event.start_mark, value, self.spot(event))

    def spot(self, event: yaml.ScalarEvent) -> Spot:
        start, end = event.start_mark, event.end_mark
        raw = self.text[start.index : end.index]
        first = 0
        if start.line == end.line:
            if raw == event.value:
                first = start.column + 1
            elif raw[1:-1] == event.value and raw[:1] in {"'", '"'}:
                first = start.column + 2
        return Spot(self.place(start), event.value, first)

    def begin_key(self, mark: yaml.Mark, text: str) -> None:
        path, container = self.stack[-1]
        if text in container:
            first = self.keys[(*path, text)]
            self.refuse(
                mark,
                f"the key {quoted(text)} occurs twice in one group, first in line {first.line}; remove one",
            )
        else:
            self.keys[(*path, text)] = self.place(mark)
        self.pending[-1] = text

    def put(self, mark: yaml.Mark, value: object, spot: Spot) -> Path:
        self.count += 1
        path: Path = ()
        if self.stack:
            above, container = self.stack[-1]
            if isinstance(container, list):
                path = (*above, len(container))
                container.append(value)
            else:
                key = self.pending[-1]
                if key is None:  # an alias or tag where a key must stand; already refused
                    self.pending[-1] = ""
                    return above
                path = (*above, key)
                self.pending[-1] = None
                if key not in container:
                    container[key] = value
        else:
            self.root = value
        self.spots.setdefault(path, spot)
        return path


def read_yaml(file: str, source: bytes) -> Document:
    """The document in the bytes of a YAML file.

    Raises ModelError with every fault of the text: no UTF-8, larger than 1 MiB, deeper than 40 levels,
    aliases, anchors, tags, duplicate keys, ambiguous scalars, a second document.
    """
    text = _decode(file, source)
    collector = _Collector(file, text)
    try:
        collector.run()
    except yaml.YAMLError as error:
        raise ModelError([*collector.faults, _parser_fault(file, error, text)]) from None
    if collector.faults:
        raise ModelError(collector.faults)
    if not collector.documents or collector.root is None:
        message = "the file is empty; a model begins with `outspread: 1`, and `outspread new NAME` writes one to start from"
        raise ModelError([Fault(Place(file), message)])
    return Document(file, source, collector.root, collector.keys, collector.spots)


# --- mappings --------------------------------------------------------------------------------------------


def read_plain(name: str, value: object) -> Document:
    """The document of a Python mapping as `outspread.derive` takes it; places are key paths.

    Accepts mappings, lists, tuples, numpy arrays and scalars. Raises ModelError for other values.
    """
    keys: dict[Path, Place] = {}
    spots: dict[Path, Spot] = {}
    faults: list[Fault] = []
    count = 0

    def place(path: Path) -> Place:
        return Place(": ".join([name, ".".join(str(part) for part in path)]) if path else name)

    def convert(item: object, path: Path) -> object:
        nonlocal count
        count += 1
        if len(path) > DEEPEST:
            raise ModelError(
                [
                    Fault(
                        place(path[:3]),
                        f"values are nested more than {DEEPEST} levels deep; no model needs that",
                    )
                ]
            )
        if count > MOST_VALUES:
            raise ModelError(
                [Fault(place(()), f"more than {MOST_VALUES:,} values; put long tables into a CSV file")]
            )
        to_list = getattr(item, "tolist", None)
        if callable(to_list):
            item = to_list()
        spots[path] = Spot(place(path), str(item) if isinstance(item, str | int | float) else "")
        if item is None or isinstance(item, str | bool):
            return item
        if isinstance(item, Integral):
            return int(item)
        if isinstance(item, Real):
            if not math.isfinite(real := float(item)):
                faults.append(
                    Fault(place(path), f"{real} is no finite number; leave out a limit that does not exist")
                )
            return real
        if isinstance(item, Mapping):
            for key in item:
                if not isinstance(key, str):
                    faults.append(Fault(place(path), f"the key {quoted(key)} is not text; keys are strings"))
                keys[(*path, str(key))] = place((*path, str(key)))
            return {str(key): convert(part, (*path, str(key))) for key, part in item.items()}
        if isinstance(item, list | tuple):
            return [convert(part, (*path, index)) for index, part in enumerate(item)]
        faults.append(
            Fault(
                place(path),
                f"a value of type {quoted(type(item).__name__)} cannot stand in a model; use numbers, text, lists and mappings",
            )
        )
        return None

    converted = convert(value, ())
    if faults:
        raise ModelError(faults)
    source = json.dumps(converted, indent=1, ensure_ascii=True).encode()
    return Document(name, source, converted, keys, spots)
