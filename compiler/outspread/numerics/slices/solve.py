"""Compiles an event into a program that solves it for one variable, for many problems at once.

Given arrays of values for all other names (one entry a problem), the program returns the `Sets` on which the
event holds. A comparison is solved exactly where the variable occurs once (operation by operation, see
`pullback`) or as a quadratic; otherwise its roots are isolated by interval subdivision (`isolate`).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from outspread.formula.calculus import derivative
from outspread.formula.evaluate import compile_numpy, fold
from outspread.formula.interval import Interval, enclose
from outspread.formula.tree import Apply, Name, Node, Number, add, names, occurrences, rebuild, subtract, walk
from outspread.numerics import sets
from outspread.numerics.sets import Array, Sets
from outspread.numerics.slices import cases, pullback
from outspread.numerics.slices.isolate import root_finder
from outspread.numerics.slices.polynomial import quadratic_program, rational

_LARGEST = float(np.finfo(float).max)
PART = "outspread:part"  # a sub-formula that stands for the variable wherever it occurs
BOUND = "outspread:bound"  # an end of a target, for formulas solved as a whole
PARAMETER = "outspread:y"  # the value y in {g <= y}; cannot clash with an input's name


@dataclass(frozen=True)
class Frame:
    """The range of the variable that matters, with interior points that grade it by probability."""

    name: str
    grid: Array  # ascending, from the lower to the upper end of what is looked at


Environment = Mapping[str, Array]
Program = Callable[[Environment, int], Sets]


class Solver:
    """Solves one event for one variable. `exact` tells whether every comparison was solved by formula."""

    def __init__(self, event: Node, frame: Frame, structure_only: bool = False):
        """`structure_only`: only find out whether the event can be solved by formula; never called."""
        self.frame = frame
        self.structure_only = structure_only
        self.exact = True
        self._known: dict[Node, Program] = {}
        self._solved_once: dict[int, Sets] = {}
        self._program = self._compile(cases.split(event, frame.name))

    def __call__(self, environment: Environment, count: int) -> Sets:
        """The sets on which the event holds; environment arrays have shape (count,)."""
        self._solved_once.clear()
        with np.errstate(all="ignore"):
            return self._program(environment, count)

    def _compile(self, event: Node) -> Program:
        assert isinstance(event, Apply)
        if event == cases.TRUE:
            return lambda environment, count: sets.everything(count)
        if event == cases.FALSE:
            return lambda environment, count: sets.nothing(count)
        if event.operator in ("and", "or"):
            return self._connective(event)
        if event not in self._known:
            self._known[event] = self._single(event)
        return self._known[event]

    def _single(self, event: Apply) -> Program:
        """One comparison; in one call it is solved once, wherever it occurs in the event."""
        program, place = self._unconnected(event), len(self._known)

        def once(environment: Environment, count: int) -> Sets:
            if place not in self._solved_once:
                self._solved_once[place] = program(environment, count)
            return self._solved_once[place]

        return once

    def _unconnected(self, event: Apply) -> Program:
        if self.frame.name not in names(event):
            condition = _function(event)

            def decided(environment: Environment, count: int) -> Sets:
                holds = np.broadcast_to(condition(environment, count).astype(bool), (count,))
                return sets.where(holds, sets.everything(count))

            return decided
        return self._comparison(event)

    def _connective(self, event: Apply) -> Program:
        programs = [self._compile(part) for part in event.arguments]
        join = sets.intersect if event.operator == "and" else sets.union

        def joined(environment: Environment, count: int) -> Sets:
            result = programs[0](environment, count)
            for program in programs[1:]:
                result = join(result, program(environment, count))
            return result

        return joined

    def _comparison(self, event: Apply) -> Program:
        left, right = event.arguments
        operator = event.operator
        name = self.frame.name
        if name in names(right) and name not in names(left):
            left, right, operator = right, left, cases.FLIPPED[operator]
        if name in names(right):
            quadratic = quadratic_program(left, right, operator, name, PARAMETER, _function)
            if quadratic is not None:
                return quadratic
            left, right = subtract(left, right), Number(0.0)
        return _target(operator, right, self._peel(left))

    def _peel(self, node: Node) -> Callable[[Sets, Environment], Sets]:
        """The inverse image of a target under the whole formula: operation by operation as long as the
        variable stands in one operand only, then by the solver of what is left."""
        if isinstance(node, Name):
            return lambda target, environment: target
        assert isinstance(node, Apply)
        holders = [i for i, argument in enumerate(node.arguments) if self.frame.name in names(argument)]
        step = self._step(node, holders[0]) if len(holders) == 1 else None
        if step is None:
            return self._core(node)
        inner = self._peel(node.arguments[holders[0]])
        return lambda target, environment: inner(sets.compact(step(target, environment)), environment)

    def _core(self, node: Node) -> Callable[[Sets, Environment], Sets]:
        """The inverse image under a formula in which the variable stands in several operands."""
        cosine = _cosine(node, self.frame.name)
        if cosine is not None:
            factor, leg = (_function(part) for part in cosine)

            def turned(target: Sets, environment: Environment) -> Sets:
                scaled = pullback.scale(target, factor(environment, target.count))
                return pullback.direction(scaled, leg(environment, target.count))

            return turned
        part = _repeated_part(node, self.frame.name)
        if part is not None:
            whole = rebuild(node, lambda piece: Name(PART) if piece == part else None)
            if rational(whole, PART) is not None:
                outer, inner = self._solved(whole, PART), self._peel(part)
                return lambda target, environment: inner(outer(target, environment), environment)
        return self._solved(node, self.frame.name)

    def _solved(self, node: Node, name: str) -> Callable[[Sets, Environment], Sets]:
        """The inverse image by solving `node` against the ends of the target."""
        bound = Name(BOUND)
        sides: list[Program] = []
        for operator in ("less_equal", "greater_equal"):
            quadratic = quadratic_program(node, bound, operator, name, BOUND, _function)
            if quadratic is None:
                self.exact = False
                if self.structure_only:
                    return lambda target, environment: target
                quadratic = root_finder(node, bound, operator, name, self.frame.grid, BOUND)
            sides.append(quadratic)
        below, above = sides

        def pull(target: Sets, environment: Environment) -> Sets:
            rows = []
            for row in range(target.lower.shape[0]):
                ends = []
                for program, end, rate in (
                    (below, target.upper[row], target.upper_rate[row]),
                    (above, target.lower[row], target.lower_rate[row]),
                ):
                    full = target.lower[row] <= target.upper[row]
                    if full.any() and np.isfinite(end[full]).any():
                        part = program({**environment, BOUND: end}, target.count)
                        ends.append(_slowed(part, rate, np.isinf(end), full))
                    elif full.any():
                        ends.append(sets.where(full, sets.everything(target.count)))
                    else:
                        ends.append(sets.nothing(target.count))
                rows.append(sets.intersect(ends[0], ends[1]))
            return sets.stack(rows)

        return pull

    def _step(self, node: Apply, where: int) -> Callable[[Sets, Environment], Sets] | None:
        operator = node.operator
        rest = [argument for i, argument in enumerate(node.arguments) if i != where]
        if operator in pullback.MONOTONE:
            inverse, slope, rising, low, high = pullback.MONOTONE[operator]
            return lambda target, _: pullback.monotone(target, inverse, slope, rising, low, high)
        if not rest and operator in pullback.UNARY:
            unary = pullback.UNARY[operator]
            return lambda target, _: unary(target)
        if operator in pullback.PERIODIC:
            return self._periodic(node)
        if operator == "power":
            return _power(where, rest[0])
        combined, binary = _BINARY.get((operator, where if operator in _ORDERED else 0), (None, None))
        if combined is None or binary is None:
            return None
        other = _function(combined(rest))

        def pulled(target: Sets, environment: Environment) -> Sets:
            # an operand that overflows still has a side on which the result lies: inf - inf has none
            return binary(target, np.clip(other(environment, target.count), -_LARGEST, _LARGEST))

        return pulled

    def _periodic(self, node: Apply) -> Callable[[Sets, Environment], Sets]:
        argument = node.arguments[0]
        pull = pullback.PERIODIC[node.operator]
        name, low, high = self.frame.name, float(self.frame.grid[0]), float(self.frame.grid[-1])

        def periodic(target: Sets, environment: Environment) -> Sets:
            box = {key: Interval(value, value) for key, value in environment.items()}
            box[name] = Interval(np.full(target.count, low), np.full(target.count, high))
            span = enclose(argument, box)
            lower, upper = (np.broadcast_to(end, (target.count,)) for end in (span.lower, span.upper))
            return pull(target, lower, upper)

        return periodic


def _repeated_part(node: Node, name: str) -> Node | None:
    """The largest sub-formula that holds the name once and all of whose copies hold all its occurrences."""
    total = occurrences(node, name)
    counts: dict[Node, int] = {}
    for piece in walk(node):
        if isinstance(piece, Apply) and occurrences(piece, name) == 1:
            counts[piece] = counts.get(piece, 0) + 1
    return next((piece for piece, count in counts.items() if count == total), None)


def _cosine(node: Node, name: str) -> tuple[Node, Node] | None:
    """Factor and leg of a formula `factor * name / hypot(name, leg)`, both free of the name; else None."""
    if not isinstance(node, Apply) or node.operator != "divide":
        return None
    top, bottom = node.arguments
    factors = top.arguments if isinstance(top, Apply) and top.operator == "multiply" else (top,)
    rest = [factor for factor in factors if name not in names(factor)]
    if len(rest) != len(factors) - 1 or Name(name) not in factors or not isinstance(bottom, Apply):
        return None
    legs: list[Node] = []
    if bottom.operator == "hypot":
        own = Name(name)
        legs = [leg for leg in bottom.arguments if leg != own]
    elif bottom.operator == "sqrt" and isinstance(bottom.arguments[0], Apply):
        root = bottom.arguments[0]
        own_square = Apply("power", (Name(name), Number(2.0)))
        squares = [term for term in root.arguments if term != own_square]
        if root.operator == "add" and len(squares) == len(root.arguments) - 1:
            legs = [Apply("sqrt", (add(*squares),))]
    several = bottom.operator == "hypot" and len(legs) != len(bottom.arguments) - 1
    if not legs or several or any(name in names(leg) for leg in legs):
        return None
    factor = rest[0] if len(rest) == 1 else Apply("multiply", tuple(rest)) if rest else Number(1.0)
    return factor, legs[0] if len(legs) == 1 else Apply("hypot", tuple(legs))


def _slowed(part: Sets, rate: Array, infinite: npt.NDArray[np.bool_], full: npt.NDArray[np.bool_]) -> Sets:
    """Chain rule: the ends move with the bound, the bound with y. An infinite bound holds everywhere."""
    whole = sets.where(infinite & full, sets.everything(part.count))
    moved = Sets(part.lower, part.upper, part.lower_rate * rate, part.upper_rate * rate)
    return (
        sets.stack([sets.where(~infinite & full, moved), whole])
        if infinite.any()
        else sets.where(full, moved)
    )


Function = Callable[[Environment, int], npt.NDArray[np.float64]]


def _function(node: Node) -> Function:
    """A formula as a function of the environment."""
    arguments = names(node)
    compiled = compile_numpy(node, arguments)

    def evaluate(environment: Environment, count: int) -> npt.NDArray[np.float64]:
        with np.errstate(all="ignore"):
            value = compiled(*(environment[name] for name in arguments))
        return np.broadcast_to(np.asarray(value), (count,))

    return evaluate


def _target(operator: str, right: Node, peeled: Callable[[Sets, Environment], Sets]) -> Program:
    bound = _function(right)
    moving = PARAMETER in names(right)
    rate = _function(derivative(right, PARAMETER)) if moving else None
    below = operator in ("less", "less_equal")

    def solve(environment: Environment, count: int) -> Sets:
        limit = bound(environment, count)
        if operator == "less":
            limit = np.nextafter(limit, -np.inf)
        elif operator == "greater":
            limit = np.nextafter(limit, np.inf)
        speed = np.zeros((1, count)) if rate is None else rate(environment, count)[None, :]
        infinite, zero = np.full((1, count), np.inf), np.zeros((1, count))
        end = limit[None, :]
        target = Sets(-infinite, end, zero, speed) if below else Sets(end, infinite, speed, zero)
        return peeled(sets.where(~np.isnan(limit), target), environment)

    return solve


def _power(where: int, other: Node) -> Callable[[Sets, Environment], Sets]:
    other = fold(other)  # -1 is typed as the negative of 1
    if (
        where == 0
        and isinstance(other, Number)
        and other.value == int(other.value)
        and abs(other.value) < 1e6
    ):
        exponent = int(other.value)
        return lambda target, _: pullback.integer_power(target, exponent)
    operand = _function(other)
    pull = pullback.power_of if where == 0 else pullback.exponent_of
    return lambda target, environment: pull(target, operand(environment, target.count))


def _joined(operator: str) -> Callable[[list[Node]], Node]:
    return lambda rest: rest[0] if len(rest) == 1 else Apply(operator, tuple(rest))


_ORDERED = frozenset({"divide", "atan2"})
_BINARY: dict[tuple[str, int], tuple[Callable[[list[Node]], Node], Callable[[Sets, Array], Sets]]] = {
    ("add", 0): (_joined("add"), pullback.shift),
    ("multiply", 0): (_joined("multiply"), pullback.scale),
    ("divide", 0): (_joined("divide"), pullback.divide_by),
    ("divide", 1): (_joined("divide"), pullback.divide_into),
    ("min", 0): (_joined("min"), pullback.minimum),
    ("max", 0): (_joined("max"), pullback.maximum),
    ("hypot", 0): (lambda rest: Apply("hypot", tuple(rest)), pullback.hypotenuse),
    ("atan2", 0): (_joined("atan2"), pullback.angle_of_rise),
    ("atan2", 1): (_joined("atan2"), pullback.angle_of_run),
}
