"""Recognises affine maps y = A·x + b exactly from the tree and inverts them in exact arithmetic.

Coefficients are the doubles of the formula taken as exact rationals; other maps are left to `elimination`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from outspread.formula.tree import Apply, Name, Node, Number

Matrix = list[list[Fraction]]


@dataclass(frozen=True)
class AffineMap:
    """y = matrix·x + offset with its inverse x = inverse·(y - offset); all entries exact."""

    matrix: Matrix
    offset: list[Fraction]
    inverse: Matrix
    determinant: Fraction


def affine_map(outputs: Sequence[Node], inputs: Sequence[str]) -> AffineMap | None:
    """The map if every output is affine in the inputs and the matrix is regular; else None."""
    rows = [_affine_form(output) for output in outputs]
    forms = [row for row in rows if row is not None]
    if len(forms) < len(rows) or any(name not in inputs for form in forms for name in form[0]):
        return None
    matrix = [[form[0].get(name, Fraction(0)) for name in inputs] for form in forms]
    inverse = exact_inverse(matrix)
    if inverse is None:
        return None
    return AffineMap(matrix, [form[1] for form in forms], inverse, determinant(matrix))


_Form = tuple[dict[str, Fraction], Fraction]  # coefficients and constant


def _affine_form(node: Node) -> _Form | None:
    if isinstance(node, Number):
        return {}, Fraction(node.value)
    if isinstance(node, Name):
        return {node.name: Fraction(1)}, Fraction(0)
    if not isinstance(node, Apply) or node.operator not in ("add", "negate", "multiply", "divide"):
        return None
    parts = [_affine_form(argument) for argument in node.arguments]
    forms = [part for part in parts if part is not None]
    if len(forms) < len(parts):
        return None
    total = forms[0]
    if node.operator == "negate":
        return _scaled_form(total, Fraction(-1))
    for form in forms[1:]:
        if node.operator == "add":
            merged = dict(total[0])
            for name, value in form[0].items():
                merged[name] = merged.get(name, Fraction(0)) + value
            total = (merged, total[1] + form[1])
        elif node.operator == "divide":
            if any(form[0].values()) or not form[1]:
                return None
            total = _scaled_form(total, 1 / form[1])
        elif not any(form[0].values()):
            total = _scaled_form(total, form[1])
        elif not any(total[0].values()):
            total = _scaled_form(form, total[1])
        else:
            return None
    return total


def _scaled_form(form: _Form, factor: Fraction) -> _Form:
    return {name: value * factor for name, value in form[0].items()}, form[1] * factor


def exact_inverse(matrix: Matrix) -> Matrix | None:
    """Inverse by Gauss-Jordan elimination in exact arithmetic; None for a singular matrix."""
    order = len(matrix)
    rows = [[*row, *(Fraction(int(i == j)) for j in range(order))] for i, row in enumerate(matrix)]
    for column in range(order):
        pivot = next((i for i in range(column, order) if rows[i][column]), None)
        if pivot is None:
            return None
        rows[column], rows[pivot] = rows[pivot], rows[column]
        head = rows[column][column]
        rows[column] = [value / head for value in rows[column]]
        for i in range(order):
            factor = rows[i][column]
            if i != column and factor:
                rows[i] = [a - factor * b for a, b in zip(rows[i], rows[column], strict=True)]
    return [row[order:] for row in rows]


def determinant(matrix: Matrix) -> Fraction:
    """Determinant by elimination in exact arithmetic."""
    rows, result = [list(row) for row in matrix], Fraction(1)
    for column in range(len(rows)):
        pivot = next((i for i in range(column, len(rows)) if rows[i][column]), None)
        if pivot is None:
            return Fraction(0)
        if pivot != column:
            rows[column], rows[pivot] = rows[pivot], rows[column]
            result = -result
        result *= rows[column][column]
        for i in range(column + 1, len(rows)):
            factor = rows[i][column] / rows[column][column]
            rows[i] = [a - factor * b for a, b in zip(rows[i], rows[column], strict=True)]
    return result
