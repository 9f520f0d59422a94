"""Finds the known law of a formula: splits it into independent parts and applies the rules to each.

What it cannot name exactly it leaves to other routes by answering None; it never approximates. The rules
themselves live in `gaussian`, `quadratic`, `sums`, `products` and `extremes`, laws are built in `building`.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from fractions import Fraction

from outspread.errors import LawError
from outspread.formula.tree import Node, names
from outspread.laws.extremes import IndependentExtreme
from outspread.laws.law import Law
from outspread.routes.closed_form import exact as ex
from outspread.routes.closed_form import extremes, products, sums
from outspread.routes.closed_form.alternatives import alternatives
from outspread.routes.closed_form.expressions import (
    Expression,
    Function,
    Product,
    Sum,
    Symbol,
    constant_of,
    factors_of,
    from_factors,
    simplest,
)
from outspread.routes.closed_form.forms import Form, absolute, exponential, logarithm, raised
from outspread.routes.closed_form.gaussian import Gaussian, NormalDependence
from outspread.routes.closed_form.named import ClosedForm, closed_form, law_of
from outspread.routes.closed_form.normal_form import NoNormalForm, NormalForm
from outspread.routes.closed_form.quadratic import quadratic
from outspread.routes.closed_form.reading import form_of
from outspread.routes.derived import Statement

Result = tuple[Form, tuple[Statement, ...]]
Parts = tuple[tuple[Expression, Fraction], ...]
PI = ex.exact(3.141592653589793)


def recognise(
    expression: Node, laws: Mapping[str, Law], correlation: NormalDependence | None
) -> ClosedForm | None:
    """The closed form of a formula of inputs, or None where no rule applies exactly.

    `laws` holds the inputs that are independent but for `correlation`; an input that depends on others in
    any other way must be left out, and a formula that names it has no closed form here.
    """
    used = names(expression)
    if not used or any(name not in laws for name in used):
        return None
    try:
        search = _Search({name: laws[name] for name in used}, correlation)
        found = search.known(search.algebra.read(expression))
        if found is None:
            return None
        return closed_form(*found, inputs=used)
    except (NoNormalForm, ArithmeticError, LawError):
        return None  # a formula without normal form, or a parameter out of range


class _Search:
    """The rules applied to one formula, each part of it looked at once."""

    def __init__(self, laws: Mapping[str, Law], dependence: NormalDependence | None):
        self.laws, self.dependence = laws, dependence
        self.algebra = NormalForm(laws)
        self.gaussian = Gaussian(laws, dependence)
        self._known: dict[str, Result | None] = {}
        self._laws_of: dict[Form, Law] = {}

    def known(self, expression: Expression) -> Result | None:
        if expression.key not in self._known:
            self._known[expression.key] = None  # while under way: no circles through alternatives
            found = self._direct(expression)
            if found is None and not isinstance(expression, Symbol):
                for other in self._alternatives(expression):
                    found = self.known(other)
                    if found is not None:
                        break
            self._known[expression.key] = found
        return self._known[expression.key]

    def _alternatives(self, expression: Expression) -> list[Expression]:
        try:
            return list(alternatives(expression, self.algebra))
        except NoNormalForm:
            return []

    def _direct(self, expression: Expression) -> Result | None:
        if isinstance(expression, Symbol):
            if expression.score:
                mean, sd = self.gaussian.moments(expression.name)
                return Form("normal", scale=sd, shift=mean), ()
            return form_of(self.laws[expression.name]), ()
        if isinstance(expression, Function):
            return self._function(expression)
        if isinstance(expression, Product):
            return self._product(expression)
        return self._sum(expression) if isinstance(expression, Sum) and expression.terms else None

    def _groups(self, parts: Parts) -> list[list[tuple[Expression, Fraction]]]:
        """The parts, put together where they share an input or are correlated: groups are independent."""
        leader: dict[str, str] = {}

        def find(name: str) -> str:
            while leader.setdefault(name, name) != name:
                leader[name] = leader[leader[name]]
                name = leader[name]
            return name

        for part, _ in parts:
            for name in part.symbols:
                leader[find(name)] = find(part.symbols[0])
        if self.dependence is not None:
            dependent = [name for name in leader if name in self.dependence.index]
            for i, left in enumerate(dependent):
                for right in dependent[:i]:
                    if self.dependence.between(left, right) != 0:
                        leader[find(left)] = find(right)
        groups: dict[str, list[tuple[Expression, Fraction]]] = {}
        for pair in parts:
            groups.setdefault(find(pair[0].symbols[0]), []).append(pair)
        return list(groups.values())

    def _sum(self, whole: Sum) -> Result | None:
        linear = self.gaussian.linear(whole)
        if linear is not None:
            return linear[0], (linear[1],)
        if len(whole.terms) == 1:
            term, coefficient = whole.terms[0]
            inner = self.known(term)
            return (inner[0].affine(coefficient, whole.constant), inner[1]) if inner else None
        groups = self._groups(whole.terms)
        if len(groups) == 1:
            return self._dependent_sum(whole)
        parts = [self.known(simplest(ex.ZERO, dict(group))) for group in groups]
        found = [part for part in parts if part is not None]
        if len(found) == len(parts):
            added = sums.total([form for form, _ in found])
            if added is not None:
                trail = _distinct(statement for _, inner in found for statement in inner)
                return added[0].affine(ex.ONE, whole.constant), (*trail, added[1])
        return self._logarithms(whole)

    def _dependent_sum(self, whole: Sum) -> Result | None:
        form = quadratic(whole, self.gaussian)
        return (form[0], (form[1],)) if form else self._logarithms(whole)

    def _logarithms(self, whole: Sum) -> Result | None:
        """Σ c_i ln b_i = c_1 ln Π b_i^(c_i/c_1)."""
        first = whole.terms[0][1]
        factors = dict[Expression, Fraction]()
        for term, coefficient in whole.terms:
            if not isinstance(term, Function) or term.operator != "log":
                return None
            for base, exponent in factors_of(term.arguments[0]):
                factors[base] = factors.get(base, ex.ZERO) + exponent * coefficient / first
        inner = self.known(from_factors(factors))
        form = logarithm(inner[0]) if inner else None
        return (form.affine(first, whole.constant), inner[1]) if form and inner else None

    def _product(self, whole: Product) -> Result | None:
        joint = self.gaussian.lognormal(whole) or self._quotient(whole)
        if joint is not None:
            return joint[0], (joint[1],)
        if len(whole.factors) == 1:
            base, exponent = whole.factors[0]
            inner = self.known(base)
            form = raised(inner[0], exponent) if inner else None
            return (form, (*inner[1], *_power_note(inner[0], form, exponent))) if form and inner else None
        groups = self._groups(whole.factors)
        if len(groups) == 1:
            return self._dependent_product(whole)
        parts = [self.known(from_factors(dict(group))) for group in groups]
        found = [part for part in parts if part is not None]
        if len(found) < len(parts):
            return None
        result = products.product([form for form, _ in found])
        if result is None:
            return None
        trail = _distinct(statement for _, inner in found for statement in inner)
        return result[0], (*trail, result[1])

    def _quotient(self, whole: Product) -> tuple[Form, Statement] | None:
        """(X/Y)^n of centred jointly normal X and Y."""
        if len(whole.factors) != 2:
            return None
        (first, p), (second, q) = whole.factors
        if p != -q or not ex.is_whole(p):
            return None
        result = self.gaussian.quotient(first, second)
        form = raised(result[0], p) if result else None
        return (form, result[1]) if form and result else None

    def _dependent_product(self, whole: Product) -> Result | None:
        form = quadratic(whole, self.gaussian)
        if form is not None:
            return form[0], (form[1],)
        if len(whole.factors) != 2:
            return None
        for (part, exponent), (rest, power) in (whole.factors, whole.factors[::-1]):
            if power < 0 < exponent or exponent < 0 < power:
                found = self._raised_share(part, exponent, rest, -power)
                if found is not None:
                    return found
        return None

    def _raised_share(
        self, part: Expression, exponent: Fraction, rest: Expression, power: Fraction
    ) -> Result | None:
        """part^exponent / rest^power as (part^(exponent/power) / rest)^power."""
        if self.algebra.bounds(part)[0] < 0 and not ex.is_whole(power):
            return None  # the root would lose the sign of the part
        found = self._share(self.algebra.power(part, exponent / power), rest)
        result = raised(found[0], power) if found else None
        return (result, found[1]) if found and result else None

    def _share(self, part: Expression, total: Expression) -> Result | None:
        """N/D where D = c N + M with M independent of N."""
        if not isinstance(total, Sum):
            return None
        terms = dict(total.terms)
        first, weight = part.terms[0] if isinstance(part, Sum) else (part, ex.ONE)
        share = terms.get(first, ex.ZERO) / weight
        rest = self.algebra.add([total, self.algebra.scale(part, -share)])
        if share == 0 or not rest.symbols or len(self._groups(((part, ex.ONE), (rest, ex.ONE)))) != 2:
            return None
        numerator, remainder = self.known(part), self.known(rest)
        if numerator is None or remainder is None:
            return None
        result = products.beta_ratio(numerator[0], remainder[0], share)
        trail = _distinct((*numerator[1], *remainder[1]))
        return (result[0], (*trail, result[1])) if result else None

    def _function(self, whole: Function) -> Result | None:
        if whole.operator in ("min", "max"):
            return self._extreme(whole)
        inner = self.known(whole.arguments[0])
        if inner is None:
            return None
        form: Form | None = None
        if whole.operator == "exp":
            form, text = exponential(inner[0]), "The exponential of this variable is of a known kind."
        elif whole.operator == "root":
            exponent = constant_of(whole.arguments[1])
            form = raised(inner[0], exponent) if exponent is not None else None
            text = "The root of this variable is of a known kind."
        elif whole.operator in ("log", "checked_log"):
            form, text = logarithm(inner[0]), "The logarithm of this variable is of a known kind."
        elif whole.operator == "abs":
            form, text = absolute(inner[0]), "The absolute value of this variable is of a known kind."
        elif whole.operator in ("sin", "cos", "tan"):
            form, text = _circular(whole.operator, inner[0]), "The angle is uniform over whole (half) turns."
        return (form, (*inner[1], Statement(text, role="closed_form"))) if form else None

    def _extreme(self, whole: Function) -> Result | None:
        parts = tuple((argument, ex.ONE) for argument in whole.arguments)
        if any(not argument.symbols for argument in whole.arguments) or len(self._groups(parts)) < len(parts):
            return None
        found = [self.known(argument) for argument in whole.arguments]
        known = [part for part in found if part is not None]
        if len(known) < len(found):
            return None
        forms = [form for form, _ in known]
        trail = _distinct(statement for _, inner in known for statement in inner)
        result = extremes.extreme(forms, largest=whole.operator == "max")
        if result is not None:
            return result[0], (*trail, result[1])
        return self._any_extreme(forms, trail, largest=whole.operator == "max")

    def _any_extreme(
        self, forms: list[Form], trail: tuple[Statement, ...], *, largest: bool
    ) -> Result | None:
        laws = []
        for form in forms:
            if form not in self._laws_of:
                self._laws_of[form] = law_of(form)
            laws.append(self._laws_of[form])
        if {law.continuous_mass for law in laws} not in ({0.0}, {1.0}):
            return None
        law = IndependentExtreme(tuple(laws), largest=largest)
        if largest:
            latex = r"F_Y(y) = \prod_i F_i(y)"
            text = "The largest of independent variables is at most y where all of them are."
        else:
            latex = r"1 - F_Y(y) = \prod_i \bigl(1 - F_i(y)\bigr)"
            text = "The smallest of independent variables exceeds y where all of them do."
        return Form("opaque", law=law), (*trail, Statement(text, latex, "cdf"))


def _distinct(statements: Iterable[Statement]) -> tuple[Statement, ...]:
    return tuple(dict.fromkeys(statements))


def _power_note(before: Form, after: Form, exponent: Fraction) -> tuple[Statement, ...]:
    if before.kind == after.kind:
        return ()
    text = f"The power {exponent} of this variable is of a known kind."
    return (Statement(text, role="closed_form"),)


def _circular(operator: str, angle: Form) -> Form | None:
    """sin, cos and tan of an angle that is uniform over whole turns, or over half turns that suffice."""
    if angle.kind != "uniform" or angle.power != 1:
        return None
    half_turns = Fraction(round(angle.scale / PI))
    if half_turns == 0 or not ex.same(angle.scale, half_turns * PI):
        return None
    if operator == "tan":
        return Form("cauchy")
    start = angle.shift / PI - (ex.HALF if operator == "sin" else ex.ZERO)
    aligned = abs(start - round(start)) <= ex.SAME * max(ex.ONE, abs(start))
    if half_turns % 2 == 1 and not aligned:
        return None
    return Form("beta", (ex.HALF, ex.HALF), Fraction(2), -ex.ONE)
