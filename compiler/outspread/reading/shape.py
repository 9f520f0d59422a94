"""Checks a document's shape against the JSON Schema and says each fault in plain words.

Only shape: keys, kinds of values, fixed ranges. Whether names, units and numbers make sense together is
left to `build`. The schema in schema/ is the authority; no message of the validator itself is shown.
"""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from functools import cache
from typing import Any

from outspread.errors import Fault, ModelError, Place
from outspread.reading.document import Document, Path
from outspread.reading.words import listed, near, quoted, shown, suggestion
from outspread.resources import read_text

SCHEMA = "model-1.schema.json"
FORMAT = 1


@cache
def schema() -> Any:
    """The JSON Schema of format 1 (draft 2020-12), as plain values."""
    return json.loads(read_text("schema", SCHEMA))


def check_shape(document: Document) -> None:
    """Raises ModelError with every fault of the document's shape."""
    if not isinstance(document.value, dict):
        found = shown(document.value)
        message = f"the file holds {found}, and a model is a group of keys that begins with `outspread: 1`"
        raise ModelError([Fault(document.at(()), message)])
    _check_version(document, document.value)
    from jsonschema import Draft202012Validator

    faults: list[Fault] = []
    last: Any = None
    for error in Draft202012Validator(schema()).iter_errors(document.value):
        faults.extend(_faults(document, error))
        last = error
    if faults:
        raise ModelError(faults)
    if last is not None:  # each rule that stays silent relies on another one's fault; never accept in silence
        path = tuple(last.absolute_path)
        raise ModelError([Fault(document.key(path), f"{_called(path)} does not fit; write {_right(last)}")])


def _check_version(document: Document, value: Mapping[str, object]) -> None:
    """A file of another format is told so alone: its other faults would mislead."""
    version = value.get("outspread")
    if version is None or (version == FORMAT and not isinstance(version, bool)):
        return
    message = (
        f"the format is {shown(version)}, and this version of outspread reads format {FORMAT}; "
        f"write `outspread: {FORMAT}`"
    )
    if isinstance(version, int | float) and not isinstance(version, bool) and version > FORMAT:
        message = (
            f"the model has format {version}, and this version of outspread reads format {FORMAT}; "
            "update outspread"
        )
    raise ModelError([Fault(document.at(("outspread",)), message)])


def _faults(document: Document, error: Any) -> Iterator[Fault]:
    path: Path = tuple(error.absolute_path)
    say = _SAY.get(error.validator)
    if say is None:
        raise AssertionError(f"the schema uses {error.validator!r}, for which there is no message")
    for place, message in say(document, path, error):
        yield Fault(place, message)


def _called(path: Path) -> str:
    """How a message names the value at a path: by its key, or as a numbered entry of a list."""
    if not path:
        return "the model"
    last = path[-1]
    if isinstance(last, str):
        return quoted(last)
    above = next((part for part in reversed(path) if isinstance(part, str)), "list")
    return f"entry {last + 1} of {quoted(above)}"


def _right(error: Any) -> str:
    """What would be right: the title of the schema that failed, its reference followed."""
    title = error.schema.get("title")
    return str(title) if title else "another kind of value"


Said = Iterator[tuple[Place, str]]


def _wrong_kind(document: Document, path: Path, error: Any) -> Said:
    value, right = error.instance, _right(error)
    if value is None and path:
        yield document.key(path), f"{_called(path)} is empty; write {right}"
        return
    if isinstance(value, str) and "number" in _types(error) and _looks_like_number(value):
        right = f"{value.strip().replace(',', '.')} without quotes and with a decimal point"
    elif isinstance(value, bool) and "string" in _types(error):
        right += ", or quote it if it is meant as text"
    yield document.at(path), f"{_called(path)} is {shown(value)}; write {right}"


def _types(error: Any) -> list[str]:
    kinds = error.validator_value
    return [kinds] if isinstance(kinds, str) else list(kinds)


def _looks_like_number(text: str) -> bool:
    try:
        float(text.strip().replace(",", "."))
    except ValueError:
        return False
    return True


def _out_of_range(document: Document, path: Path, error: Any) -> Said:
    yield document.at(path), f"{_called(path)} is {shown(error.instance)}; write {_right(error)}"


