"""Breaks one line of a formula into lines of a given width; measuring is the caller's.

It breaks before relations and operations and after commas, at the outermost level first. Where that is
not enough, the widest part is opened: brackets as they are, a fraction as a reciprocal times its numerator,
a root as a power; then products between their factors. What still cannot be broken is left wide.
"""

from __future__ import annotations

from collections.abc import Callable

from outspread.reporting.mathml import atom_class, delimiter_size
from outspread.reporting.parts import Fence, Fraction, Part, Root, Row, Scripts, Space, Symbol

Measure = Callable[[Row], float]
_NOTHING = Row(())


def lines(row: Row, width: float, hanging: float, measure: Measure) -> tuple[Row, ...]:
    """The row as lines of at most `width` em, those after the first `hanging` em narrower."""
    if measure(row) <= width:
        return (row,)
    finished: list[list[Part]] = []
    current: list[Part] = []
    used = 0.0
    for piece in _pieces(row.parts, width - hanging, measure):
        room = width - (hanging if finished else 0.0)
        wide = measure(Row((_NOTHING, *piece)))
        if current and used + wide > room:
            finished.append(current)
            current, used = [_NOTHING], 0.0  # an empty atom: an operator at the start keeps its space
        current.extend(piece)
        used += wide
    finished.append(current)
    return tuple(Row(tuple(_trimmed(parts))) for parts in finished)


def _trimmed(parts: list[Part]) -> list[Part]:
    start = 1 if parts and parts[0] is _NOTHING else 0
    while len(parts) > start and isinstance(parts[start], Space):
        del parts[start]
    while parts and isinstance(parts[-1], Space):
        parts.pop()
    return parts


def _pieces(parts: tuple[Part, ...], room: float, measure: Measure) -> list[tuple[Part, ...]]:
    """Pieces between which a line may end, each at most `room` wide where that can be reached."""
    found: list[tuple[Part, ...]] = []
    for piece in _split(parts):
        if measure(Row(piece)) <= room:
            found.append(piece)
            continue
        opened = _opened(piece, room, measure)
        found.extend(_factors(piece) if opened is None else _pieces(opened, room, measure))
    return found


def _split(parts: tuple[Part, ...]) -> list[tuple[Part, ...]]:
    """Cuts before relations and operations (not signs) and after punctuation and wide spaces."""
    pieces: list[list[Part]] = [[]]
    before = "open"
    for part in parts:
        kind = atom_class(part)
        starts = kind == "relation" or (kind == "binary" and before in ("ordinary", "close", "inner"))
        if starts and pieces[-1]:
            pieces.append([])
        pieces[-1].append(part)
        if kind == "punctuation" or (isinstance(part, Space) and part.width >= 1.0):
            pieces.append([])
        elif kind == "close" or (kind == "ordinary" and isinstance(part, Fraction)):
            before = "close"
        if kind:
            before = kind
    return [tuple(piece) for piece in pieces if piece]


def _opened(piece: tuple[Part, ...], room: float, measure: Measure) -> tuple[Part, ...] | None:
    """The piece with its widest breakable part opened; None where none is."""
    candidates = [(measure(Row((part,))), index) for index, part in enumerate(piece) if _can_open(part)]
    if not candidates:
        return None
    index = max(candidates, key=lambda pair: (pair[0], -pair[1]))[1]
    return (*piece[:index], *_open(piece[index], room, measure), *piece[index + 1 :])


def _can_open(part: Part) -> bool:
    if isinstance(part, Scripts):
        return isinstance(part.base, (Fence, Root, Fraction))
    return isinstance(part, (Fence, Fraction, Root)) or (isinstance(part, Row) and bool(part.parts))


def _factors(piece: tuple[Part, ...]) -> list[tuple[Part, ...]]:
    """The factors of a long product as pieces; a differential stays with its variable."""
    found: list[list[Part]] = [[]]
    before: Part = Space(0.0)
    for part in piece:
        joined = isinstance(before, Symbol) and before.variant == "normal"
        ends = not joined and atom_class(before) in ("ordinary", "close", "inner")
        if ends and atom_class(part) in ("ordinary", "function", "large"):
            found.append([])
        found[-1].append(part)
        before = part if not isinstance(part, Space) else before
    return [tuple(factor) for factor in found if factor]


def _open(part: Part, room: float, measure: Measure) -> tuple[Part, ...]:
    if isinstance(part, Row):
        return part.parts
    if isinstance(part, Fence):
        return _brackets(part)
    if isinstance(part, Fraction):
        above = _brackets(Fence("(", part.above, ")"))
        reciprocal = Fraction(Row((Symbol("1", "number"),)), part.below)
        if measure(Row((reciprocal,))) <= room:
            return (reciprocal, *above)
        power = Row((Symbol("−", "ordinary"), Symbol("1", "number")))
        return (*above, *_with_script(_brackets(Fence("(", part.below, ")")), None, power))
    if isinstance(part, Root):
        power = part.index or Row((Symbol("2", "number"),))
        exponent = Row((Symbol("1", "number"), Symbol("/", "ordinary"), *power.parts))
        return _with_script(_brackets(Fence("(", part.body, ")")), None, exponent)
    if isinstance(part, Scripts):
        inner = part.base if isinstance(part.base, Fence) else Fence("(", Row((part.base,)), ")")
        return _with_script(_brackets(inner), part.below, part.above)
    raise TypeError(f"{type(part).__name__} cannot be opened")


def _brackets(part: Fence) -> tuple[Part, ...]:
    """The fence as an opening bracket, its contents and a closing bracket, between which lines may end."""
    size = delimiter_size(part.body)
    left = (Symbol(part.left, "open", size=size),) if part.left else ()
    right = (Symbol(part.right, "close", size=size),) if part.right else ()
    return (*left, *part.body.parts, *right)


def _with_script(parts: tuple[Part, ...], below: Row | None, above: Row | None) -> tuple[Part, ...]:
    """The parts, the last of which (a closing bracket) takes the scripts."""
    return (*parts[:-1], Scripts(parts[-1], below, above))
