"""Quadratic polynomials of jointly normal inputs whose law is known.

With A the matrix, Σ the covariance and B = AΣ: all nonzero eigenvalues of B equal (B² = λB) give a
scaled, shifted (noncentral) chi-square variable; two different ones and a centred form give the square of
a Hoyt variable (one sign) or a product of two normal variables (two signs). Others are left to other routes.
Source: Mathai and Provost, Quadratic Forms in Random Variables (1992), theorem 5.1.1 (from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from outspread.routes.closed_form import exact as ex
from outspread.routes.closed_form.expressions import Expression, Product, Sum, Symbol
from outspread.routes.closed_form.forms import Form
from outspread.routes.closed_form.gaussian import Gaussian
from outspread.routes.derived import Statement

Result = tuple[Form, Statement]
Polynomial = dict[tuple[str, ...], Fraction]
Matrix = list[list[Fraction]]
_MOST_VARIABLES = 12
#: what 50-digit roots and logarithms leave where exact arithmetic would leave 0
_NOTHING = Fraction(1, 10**30)


def polynomial(expression: Expression, gaussian: Gaussian) -> Polynomial | None:
    """The expression as a polynomial of degree at most 2 in the normal scores, else None."""
    if isinstance(expression, Symbol):
        return {(expression.name,): ex.ONE} if gaussian.is_normal(expression) else None
    if isinstance(expression, Sum):
        result: Polynomial = {(): expression.constant}
        for term, coefficient in expression.terms:
            part = polynomial(term, gaussian)
            if part is None:
                return None
            for monomial, value in part.items():
                result[monomial] = result.get(monomial, ex.ZERO) + coefficient * value
        return result
    if isinstance(expression, Product):
        result = {(): ex.ONE}
        for base, exponent in expression.factors:
            part = polynomial(base, gaussian)
            if part is None or exponent not in (1, 2):
                return None
            for _ in range(int(exponent)):
                product = _multiply(result, part)
                if product is None:
                    return None
                result = product
        return result
    return None


def _multiply(left: Polynomial, right: Polynomial) -> Polynomial | None:
    result: Polynomial = {}
    for first, a in left.items():
        for second, b in right.items():
            monomial = tuple(sorted(first + second))
            result[monomial] = result.get(monomial, ex.ZERO) + a * b
    result = {monomial: value for monomial, value in result.items() if value != 0}
    return None if any(len(monomial) > 2 for monomial in result) else result


def quadratic(expression: Expression, gaussian: Gaussian) -> Result | None:
    """The form of a quadratic polynomial of jointly normal inputs, where it is of a known kind."""
    if len(expression.symbols) > _MOST_VARIABLES:
        return None
    read = polynomial(expression, gaussian)
    if read is None:
        return None
    names = sorted({name for monomial in read for name in monomial})
    place = {name: index for index, name in enumerate(names)}
    count = len(names)
    matrix = [[ex.ZERO] * count for _ in names]
    linear = [ex.ZERO] * count
    for monomial, value in read.items():
        if len(monomial) == 1:
            linear[place[monomial[0]]] += value
        elif len(monomial) == 2:
            i, j = place[monomial[0]], place[monomial[1]]
            matrix[i][j] += value / 2
            matrix[j][i] += value / 2
    centre = _solve(matrix, [-value / 2 for value in linear])
    if centre is None:
        return None
    shift = read.get((), ex.ZERO) - _form(matrix, centre)
    covariance = [[gaussian.covariance(left, right) for right in names] for left in names]
    offset = [gaussian.moments(name)[0] - middle for name, middle in zip(names, centre, strict=True)]
    return _classify(matrix, covariance, offset, shift)


def _classify(matrix: Matrix, covariance: Matrix, offset: list[Fraction], shift: Fraction) -> Result | None:
    """The form of (X - centre)'A(X - centre) + shift, where X - centre has mean `offset`."""
    product = _times(matrix, covariance)
    squared = _times(product, product)
    trace, second = _trace(product), _trace(squared)
    size = max((abs(entry) for row in product for entry in row), default=ex.ZERO)
    if size == 0:
        return None
    noncentrality = _form(matrix, offset)
    moved = max(abs(entry) for entry in _apply(matrix, offset))
    largest = max(abs(entry) for row in matrix for entry in row)
    centred = moved <= _NOTHING * largest  # a form of two signs may vanish at an offset that does not
    if trace != 0 and _zero(_combine(squared, product, second / trace), size**2):
        value = second / trace
        freedom = Fraction(round(trace / value))
        if freedom == 1 and abs(trace**2 - second) > _NOTHING * second:
            return None  # a second eigenvalue, however small, changes the law near 0
        return _chi_square(value, freedom, ex.ZERO if centred else noncentrality / value, shift)
    determinant = (trace**2 - second) / 2
    cubic = _combine(_times(squared, product), squared, trace)
    cubic = _combine(cubic, product, -determinant)
    if not centred or determinant == 0 or not _zero(cubic, size**3):
        return None
    return _two_values(trace, determinant, shift)