def _unknown_key(document: Document, path: Path, error: Any) -> Said:
    known = list(error.schema["properties"])
    for key in error.instance:
        if key in known:
            continue
        place = document.key((*path, key))
        if (path and path[-1] == "distribution") or (len(path) > 1 and path[-2] == "distributions"):
            match = near(key, known)
            advice = (
                f"did you mean {quoted(match)}?" if match else "`outspread families` lists those that exist"
            )
            yield place, f"unknown family {quoted(key)}; {advice}"
        elif path and path[-1] == "copula":
            yield place, f"unknown copula {quoted(key)}; {suggestion(key, known, 'copulas')}"
        elif not path:
            yield (
                place,
                f"unknown key {quoted(key)} at the top of the model; {suggestion(key, known, 'its keys')}",
            )
        elif key.count("(") != key.count(")"):  # the rest of a formula that a comma has cut
            yield (
                place,
                f"unknown key {quoted(key)} in {_called(path)}; a formula with commas needs quotes where it "
                "stands between { and }",
            )
        else:
            yield place, f"unknown key {quoted(key)} in {_called(path)}; {suggestion(key, known, 'its keys')}"


def _missing_key(document: Document, path: Path, error: Any) -> Said:
    for key in error.validator_value:
        if key in error.instance:
            continue
        known = error.schema.get("properties", {})
        # A misspelt key is reported as unknown already: reporting it as missing too says it twice.
        if any(near(other, [key]) for other in error.instance if other not in known):
            continue
        if not path and key == "outspread":
            yield document.at(path), "the key `outspread` is missing; a model begins with `outspread: 1`"
        else:
            yield document.key(path), f"{_called(path)} lacks the key {quoted(key)}; add it"


def _key_sets(document: Document, path: Path, error: Any) -> Said:
    """Exactly one of several sets of keys must be given; only the sets are named, never each attempt."""
    if not isinstance(error.instance, dict):
        return  # the wrong kind of value is the fault, and is reported
    given = list(error.instance)
    known = error.schema.get("properties", {})
    if any(key not in known for key in given):
        return  # the unknown key is the fault, and is reported
    wanted = [list(branch["required"]) for branch in error.validator_value]
    shared = [key for key in wanted[0] if all(key in keys for keys in wanted)]
    alternatives = dict.fromkeys(key for keys in wanted for key in keys if key not in shared)
    have = [key for key in given if key in alternatives]
    required = error.schema.get("required", [])
    if have and any(key not in given and key in required for key in shared):
        return  # reported as a missing key
    groups = [[key for key in keys if key not in shared] for keys in wanted]
    if all(len(keys) == 1 for keys in groups):
        closed = all("properties" in branch for branch in error.validator_value)
        choices = f"{'exactly one of ' if closed else ''}{listed([keys[0] for keys in groups])}"
    else:
        choices = f"either {', or '.join(listed(keys, 'and') for keys in groups)}"
    found = listed(have, "and") or "none of them"
    yield document.key(path), f"{_called(path)} needs {choices}; given: {found}"


def _empty(document: Document, path: Path, error: Any) -> Said:
    yield document.key(path), f"{_called(path)} is {shown(error.instance)}; write {_right(error)}"


def _too_short(document: Document, path: Path, error: Any) -> Said:
    if error.instance:
        yield (
            document.at(path),
            f"{_called(path)} has {len(error.instance)} entry; write {_right(error)}",
        )
    else:
        yield document.key(path), f"{_called(path)} is an empty list; write {_right(error)}"


def _too_many(document: Document, path: Path, error: Any) -> Said:
    keys = list(error.instance)
    if all(key in error.schema["properties"] for key in keys):
        message = f"{_called(path)} has {listed(keys, 'and')}; keep one of them"
        yield document.key((*path, keys[1])), message


def _bad_name(document: Document, path: Path, error: Any) -> Said:
    name = error.instance
    place = document.key((*path, name))
    yield (
        place,
        f"{quoted(name)} is no name; a name begins with a letter and has only letters A-Z, digits "
        "and `_`, at most 60",
    )


def _no_choice(document: Document, path: Path, error: Any) -> Said:
    choices = [str(choice) for choice in error.validator_value]
    yield (
        document.at(path),
        f"{_called(path)} is {shown(error.instance)}; {suggestion(str(error.instance), choices, 'choices')}",
    )


_SAY = {
    "type": _wrong_kind,
    "const": _out_of_range,
    "enum": _no_choice,
    "minimum": _out_of_range,
    "maximum": _out_of_range,
    "exclusiveMinimum": _out_of_range,
    "exclusiveMaximum": _out_of_range,
    "minLength": _out_of_range,
    "minItems": _too_short,
    "minProperties": _empty,
    "maxProperties": _too_many,
    "additionalProperties": _unknown_key,
    "required": _missing_key,
    "oneOf": _key_sets,
    "anyOf": _key_sets,
    "pattern": _bad_name,
    "maxLength": _bad_name,
}
