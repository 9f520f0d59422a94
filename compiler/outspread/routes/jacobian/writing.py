"""Writes the derivation of a joint density: branches of the inverse, Jacobian, determinant, density.

It writes only what was derived elsewhere; a determinant is shown in a simplified form only after that form
agreed with the enclosed one at draws of the inputs.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from fractions import Fraction

import numpy as np

from outspread.formula.evaluate import compile_numpy
from outspread.formula.latex import Typesetter, symbol_for, to_latex
from outspread.formula.tree import Apply, Name, Node, Number, rebuild
from outspread.laws.law import Array
from outspread.routes.derived import Statement
from outspread.routes.jacobian.affine import AffineMap, affine_map
from outspread.routes.jacobian.checks import holds, with_parameters
from outspread.routes.jacobian.construct import (
    PI,
    ZERO,
    add,
    common_factors_out,
    known_number,
    multiply,
    negate,
    number,
    power,
    size,
    square_root,
    tidy,
)
from outspread.routes.jacobian.construct import replace as put
from outspread.routes.jacobian.elimination import Solution, replace_absolute
from outspread.routes.jacobian.rules import part_replaced
from outspread.routes.jacobian.smooth import SmoothMap

MOST_BRANCHES = 8  # written out; the rest is counted
LARGEST_DETERMINANT = 60  # nodes
LARGEST_MATRIX = 12
LARGEST_ENTRY = 30
_DIGITS = 8  # of a decimal that is written out
_SLASHED = 2  # depth at which the typesetter writes fractions with a slash


class Writer:
    """Statements about one joint law; `symbols` gives the LaTeX of names."""

    def __init__(
        self, outputs: Sequence[str], inputs: Sequence[str], symbols: Mapping[str, str], draws: Array
    ):
        self.outputs, self.inputs, self.draws = tuple(outputs), tuple(inputs), draws
        self.symbols = {name: symbols.get(name) or symbol_for(name) for name in (*inputs, *outputs)}

    def latex(self, node: Node) -> str:
        return to_latex(_for_display(node), self.symbols)

    def entry(self, node: Node) -> str:
        """An entry of a matrix: fractions inside a matrix take the typesetter too long, so with a slash."""
        return Typesetter(self.symbols).written(_for_display(node), _SLASHED)[0]

    def names(self, names: Sequence[str]) -> str:
        return ", ".join(self.symbols[name] for name in names)

    def statements(
        self, parts: Sequence[tuple[SmoothMap, Sequence[Solution], bool]]
    ) -> tuple[Statement, ...]:
        """For each piece: the map, the branches to be written, and whether they are searched for instead."""
        result: list[Statement] = []
        for smooth, solutions, searched in parts:
            where = self._where(smooth)
            affine = affine_map(smooth.piece.outputs, self.inputs)
            if affine is not None:
                result += self._affine(affine, where)
                continue
            result += self._searched(where) if searched else self._branches(solutions, where)
            result += self._jacobian(smooth, solutions, where)
        return (*result, self._density(parts))

    def _where(self, smooth: SmoothMap) -> str:
        conditions = smooth.piece.conditions
        if not conditions:
            return ""
        return "Where " + " and ".join(f"${self.latex(one)}$" for one in _without_weaker(conditions)) + ": "

    def _branches(self, solutions: Sequence[Solution], where: str) -> list[Statement]:
        result = []
        for count, solution in enumerate(solutions[:MOST_BRANCHES], 1):
            values = r",\quad ".join(
                f"{self.symbols[name]} = {self.latex(solution.values[name])}" for name in self.inputs
            )
            if len(solutions) == 1:
                title = "The inverse has one branch"
            else:
                title = f"Branch {count} of {len(solutions)} of the inverse"
            text = where + title + self._conditions(solution) + "."
            result.append(Statement(text, values, "inverse"))
        if len(solutions) > MOST_BRANCHES:
            rest = len(solutions) - MOST_BRANCHES
            result.append(Statement(f"{rest} further branches are computed alike.", role="inverse"))
        return result

    def _conditions(self, solution: Solution) -> str:
        parts = [f"${self.latex(one)}$" for one in _without_weaker(solution.conditions)]
        text = ", for " + " and ".join(parts) if parts else ""
        if solution.parameters:
            numbers = ", ".join(f"${symbol_for(one.name)}$" for one in solution.parameters)
            inside = "every integer " + numbers + " that leaves the inputs in their supports"
            text += (" and " if parts else ", for ") + inside
        return text

    def _searched(self, where: str) -> list[Statement]:
        text = (
            where + "The inverse is not written as formulas: at each point every solution in the support is "
            "found by interval branch and prune, and each is proven to be the only one in its box by the "
            "Krawczyk operator."
        )
        return [Statement(text, f"{self._vector(self.outputs)} = g{self._vector(self.inputs)}", "inverse")]

    def _vector(self, names: Sequence[str]) -> str:
        return _matrix([[self.symbols[name]] for name in names])

    def _affine(self, affine: AffineMap, where: str) -> list[Statement]:
        matrix = _matrix([[_exact(value) for value in row] for row in affine.matrix])
        inverse = _inverse(affine)
        shifted = self._vector(self.outputs)
        forward = f"{matrix}{self._vector(self.inputs)}"
        if any(affine.offset):
            offset = _matrix([[_exact(value)] for value in affine.offset])
            forward += f" + {offset}"
            shifted = rf"\left({shifted} - {offset}\right)"
        determinant = _exact(affine.determinant)
        return [
            Statement(where + "The map is affine.", f"{self._vector(self.outputs)} = {forward}", "note"),
            Statement("Its inverse is", f"{self._vector(self.inputs)} = {inverse}{shifted}", "inverse"),
            Statement("Its Jacobian is constant.", rf"J = {matrix},\quad \det J = {determinant}", "jacobian"),
        ]

    def _jacobian(self, smooth: SmoothMap, solutions: Sequence[Solution], where: str) -> list[Statement]:
        entries = [[tidy(entry) for entry in row] for row in smooth.jacobian]
        result = self._derivatives(entries, where)
        determinant = common_factors_out(
            symbolic_determinant([[_lengths_open(e) for e in row] for row in entries])
        )
        if size(determinant) > LARGEST_DETERMINANT or not self._agrees(smooth, determinant, {}):
            return result
        result.append(Statement("Its determinant is", rf"\det J = {self.latex(determinant)}", "jacobian"))
        if len(solutions) == 1:
            shown = self._in_outputs(smooth, determinant, solutions[0])
            if shown is not None:
                text = "On the branch of the inverse, in the outputs, it is"
                result.append(Statement(text, rf"\det J = {self.latex(shown)}", "jacobian"))
        return result

    def _derivatives(self, entries: Sequence[Sequence[Node]], where: str) -> list[Statement]:
        """The Jacobian as a matrix, or row by row where it is large: formulas in a matrix are slow to set."""
        if sum(size(entry) for row in entries for entry in row) <= LARGEST_MATRIX:
            matrix = _matrix([[self.entry(entry) for entry in row] for row in entries])
            rows, columns = self.names(self.outputs), self.names(self.inputs)
            text = f"{where}The Jacobian matrix, of $({rows})$ by $({columns})$, is"
            return [Statement(text, f"J = {matrix}", "jacobian")]
        result = []
        for name, row in zip(self.outputs, entries, strict=True):
            shown = r",\quad ".join(
                rf"\frac{{\partial {self.symbols[name]}}}{{\partial {self.symbols[by]}}} = "
                + self.latex(entry)
                for by, entry in zip(self.inputs, row, strict=True)
                if size(entry) <= LARGEST_ENTRY
            )
            if shown:
                whole = all(size(entry) <= LARGEST_ENTRY for entry in row)
                text = f"{where}The row of the Jacobian matrix for ${self.symbols[name]}$ is"
                text += "" if whole else ", long entries left out"
                result.append(Statement(text, shown, "jacobian"))
        return result

    def _in_outputs(self, smooth: SmoothMap, determinant: Node, solution: Solution) -> Node | None:
        if solution.parameters or smooth.piece.parameters:
            return None
        shown = determinant
        for name, output in zip(self.outputs, smooth.piece.outputs, strict=True):
            shown = part_replaced(shown, tidy(output), Name(name))
            if isinstance(output, Apply) and output.operator in ("hypot", "sqrt"):
                shown = part_replaced(shown, power(_lengths_open(output), 2.0), power(Name(name), 2.0))
        shown = put(shown, dict(solution.values))
        lengths = [
            Name(name)
            for name, output in zip(self.outputs, smooth.piece.outputs, strict=True)
            if isinstance(output, Apply) and output.operator in ("hypot", "sqrt")
        ]
        shown = replace_absolute(shown, {Apply("abs", (name,)): name for name in lengths})
        meanings = dict(zip(self.outputs, smooth.piece.outputs, strict=True))
        if size(shown) > LARGEST_DETERMINANT or not self._agrees(smooth, shown, meanings):
            return None
        return shown

    def _agrees(self, smooth: SmoothMap, shown: Node, meanings: Mapping[str, Node]) -> bool:
        """Whether `shown` has the value of the determinant at the draws that lie in the piece."""
        named = with_parameters(smooth, self.draws)
        inside = holds(smooth.piece.conditions, named)
        at = {name: values[inside] for name, values in named.items()}
        if not at[self.inputs[0]].size:
            return False
        values = {
            **at,
            **{name: compile_numpy(node, tuple(at))(*at.values()) for name, node in meanings.items()},
        }
        found = compile_numpy(shown, tuple(values))(*values.values())
        order = len(self.inputs)
        matrix = np.empty((found.size, order, order))
        for i, row in enumerate(smooth.jacobian):
            for j, entry in enumerate(row):
                matrix[:, i, j] = compile_numpy(entry, tuple(at))(*at.values())
        usable = np.all(np.isfinite(matrix), axis=(1, 2)) & np.isfinite(found)
        expected = np.linalg.det(matrix[usable])
        scale = np.prod(np.linalg.norm(matrix[usable], axis=2), axis=1)
        close = np.abs(found[usable] - expected) <= 1e-7 * np.abs(expected) + 1e-10 * scale
        return bool(usable.sum() > 0.9 * usable.size and np.all(close))

    def _density(self, parts: Sequence[tuple[SmoothMap, Sequence[Solution], bool]]) -> Statement:
        left = f"f_{{{self.names(self.outputs)}}}({self.names(self.outputs)})"
        density = f"f_{{{self.names(self.inputs)}}}"
        total = sum(len(solutions) for _, solutions, _ in parts)
        affine = affine_map(parts[0][0].piece.outputs, self.inputs) if len(parts) == 1 else None
        if affine is not None:
            text = "The joint density of the outputs is that of the inputs at the inverse, divided by"
            size, right = _exact(abs(affine.determinant)), f"{density}({self.names(self.inputs)})"
            right = right if size == "1" else rf"\frac{{1}}{{{size}}}\,{right}"
            return Statement(f"{text} $|\\det J|$.", f"{left} = {right}", "density")
        if total == 1 and len(parts) == 1 and not parts[0][1][0].parameters and not parts[0][2]:
            solution = parts[0][1][0]
            arguments = r",\; ".join(self.latex(solution.values[name]) for name in self.inputs)
            right = rf"\frac{{1}}{{\left|\det J\right|}}\,{density}\!\left({arguments}\right)"
            text = "The joint density of the outputs, where the inverse lies in the support, else 0, is"
            return Statement(text, f"{left} = {right}", "density")
        inputs = ", ".join(f"{self.symbols[name]}^{{(b)}}" for name in self.inputs)
        right = (
            rf"\sum_{{b}} \frac{{{density}\!\left({inputs}\right)}}"
            rf"{{\left|\det J\!\left({inputs}\right)\right|}}"
        )
        text = (
            "The joint density of the outputs is the sum over all branches $b$ of the inverse that lie in "
            "the support of the inputs."
        )
        return Statement(text, f"{left} = {right}", "density")


def _lengths_open(node: Node) -> Node:
    """hypot(a, b) as √(a² + b²), so that it cancels against a² + b²."""

    def change(part: Node) -> Node | None:
        if isinstance(part, Apply) and part.operator == "hypot":
            return square_root(add(*(power(_lengths_open(one), 2.0) for one in part.arguments)))
        return None

    return tidy(rebuild(node, change))


def symbolic_determinant(entries: Sequence[Sequence[Node]]) -> Node:
    """The determinant by expansion along the first row, tidied."""
    if len(entries) == 1:
        return entries[0][0]
    terms = []
    for column, entry in enumerate(entries[0]):
        if entry != ZERO:
            minor = symbolic_determinant([[*row[:column], *row[column + 1 :]] for row in entries[1:]])
            term = multiply(entry, minor)
            terms.append(negate(term) if column % 2 else term)
    return add(*terms) if terms else ZERO


def _for_display(node: Node) -> Node:
    """Folded numbers as they are read: exponents 1/3, multiples of π, and 10/ln 10 of the decibel."""

    def change(part: Node) -> Node | None:
        if isinstance(part, Apply) and part.operator == "power":
            value = known_number(part.arguments[1])
            if value and abs(value) < 1.0 and abs(1.0 / value - round(1.0 / value)) < 1e-12:
                exponent: Node = Apply("divide", (Number(1.0), Number(float(abs(round(1.0 / value))))))
                exponent = exponent if value > 0.0 else Apply("negate", (exponent,))
                return Apply("power", (_for_display(part.arguments[0]), exponent))
        return _read_number(part) if isinstance(part, Number) and not part.text else None

    return rebuild(node, change)


def _read_number(part: Number) -> Node | None:
    for multiple in (1.0, 2.0, 4.0, 0.5):
        if part.value == multiple * math.pi:
            return multiply(number(multiple), PI)
    if part.value == 10.0 / math.log(10.0):
        return Apply("divide", (number(10.0), Apply("log", (number(10.0),))))
    short = Fraction(part.value).limit_denominator(99)
    if short.denominator > 1 and len(repr(part.value)) > 12 and _same(part.value, float(short)):
        return Apply("divide", (number(float(short.numerator)), number(float(short.denominator))))
    return None


def _same(a: float, b: float) -> bool:
    return math.isclose(a, b, rel_tol=4e-16)


def _plain(condition: Node) -> Node:
    """a > b as b < a."""
    if isinstance(condition, Apply) and condition.operator in ("greater", "greater_equal"):
        return Apply(condition.operator.replace("greater", "less"), condition.arguments[::-1])
    return condition


def _without_weaker(conditions: Sequence[Node]) -> list[Node]:
    """The conditions without those that say a ≤ b beside a < b, each once."""
    strict = {
        one.arguments: one
        for one in map(_plain, conditions)
        if isinstance(one, Apply) and one.operator == "less"
    }
    kept: dict[Node, Node] = {}
    for one in conditions:
        plain = _plain(one)
        if isinstance(plain, Apply) and plain.operator == "less_equal" and plain.arguments in strict:
            continue
        kept.setdefault(plain, one)
    return list(kept.values())


def _matrix(rows: Sequence[Sequence[str]]) -> str:
    return r"\begin{pmatrix}" + r" \\ ".join(" & ".join(row) for row in rows) + r"\end{pmatrix}"


def _inverse(affine: AffineMap) -> str:
    """The inverse matrix, with the determinant taken out where that leaves short decimals."""
    whole = [[value * affine.determinant for value in row] for row in affine.inverse]
    short = all(_decimal(value) for value in (affine.determinant, *(v for row in whole for v in row)))
    if short and _exact(abs(affine.determinant)) != "1":
        factor = rf"\frac{{1}}{{{_exact(affine.determinant)}}}"
        return rf"{factor}\," + _matrix([[_exact(value) for value in row] for row in whole])
    return _matrix([[_exact(value) for value in row] for row in affine.inverse])


def _decimal(value: Fraction) -> str:
    """The number as a decimal of few digits, as engineers type it; "" where it is none."""
    text = f"{float(value):.{_DIGITS}g}"
    return text if _near(Fraction(text), value) and "e" not in text else ""


def _near(short: Fraction, value: Fraction) -> bool:
    """Whether two numbers are the same but for the rounding of decimals to doubles."""
    return abs(short - value) <= abs(value) * Fraction(2, 10**15)


def _exact(value: Fraction) -> str:
    """A short decimal or fraction as such, else the number to nine digits."""
    short = value.limit_denominator(99)
    if _decimal(value):
        return _decimal(value)
    if _near(short, value) and abs(short.numerator) < 10**6:
        return f"{short.numerator}/{short.denominator}"
    return to_latex(Number(float(value), f"{float(value):.9g}"), {})
