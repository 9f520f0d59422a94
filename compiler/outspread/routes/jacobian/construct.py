"""Builds tidy expression trees for inverses: collects equal terms and factors, folds numbers.

It rewrites only by identities that hold wherever the written expression is real (points of probability
zero apart). It leaves solving to `branches` and `elimination`, and reading formulas to the formula room.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable

from outspread.formula.tree import Apply, Name, Node, Number, names

ZERO = Number(0.0)
ONE = Number(1.0)
PI = Number(math.pi, "pi")

_TURNS = frozenset({"sin", "cos"})


def number(value: float) -> Number:
    return Number(float(value))


def known_number(node: Node) -> float | None:
    """The value of a plain number; pi stays a symbol, so that it is still written as pi."""
    return node.value if isinstance(node, Number) and node.text != "pi" else None


def is_integer(value: float) -> bool:
    return math.isfinite(value) and value == math.floor(value)


def size(node: Node) -> int:
    return 1 + sum(size(argument) for argument in node.arguments) if isinstance(node, Apply) else 1


def contains(node: Node, unknowns: Iterable[str]) -> bool:
    wanted = set(unknowns)
    return any(name in wanted for name in names(node))


def add(*terms: Node) -> Node:
    """Sum with equal terms collected and c·cos²a + c·sin²a written as c."""
    collected: dict[Node, float] = {}
    constant = 0.0
    for term in terms:
        for part in _terms(term):
            coefficient, core = split_coefficient(part)
            if core is None:
                constant += coefficient
            else:
                collected[core] = collected.get(core, 0.0) + coefficient
    constant += _join_circles(collected)
    parts = [scaled(value, core) for core, value in collected.items() if value != 0.0]
    if constant != 0.0 or not parts:
        parts.append(number(constant))
    positive_first = [part for part in parts if not _is_negative(part)]
    ordered = positive_first + [part for part in parts if _is_negative(part)]
    return ordered[0] if len(ordered) == 1 else Apply("add", tuple(ordered))


def negate(node: Node) -> Node:
    return multiply(number(-1.0), node)


def subtract(left: Node, right: Node) -> Node:
    return add(left, negate(right))


def multiply(*factors: Node) -> Node:
    """Product with equal bases collected; numbers gathered in front."""
    coefficient: float = 1.0
    powers: dict[Node, float] = {}
    for factor in factors:
        part, more = split_factors(factor)
        coefficient *= part
        for base, exponent in more.items():
            powers[base] = powers.get(base, 0.0) + exponent
    return from_factors(coefficient, powers)


def divide(left: Node, right: Node) -> Node:
    return multiply(left, power(right, -1.0))


def power(base: Node, exponent: float) -> Node:
    coefficient, powers = split_factors(base)
    return from_factors(*_raised(coefficient, powers, exponent))


def square_root(node: Node) -> Node:
    return power(node, 0.5)


def apply(operator: str, *arguments: Node) -> Node:
    """The operator applied, through the constructors above where there is one, and cancelling an inverse."""
    if operator == "power":
        exponent = known_number(arguments[1])
        return power(arguments[0], exponent) if exponent is not None else Apply(operator, arguments)
    special: dict[str, Callable[..., Node]] = {
        "add": add, "multiply": multiply, "negate": negate, "divide": divide, "sqrt": square_root,
    }  # fmt: skip
    if operator in special:
        return special[operator](*arguments)
    inner = arguments[0]
    undone = {"exp": "log", "log": "exp", "sin": "asin", "cos": "acos", "tan": "atan",
              "decibel": "from_decibel", "from_decibel": "decibel"}  # fmt: skip
    if isinstance(inner, Apply) and inner.operator == undone.get(operator):
        return inner.arguments[0]
    if operator == "cos" and _is_negative(inner):
        return Apply("cos", (negate(inner),))
    return Apply(operator, arguments)


def tidy(node: Node) -> Node:
    """The same expression built through the constructors of this module."""
    if not isinstance(node, Apply):
        return node
    return apply(node.operator, *(tidy(argument) for argument in node.arguments))


def replace(node: Node, values: dict[str, Node]) -> Node:
    """`node` with names replaced, tidied on the way; parts without those names are kept as they are."""
    if isinstance(node, Name):
        return values.get(node.name, node)
    if isinstance(node, Apply) and contains(node, values):
        return apply(node.operator, *(replace(argument, values) for argument in node.arguments))
    return node


def split_coefficient(node: Node) -> tuple[float, Node | None]:
    """(c, core) with node = c·core; core is None for a number."""
    coefficient, powers = split_factors(node)
    return coefficient, (from_factors(1.0, powers) if powers else None)


def split_factors(node: Node) -> tuple[float, dict[Node, float]]:
    """(c, {base: exponent}) with node = c · Π base^exponent, exponents constant."""
    value = known_number(node)
    if value is not None:
        return value, {}
    if isinstance(node, Apply):
        parts = [split_factors(argument) for argument in node.arguments] if node.operator in _PRODUCTS else []
        if node.operator == "multiply":
            return _joined(parts)
        if node.operator == "negate":
            return -parts[0][0], parts[0][1]
        if node.operator == "divide" and parts[1][0] != 0.0:
            return _joined([parts[0], _raised(*parts[1], -1.0)])
        if node.operator == "sqrt":
            return _raised(*parts[0], 0.5)
        exponent = known_number(node.arguments[1]) if node.operator == "power" else None
        if exponent is not None and not (parts[0][0] == 0.0 and exponent <= 0.0):
            return _raised(*parts[0], exponent)
    return 1.0, {node: 1.0}


_PRODUCTS = frozenset({"multiply", "negate", "divide", "sqrt", "power"})


def from_factors(coefficient: float, powers: dict[Node, float]) -> Node:
    """The node c · Π base^exponent, written as one fraction."""
    if any(_opens(base, exponent) for base, exponent in powers.items()):
        more, powers = _joined(_opened(base, exponent) for base, exponent in powers.items())
        coefficient *= more
    if coefficient == 0.0:
        return ZERO
    above = [_written_power(base, exponent) for base, exponent in powers.items() if exponent > 0.0]
    below = [_written_power(base, -exponent) for base, exponent in powers.items() if exponent < 0.0]
    inverse = 1.0 / coefficient
    if not is_integer(coefficient) and is_integer(inverse) and abs(inverse) < 1e6 and (above or below):
        below.insert(0, number(abs(inverse)))
        coefficient = math.copysign(1.0, coefficient)
    sign, magnitude = coefficient < 0.0, abs(coefficient)
    if magnitude != 1.0 or not above:
        above.insert(0, number(magnitude))
    if len(above) == 1 and isinstance(above[0], Number) and not below and above[0].text != "pi":
        return number(coefficient)
    top = above[0] if len(above) == 1 else Apply("multiply", tuple(above))
    if below:
        top = Apply("divide", (top, below[0] if len(below) == 1 else Apply("multiply", tuple(below))))
    return Apply("negate", (top,)) if sign else top


def scaled(coefficient: float, node: Node) -> Node:
    own, powers = split_factors(node)
    return from_factors(coefficient * own, powers)


def _terms(node: Node) -> Iterable[Node]:
    if isinstance(node, Apply) and node.operator == "add":
        for argument in node.arguments:
            yield from _terms(argument)
    else:
        coefficient, core = split_coefficient(node)
        if core is not None and _is_sum(core) and coefficient != 1.0:
            yield from (scaled(coefficient, part) for part in _terms(core))
        else:
            yield node


def _is_sum(node: Node) -> bool:
    return isinstance(node, Apply) and node.operator == "add"


def _opens(base: Node, exponent: float) -> bool:
    """Whether base^exponent can be written without its outermost root, length or product."""
    return is_integer(exponent) and (_is_product(base) or (_is_length(base) and is_integer(exponent / 2.0)))


def _opened(base: Node, exponent: float) -> tuple[float, dict[Node, float]]:
    if not _opens(base, exponent):
        return 1.0, {base: exponent}
    if isinstance(base, Apply) and base.operator == "hypot":
        return _raised(*split_factors(add(*(power(part, 2.0) for part in base.arguments))), exponent / 2.0)
    return _raised(*split_factors(base), exponent)


def _is_length(node: Node) -> bool:
    return isinstance(node, Apply) and node.operator == "hypot"


def _is_product(node: Node) -> bool:
    return isinstance(node, Apply) and node.operator in _PRODUCTS and split_factors(node)[1] != {node: 1.0}


def _is_negative(node: Node) -> bool:
    if isinstance(node, Number):
        return node.value < 0.0
    return isinstance(node, Apply) and node.operator == "negate"


def _joined(parts: Iterable[tuple[float, dict[Node, float]]]) -> tuple[float, dict[Node, float]]:
    coefficient: float = 1.0
    powers: dict[Node, float] = {}
    for part, more in parts:
        coefficient *= part
        for base, exponent in more.items():
            powers[base] = powers.get(base, 0.0) + exponent
    return coefficient, {base: exponent for base, exponent in powers.items() if not _is_one(base, exponent)}


def _is_one(base: Node, exponent: float) -> bool:
    is_sign = isinstance(base, Apply) and base.operator == "sign"
    return exponent == 0.0 or (is_sign and is_integer(exponent / 2.0))


def _raised(
    coefficient: float, powers: dict[Node, float], exponent: float
) -> tuple[float, dict[Node, float]]:
    """(c · Π base^q)^exponent. A fractional power goes inside only where every base is then ≥ 0."""
    if coefficient == 0.0:
        return (0.0, {}) if exponent > 0.0 else (1.0, {Apply("power", (ZERO, number(exponent))): 1.0})
    single = len(powers) == 1 and not is_integer(next(iter(powers.values())) / 2.0)
    if is_integer(exponent):
        return _whole_power(coefficient, exponent), {base: q * exponent for base, q in powers.items()}
    outside = _exact_power(coefficient, exponent) if coefficient > 0.0 else None
    if outside and (single or not powers):
        return outside, {base: q * exponent for base, q in powers.items()}
    if exponent == 0.5 and coefficient > 0.0 and all(is_integer(q / 2.0) for q in powers.values()):
        halves: dict[Node, float] = {Apply("abs", (base,)): q / 2.0 for base, q in powers.items()}
        root = _exact_power(coefficient, 0.5)
        return (root, halves) if root else (1.0, {**halves, number(coefficient): 0.5})
    outside = _exact_power(abs(coefficient), exponent)
    inner = from_factors(math.copysign(1.0, coefficient) if outside else coefficient, powers)
    return outside or 1.0, {inner: exponent}


def _whole_power(value: float, exponent: float) -> float:
    """value^exponent, infinite beyond the range of doubles: the branch is then no solution at any point."""
    try:
        return float(value**exponent)
    except OverflowError:
        return math.inf


def _exact_power(value: float, exponent: float) -> float | None:
    """value^exponent where that is a short decimal, so that √2 stays √2."""
    if not 1e-12 < value < 1e12 or abs(exponent) > 12.0:
        return None
    result: float = value**exponent
    if not 1e-6 < result < 1e6:
        return None
    back: float = result ** (1.0 / exponent)
    short = any(float(f"{part:.6g}") == part for part in (result, 1.0 / result))
    return result if short and math.isclose(back, value, rel_tol=3e-16) else None


def _written_power(base: Node, exponent: float) -> Node:
    if exponent == 1.0:
        return base
    if exponent == 0.5:
        return Apply("sqrt", (base,))
    return Apply("power", (base, number(exponent)))


def _join_circles(collected: dict[Node, float]) -> float:
    """Replaces c·R·cos²a + c·R·sin²a by c·R in place; returns what that adds to the constant."""
    constant = 0.0
    for core in list(collected):
        _, powers = split_factors(core)
        for base, exponent in powers.items():
            if exponent != 2.0 or not isinstance(base, Apply) or base.operator not in _TURNS:
                continue
            other = Apply("sin" if base.operator == "cos" else "cos", base.arguments)
            rest = {key: value for key, value in powers.items() if key != base}
            partner = from_factors(1.0, {**rest, other: 2.0})
            match = next((key for key in collected if split_factors(key)[1] == {**rest, other: 2.0}), partner)
            value = collected.get(core, 0.0)
            if value != 0.0 and collected.get(match) == value:
                del collected[core], collected[match]
                remaining = from_factors(1.0, rest)
                if rest:
                    collected[remaining] = collected.get(remaining, 0.0) + value
                else:
                    constant += value
                break
    return constant


def common_factors_out(node: Node) -> Node:
    """A sum with the powers that divide every term taken out: a/(bc) + d/(bc) as (a + d)/(bc)."""
    if not isinstance(node, Apply):
        return node
    if node.operator != "add":
        return apply(node.operator, *(common_factors_out(argument) for argument in node.arguments))
    terms = [split_factors(common_factors_out(term))[1] for term in node.arguments]
    shared = {
        base: min(term.get(base, 0.0) for term in terms)
        for base in dict.fromkeys(base for term in terms for base in term)
    }
    divisor = from_factors(1.0, {base: exponent for base, exponent in shared.items() if exponent < 0.0})
    if divisor == ONE:
        return node
    inside = add(*(divide(common_factors_out(term), divisor) for term in node.arguments))
    found = multiply(inside, divisor)
    return found if size(found) < size(node) else node
