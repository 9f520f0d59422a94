"""The pieces of a formula to be typeset: an immutable tree that `latex` reads and `mathml` draws."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Part:
    """One piece of a formula."""


@dataclass(frozen=True, slots=True)
class Symbol(Part):
    """A character, number or word. `kind` is its class in TeX's sense, which sets the space around it:
    letter, number, ordinary, binary, relation, open, close, punctuation, large, function, text.
    `size` is a delimiter's height in em (0: as the text)."""

    text: str
    kind: str
    variant: str = ""
    size: float = 0.0
    limits: bool = False


@dataclass(frozen=True, slots=True)
class Space(Part):
    width: float


@dataclass(frozen=True, slots=True)
class Row(Part):
    parts: tuple[Part, ...]


@dataclass(frozen=True, slots=True)
class Fraction(Part):
    above: Row
    below: Row
    line: bool = True


@dataclass(frozen=True, slots=True)
class Root(Part):
    body: Row
    index: Row | None = None


@dataclass(frozen=True, slots=True)
class Scripts(Part):
    base: Part
    below: Row | None
    above: Row | None


@dataclass(frozen=True, slots=True)
class Fence(Part):
    left: str
    body: Row
    right: str


@dataclass(frozen=True, slots=True)
class Mark(Part):
    """An accent or a line over (or under) its body."""

    mark: str
    body: Row
    under: bool = False


@dataclass(frozen=True, slots=True)
class Table(Part):
    left: str
    rows: tuple[tuple[Row, ...], ...]
    right: str
    align: str
