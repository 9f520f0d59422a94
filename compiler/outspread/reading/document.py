"""A model as plain values with the place of every key and value, and such a document from a Python mapping.

A document from the text of a file is `yaml_reader`'s work; what the keys mean is left to `shape` and `build`.
"""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from numbers import Integral, Real

from outspread.errors import Fault, ModelError, Place
from outspread.reading.words import quoted

Path = tuple[str | int, ...]

DEEPEST = 40  # levels of mappings and lists
MOST_VALUES = 50_000
LARGEST_WHOLE = 10**308


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
            if abs(int(item)) > LARGEST_WHOLE:
                faults.append(Fault(place(path), "this number is too large; the largest is 1.7e308"))
            return int(item)
        if isinstance(item, Real):
            if not math.isfinite(real := float(item)):
                faults.append(
                    Fault(place(path), f"{real} is no finite number; leave out a limit that does not exist")
                )
            return real
        if isinstance(item, Mapping):
            for key in item:
                if not isinstance(key, str | int | float) or isinstance(key, bool):
                    faults.append(Fault(place(path), f"the key {quoted(key)} is not text; keys are strings"))
                keys[(*path, str(key))] = place((*path, str(key)))
            return {str(key): convert(part, (*path, str(key))) for key, part in item.items()}
        if isinstance(item, list | tuple):
            return [convert(part, (*path, index)) for index, part in enumerate(item)]
        faults.append(
            Fault(
                place(path),
                f"a value of type {quoted(type(item).__name__)} cannot stand in a model; use "
                "numbers, text, lists and mappings",
            )
        )
        return None

    converted = convert(value, ())
    if faults:
        raise ModelError(faults)
    source = json.dumps(converted, indent=1, ensure_ascii=True).encode()
    return Document(name, source, converted, keys, spots)