def _chi_square(value: Fraction, freedom: Fraction, noncentrality: Fraction, shift: Fraction) -> Result:
    latex = r"Q = c + \lambda\,\chi'^2_k(\delta), \qquad (A\Sigma)^2 = \lambda\, A\Sigma"
    if noncentrality == 0:
        text = "The centred quadratic form has one nonzero eigenvalue: a scaled chi-square variable."
        return Form("gamma", (freedom / 2,), 2 * value, shift), Statement(text, latex, "closed_form")
    text = "The quadratic form has one nonzero eigenvalue: a scaled noncentral chi-square variable."
    return Form("noncentral", (freedom, noncentrality), value, shift), Statement(text, latex, "closed_form")


def _two_values(trace: Fraction, determinant: Fraction, shift: Fraction) -> Result:
    """Eigenvalues with the sum `trace` and the product `determinant`, means 0."""
    root = ex.square_root(ex.trimmed(trace**2 - 4 * determinant))
    large = (trace + root) / 2 if trace >= 0 else (trace - root) / 2
    small = determinant / large
    latex = r"Q = c + \lambda_1 Z_1^2 + \lambda_2 Z_2^2"
    if determinant > 0:
        text = "Turned to its principal axes, the form is the square of a Hoyt variable."
        return Form("hoyt", (small / large,), large, shift), Statement(text, latex, "closed_form")
    scale = abs(large) + abs(small)
    text = "Turned to its principal axes, the form is a product of two correlated normal variables."
    correlation = trace / scale
    return Form("normal_product", (correlation,), scale, shift), Statement(text, latex, "closed_form")


def _dot(left: Sequence[Fraction], right: Sequence[Fraction]) -> Fraction:
    return sum((a * b for a, b in zip(left, right, strict=True)), ex.ZERO)


def _times(left: Matrix, right: Matrix) -> Matrix:
    columns = list(zip(*right, strict=True))
    return [[_dot(row, column) for column in columns] for row in left]


def _apply(matrix: Matrix, vector: list[Fraction]) -> list[Fraction]:
    return [_dot(row, vector) for row in matrix]


def _form(matrix: Matrix, vector: list[Fraction]) -> Fraction:
    return _dot(vector, _apply(matrix, vector))


def _trace(matrix: Matrix) -> Fraction:
    return sum((row[i] for i, row in enumerate(matrix)), ex.ZERO)


def _combine(left: Matrix, right: Matrix, factor: Fraction) -> Matrix:
    """left - factor*right."""
    return [[a - factor * b for a, b in zip(u, v, strict=True)] for u, v in zip(left, right, strict=True)]


def _zero(matrix: Matrix, size: Fraction) -> bool:
    return all(abs(entry) <= ex.SAME * size for row in matrix for entry in row)


def _solve(matrix: Matrix, right: list[Fraction]) -> list[Fraction] | None:
    """A solution of A x = b by elimination with complete rows, None where there is none."""
    rows = [[*row, value] for row, value in zip(matrix, right, strict=True)]
    count = len(matrix)
    size = max((abs(entry) for row in matrix for entry in row), default=ex.ZERO)
    if size == 0:
        return None
    pivots: list[int] = []
    for column in range(count):
        rest = range(len(pivots), count)
        best = max(rest, key=lambda r: abs(rows[r][column]), default=None)
        if best is None or abs(rows[best][column]) <= _NOTHING * size:
            continue
        here = len(pivots)
        rows[here], rows[best] = rows[best], rows[here]
        for r in range(count):
            if r != here and rows[r][column] != 0:
                factor = rows[r][column] / rows[here][column]
                rows[r] = [ex.trimmed(a - factor * b) for a, b in zip(rows[r], rows[here], strict=True)]
        pivots.append(column)
    largest = max((abs(value) for value in right), default=ex.ZERO)
    if any(abs(rows[r][count]) > _NOTHING * largest for r in range(len(pivots), count)):
        return None
    solution = [ex.ZERO] * count
    for r, column in enumerate(pivots):
        solution[column] = rows[r][count] / rows[r][column]
    return solution
