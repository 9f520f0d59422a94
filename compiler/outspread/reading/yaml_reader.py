"""The text of a model file to a document: YAML by the events of its parser, positions kept.

Whatever two readers could take for two different things is refused: aliases, anchors, tags, duplicate keys,
ambiguous scalars, a second document; so are files that are too large or nested too deep.
"""

from __future__ import annotations

import re
from typing import TypeAlias

import yaml

from outspread.errors import Fault, ModelError, Place
from outspread.reading.document import DEEPEST, MOST_VALUES, Document, Path, Spot
from outspread.reading.scalars import plain_value
from outspread.reading.words import quoted

LARGEST_FILE = 1 << 20  # bytes
MOST_FAULTS = 100  # after so many the rest of the text is not read

_TOO_DEEP = f"values are nested more than {DEEPEST} levels deep here; no model needs that"

#: what the parser says (a part of it) -> what an engineer needs to hear
_PARSER_WORDS: dict[str, str] = {
    "mapping values are not allowed": (
        "a colon followed by a space cannot stand here; quote the text that contains it, or check "
        "the indentation"
    ),
    "could not find expected ':'": "a key without `:`; write `key: value`",
    "did not find expected key": (
        "the indentation or the quotes do not fit here; keys of one group start in one column"
    ),
    "did not find expected '-' indicator": (
        "the indentation does not fit here; the `-` of one list stand in one column"
    ),
    "expected ',' or": "a `{…}` or `[…]` is not closed or lacks a comma before this",
    "found unexpected end of stream": "a quote is not closed before the end of the file",
    "found unknown escape character": (
        "an unknown escape in a double-quoted text; use single quotes, in which `\\` is an ordinary character"
    ),
    "found character that cannot start any token": "this character cannot start a value; quote the text",
    "did not find expected node content": "a value is missing here",
    "exceeded maximum nesting depth": _TOO_DEEP,
    "block sequence entries are not allowed": (
        "a list cannot start on this line; put `-` on a new line under the key"
    ),
    "did not find expected <document start>": (
        "text that belongs to no key; write `key: value`, or check the indentation"
    ),
}


#: a position in the text, from either of the two parsers
_Mark: TypeAlias = "yaml.error.Mark | yaml._yaml.Mark"


def _start(event: yaml.Event) -> _Mark:
    assert event.start_mark is not None  # every event that a parser gives has its marks
    return event.start_mark


def _parser_fault(file: str, error: yaml.YAMLError, text: str) -> Fault:
    mark = getattr(error, "problem_mark", None)
    context = getattr(error, "context_mark", None)
    problem = str(getattr(error, "problem", None) or getattr(error, "reason", None) or "unknown reason")
    if mark is None:
        return Fault(Place(file), f"this is not YAML ({problem}); the file must be YAML text in UTF-8")
    if "could not find expected ':'" in problem and context is not None:
        mark = context  # where the key stands; the parser notices only behind it
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

    def place(self, mark: _Mark) -> Place:
        return Place(self.file, mark.line + 1, mark.column + 1)

    def refuse(self, mark: _Mark, message: str) -> None:
        self.faults.append(Fault(self.place(mark), message))

    def run(self) -> None:
        loader = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
        for event in yaml.parse(self.text, Loader=loader):
            if isinstance(event, yaml.DocumentStartEvent):
                self.documents += 1
                if self.documents > 1:
                    self.refuse(_start(event), "a second document starts here; a model file holds one")
                    return
            elif isinstance(event, yaml.AliasEvent):
                self.refuse(_start(event), f"the alias `*{event.anchor}` is not allowed; write the value out")
                self.put(_start(event), None, Spot(self.place(_start(event))))
            elif isinstance(event, yaml.ScalarEvent):
                self.scalar(event)
            elif isinstance(event, yaml.MappingStartEvent | yaml.SequenceStartEvent):
                self.open(event)
            elif isinstance(event, yaml.MappingEndEvent | yaml.SequenceEndEvent):
                self.stack.pop()
                self.pending.pop()
            if len(self.stack) > DEEPEST:
                self.refuse(_start(event), _TOO_DEEP)
                return
            if len(self.faults) >= MOST_FAULTS:
                return
            if self.count > MOST_VALUES:
                self.refuse(
                    _start(event),
                    f"more than {MOST_VALUES:,} values; put long tables into a CSV file beside the model",
                )
                return

    def marks(self, event: yaml.NodeEvent) -> None:
        if event.anchor is not None:
            self.refuse(
                _start(event),
                f"the anchor `&{event.anchor}` is not allowed; write each value out where it is used",
            )
        tag = getattr(event, "tag", None)
        if tag is not None and not (
            isinstance(event, yaml.ScalarEvent) and tag == "!" and not event.implicit[0]
        ):
            self.refuse(
                _start(event),
                f"the tag {quoted(tag)} is not allowed; remove it, or quote the text that starts with `!`",
            )

    def wants_key(self) -> bool:
        return bool(self.stack) and isinstance(self.stack[-1][1], dict) and self.pending[-1] is None

    def open(self, event: yaml.MappingStartEvent | yaml.SequenceStartEvent) -> None:
        self.marks(event)
        container: dict[str, object] | list[object] = {} if isinstance(event, yaml.MappingStartEvent) else []
        if self.wants_key():
            self.refuse(
                _start(event),
                "a key must be a single word, and this is a list or a group; quote the text that "
                "starts with a bracket",
            )
            raise ModelError(self.faults)
        path = self.put(_start(event), container, Spot(self.place(_start(event))))
        self.stack.append((path, container))
        self.pending.append(None)

    def scalar(self, event: yaml.ScalarEvent) -> None:
        self.marks(event)
        text = event.value
        if self.wants_key():
            self.begin_key(_start(event), text)
            return
        value: object = text
        if event.implicit[0]:
            value, wrong = plain_value(text)
            if wrong:
                self.refuse(_start(event), wrong)
        self.put(_start(event), value, self.spot(event))

    def spot(self, event: yaml.ScalarEvent) -> Spot:
        start, end = _start(event), event.end_mark
        assert end is not None
        raw = self.text[start.index : end.index]
        first = 0
        if start.line == end.line:
            if raw == event.value:
                first = start.column + 1
            elif raw[1:-1] == event.value and raw[:1] in {"'", '"'}:
                first = start.column + 2
        return Spot(self.place(start), event.value, first)

    def begin_key(self, mark: _Mark, text: str) -> None:
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

    def put(self, mark: _Mark, value: object, spot: Spot) -> Path:
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
        message = (
            "the file is empty; a model begins with `outspread: 1`, and `outspread new NAME` "
            "writes one to start from"
        )
        raise ModelError([Fault(Place(file), message)])
    return Document(file, source, collector.root, collector.keys, collector.spots)
