"""Jointly normal inputs: linear forms, products of powers of lognormals, quadratic forms and quotients.

Everything is exact in the parameters: covariances and the conditions on quadratic forms are computed with
fractions. Sums of independent forms of other kinds are `sums`' business.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import fsum

import numpy as np

from outspread.laws.law import Law
from outspread.routes.closed_form import exact as ex
from outspread.routes.closed_form.expressions import Expression, Function, Product, Sum, Symbol
from outspread.routes.closed_form.forms import Form, exponential
from outspread.routes.derived import Statement

Result = tuple[Form, Statement]
#: more correlated terms than this are added in double precision, and refused where they cancel
_MOST_EXACT = 80


@dataclass(frozen=True)
class NormalDependence:
    """Jointly normal scores: `names` of the inputs and their correlation matrix in that order.

    For a normal input the score is the input itself, for a lognormal its logarithm, for any other family
    the normal score of its copula. Inputs that are not named are independent of all others.
    """

    names: tuple[str, ...]
    correlation: tuple[tuple[float, ...], ...]

    def between(self, left: str, right: str) -> float:
        """Correlation of the scores of two inputs; 0 where one of them is not named."""
        if left == right:
            return 1.0
        index = self.index
        if left not in index or right not in index:
            return 0.0
        return self.correlation[index[left]][index[right]]

    @property
    def index(self) -> Mapping[str, int]:
        cached: dict[str, int] | None = self.__dict__.get("_index")
        if cached is None:
            cached = {name: position for position, name in enumerate(self.names)}
            object.__setattr__(self, "_index", cached)
        return cached


class Gaussian:
    """The normal inputs and the normal logarithms of lognormal inputs, with their dependence."""

    def __init__(self, laws: Mapping[str, Law], dependence: NormalDependence | None):
        self._dependence = dependence
        self._moments: dict[str, tuple[Fraction, Fraction]] = {}
        for name, law in laws.items():
            if law.family == "normal":
                self._moments[name] = (ex.exact(law.parameters["mean"]), ex.exact(law.parameters["sd"]))
            elif law.family == "lognormal" and ex.exact(law.parameters.get("location", 0.0)) == 0:
                mean, sd = law.parameters["log_mean"], law.parameters["log_sd"]
                self._moments[name] = (ex.exact(mean), ex.exact(sd))

    def moments(self, symbol: str) -> tuple[Fraction, Fraction]:
        """Mean and standard deviation of the normal quantity behind an input."""
        return self._moments[symbol]

    def is_normal(self, expression: Expression) -> bool:
        return isinstance(expression, Symbol) and expression.name in self._moments

    def covariance(self, left: str, right: str) -> Fraction:
        product = self._moments[left][1] * self._moments[right][1]
        if left == right:
            return product
        between = self._dependence.between(left, right) if self._dependence else 0.0
        return product * ex.exact(between) if between else ex.ZERO

    def linear(self, expression: Expression) -> Result | None:
        """The normal law of constant + Σ a_i X_i (scores only); None where it is no such sum or constant."""
        read = self._coefficients(expression)
        if read is None:
            return None
        constant, coefficients = read
        mean = constant + sum((a * self._moments[n][0] for n, a in coefficients.items()), ex.ZERO)
        variance = self._variance(coefficients)
        if variance is None or variance <= 0:
            return None
        correlated = any(self._dependence and name in self._dependence.index for name in coefficients)
        kind = "jointly" if correlated else "independent"
        text = f"A linear combination of {kind} normal variables is normal."
        latex = r"\mu = a_0 + \sum_i a_i \mu_i,\ \sigma^2 = \sum_{i,j} a_i a_j \sigma_i \sigma_j \rho_{ij}"
        form = Form("normal", scale=ex.square_root(variance), shift=ex.trimmed(mean))
        return form, Statement(text, latex, "closed_form")

    def _coefficients(self, expression: Expression) -> tuple[Fraction, dict[str, Fraction]] | None:
        whole = expression if isinstance(expression, Sum) else Sum(ex.ZERO, ((expression, ex.ONE),))
        coefficients = dict[str, Fraction]()
        for term, coefficient in whole.terms:
            if not isinstance(term, Symbol) or term.name not in self._moments:
                return None
            if coefficients.get(term.name) is not None:
                return None
            coefficients[term.name] = coefficient
        return (whole.constant, coefficients) if coefficients else None

    def _variance(self, coefficients: dict[str, Fraction]) -> Fraction | None:
        loadings = {name: a * self._moments[name][1] for name, a in coefficients.items()}
        squares = sum((loading**2 for loading in loadings.values()), ex.ZERO)
        if self._dependence is None:
            return ex.trimmed(squares)
        named = [name for name in loadings if name in self._dependence.index]
        if len(named) <= _MOST_EXACT:
            cross = ex.ZERO
            for i, left in enumerate(named):
                for right in named[:i]:
                    rho = self._dependence.between(left, right)
                    if rho:
                        cross += loadings[left] * loadings[right] * ex.exact(rho)
            return ex.trimmed(squares + 2 * cross)
        return self._rounded_variance(loadings, named, float(squares))

    def _rounded_variance(
        self, loadings: dict[str, Fraction], named: list[str], squares: float
    ) -> Fraction | None:
        """The variance in double precision, exactly summed; None where terms cancel."""
        assert self._dependence is not None
        place = [self._dependence.index[name] for name in named]
        numbers = np.array([float(loadings[name]) for name in named])
        matrix = np.asarray(self._dependence.correlation, float)[np.ix_(place, place)]
        cross = np.tril(matrix * np.outer(numbers, numbers), -1).ravel()
        variance = fsum([squares, *(2 * cross)])
        size = fsum([squares, *(2 * np.abs(cross))])
        return Fraction(variance) if variance > 0.1 * size else None

    def lognormal(self, expression: Expression) -> Result | None:
        """The lognormal law of Π exp(a_i X_i), X_i jointly normal scores."""
        factors = expression.factors if isinstance(expression, Product) else ((expression, ex.ONE),)
        terms = []
        for base, exponent in factors:
            if not isinstance(base, Function) or base.operator != "exp":
                return None
            terms.append((base.arguments[0], exponent))
        added = self.linear(Sum(ex.ZERO, tuple(terms)))
        form = exponential(added[0]) if added else None
        if form is None:
            return None
        text = "The logarithm of a product of powers of lognormal variables is linear in normal ones."
        latex = r"\ln Y = \sum_i p_i \ln X_i \sim \mathrm{N}(\mu, \sigma^2)"
        return form, Statement(text, latex, "closed_form")

    def quotient(self, numerator: Expression, denominator: Expression) -> Result | None:
        """The Cauchy law of X/Y for jointly normal X, Y with means 0."""
        top, bottom = self._coefficients(numerator), self._coefficients(denominator)
        if top is None or bottom is None:
            return None
        for constant, coefficients in (top, bottom):
            if constant + sum((a * self._moments[n][0] for n, a in coefficients.items()), ex.ZERO) != 0:
                return None
        if len(top[1]) * len(bottom[1]) > _MOST_EXACT**2:
            return None
        pairs = [(a * b, n, m) for n, a in top[1].items() for m, b in bottom[1].items()]
        cross = sum((c * self.covariance(n, m) for c, n, m in pairs), ex.ZERO)
        first, second = self._variance(top[1]), self._variance(bottom[1])
        if not first or not second or first * second - cross**2 <= ex.SAME * first * second:
            return None
        location, scale = cross / second, ex.square_root(ex.trimmed(first * second - cross**2)) / second
        text = "The quotient of two jointly normal variables with mean 0 is a Cauchy variable."
        latex = (
            r"X/Y \sim \mathrm{Cauchy}\Bigl(\rho\,\frac{\sigma_X}{\sigma_Y},\ "
            r"\frac{\sigma_X}{\sigma_Y}\sqrt{1-\rho^2}\Bigr)"
        )
        return Form("cauchy", scale=scale, shift=location), Statement(text, latex, "closed_form")
