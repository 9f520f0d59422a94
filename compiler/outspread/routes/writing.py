"""Writes out the mathematics of the numeric routes for the report: region, inverse, integral, density.

It typesets what was done; where the inverse can be written as a formula, the density that follows from it is
also returned as a function, so that it can be held against the numeric law before it is shown.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import replace

import numpy as np

from outspread.formula.calculus import derivative
from outspread.formula.evaluate import compile_numpy
from outspread.formula.latex import estimated_width, symbol_for, to_latex
from outspread.formula.latex_lines import breakable
from outspread.formula.tree import Apply, Name, Node, names, occurrences, walk
from outspread.laws.law import Array, Law
from outspread.planning.plan import PlanStep
from outspread.reading.model import Constant, Input, Model, Output
from outspread.routes.derived import Statement, SymbolicBranch, SymbolicDensity, SymbolicIntegral
from outspread.routes.jacobian.branches import Branch, branches_for
from outspread.routes.numeric import NumericLaw
from outspread.routes.readable import readable, shortened

VALUE = "§"  # stands for the value of the result; a letter that no input uses is put in at the end
MOST_BRANCHES = 4
PAGE = 62.0  # width of a formula, in characters of `estimated_width`


def symbols(model: Model) -> dict[str, str]:
    """LaTeX for every name of the model."""
    found: dict[str, str] = {}
    named: list[Constant | Input | Output] = [*model.constants, *model.inputs, *model.outputs]
    for item in named:
        found[item.name] = item.symbol or symbol_for(item.name)
    for step in model.steps:
        found[step.name] = symbol_for(step.name)
    return found


def numeric(
    output: Output, step: PlanStep, laws: Mapping[str, Law], symbols: Mapping[str, str], result: NumericLaw
) -> tuple[tuple[Statement, ...], SymbolicDensity | SymbolicIntegral | None]:
    """The statements of a derivation by enumeration, change of variables or region integral, and the
    density as it is written in them."""
    writer = _Writer(output, laws, symbols)
    statements: list[Statement] = [writer.definition()]
    symbolic: SymbolicDensity | SymbolicIntegral | None = None
    if step.route == "enumeration":
        statements += writer.enumeration(step)
    elif step.route == "change_of_variables":
        more, symbolic = writer.one_input(step.inner, step)
        statements += more
    else:
        statements += writer.region(step.inner, step.outer[0], step, result)
        symbolic = writer.integral(step)
    statements += writer.atoms(result.law.atoms().values.size if result.law.continuous_mass else 0)
    if isinstance(symbolic, SymbolicDensity):
        symbolic = replace(symbolic, latex=symbolic.latex.replace(VALUE, writer.letter))
    return writer.finished(statements), symbolic


def sampling(output: Output, step: PlanStep, symbols: Mapping[str, str]) -> tuple[Statement, ...]:
    """The statements of a derivation by sampling."""
    writer = _Writer(output, {}, symbols)
    statements = [writer.definition()]
    if step.inner:
        x = symbols[step.inner]
        others = r",\,".join(symbols[name] for name in step.outer[:6]) + (
            r",\,\ldots" if len(step.outer) > 6 else ""
        )
        statements += writer.limits(step.inner)
        short = writer.formula_short()
        statements.append(
            Statement(
                "Given all other inputs, the probability of the region is known exactly from the law of "
                f"${x}$. Its mean over the others is taken over scrambled Sobol' points, in independent "
                "replicates whose scatter gives the error.",
                rf"F_{{{writer.y}}}(§)=\mathrm{{E}}\left[P\left({short}\leq §\,\mid\,{others}\right)\right]"
                rf"\approx\frac{{1}}{{N}}\sum_{{i=1}}^{{N}}P\left({short}\leq §\,\mid\,i\right)",
                "cdf",
            )
        )
    else:
        statements.append(
            Statement(
                "The formula is evaluated at scrambled Sobol' points in independent replicates, whose "
                "scatter gives the error.",
                rf"F_{{{writer.y}}}(§)\approx\frac{{1}}{{N}}\sum_{{i=1}}^{{N}}"
                r"\mathbf{1}\left\{g_i\leq §\right\}",
                "cdf",
            )
        )
    return writer.finished(statements)


def finished(
    output: Output, symbols: Mapping[str, str], statements: list[Statement]
) -> tuple[Statement, ...]:
    """The definition of the result and the statements, with a letter for its value put in."""
    writer = _Writer(output, {}, symbols)
    return writer.finished([writer.definition(), *statements])


class _Writer:
    def __init__(self, output: Output, laws: Mapping[str, Law], symbols: Mapping[str, str]):
        self.output, self.laws = output, laws
        self.expression = output.expression
        self.symbols = {**symbols, VALUE: VALUE, "k": "k"}
        self.y = symbols[output.name]
        self.value = VALUE
        taken = {text for key, text in symbols.items() if key != output.name}
        self.letter = next(letter for letter in ("y", "v", "t", "s", "q", r"\eta") if letter not in taken)

    def finished(self, statements: Iterable[Statement]) -> tuple[Statement, ...]:
        """The statements with the letter for the value put in."""
        return tuple(
            replace(
                statement,
                text=statement.text.replace(VALUE, self.letter),
                latex=statement.latex.replace(VALUE, self.letter),
            )
            for statement in statements
        )

    def latex(self, node: Node) -> str:
        return to_latex(shortened(node, self.expression), self.symbols)

    def wrapped(self, head: str, node: Node) -> str:
        text = self.latex(node)
        if estimated_width(head + text) <= PAGE:
            return head + text
        lines = breakable(shortened(node, self.expression), self.symbols, PAGE - 8)
        return (head + lines[0]) + "".join(rf"\\ \quad {line}" for line in lines[1:])

    def formula_short(self) -> str:
        text = self.latex(self.expression)
        return text if estimated_width(text) < 24 else "g"

    def definition(self) -> Statement:
        arguments = ",".join(self.symbols[name] for name in names(self.expression)[:8])
        more = r",\ldots" if len(names(self.expression)) > 8 else ""
        return Statement(
            "With constants, steps and unit factors put in, the result is a function of the uncertain "
            "inputs:",
            self.wrapped(rf"{self.y}=g({arguments}{more})=", self.expression),
            "note",
        )

    def enumeration(self, step: PlanStep) -> list[Statement]:
        xs = r",\,".join(self.symbols[name] for name in step.inputs)
        return [
            Statement(
                "All inputs are discrete: the probability of a value is the sum over the combinations that "
                "lead to it.",
                rf"P({self.y}=§)=\sum_{{g({xs})=§}}\;\prod_i p_i",
                "cdf",
            )
        ]

    def branches(self, name: str) -> tuple[Branch, ...] | None:
        found = branches_for(self.expression, name, Name(self.value))
        if found is None or not 0 < len(found) <= MOST_BRANCHES:
            return None
        return tuple(replace(branch, value=self.readable(branch.value)) for branch in found)

    def readable(self, node: Node) -> Node:
        return readable(node, self.expression)

    def slope(self, branch: Branch) -> Node:
        """The derivative of a branch by the value of the result."""
        return self.readable(derivative(branch.value, self.value))

    def limits(self, name: str) -> list[Statement]:
        """The region solved for one input."""
        x = self.symbols[name]
        found = self.branches(name)
        if found is None:
            return [
                Statement(
                    f"The region is solved for ${x}$: its end points are the roots of $g=§$ in ${x}$, all "
                    "isolated by interval arithmetic and bracketed to the last digit.",
                    rf"g=§,\qquad \frac{{\partial g}}{{\partial {x}}}="
                    + self._clipped(derivative(self.expression, name)),
                    "region",
                )
            ]
        marks = self.marks(found)
        text = r"\\ ".join(
            self.wrapped(f"{x}{mark}=", branch.value) for mark, branch in zip(marks, found, strict=True)
        )
        one = "The limit" if len(found) == 1 else "The limits"
        return [Statement(f"{one} of the region in ${x}$, from solving $g=§$:", text, "inverse")]

    @staticmethod
    def marks(found: tuple[Branch, ...]) -> list[str]:
        """What tells the branches apart: nothing where there is one."""
        return [""] if len(found) == 1 else [f"_{k}" for k in range(1, len(found) + 1)]

    def _clipped(self, node: Node) -> str:
        text = self.latex(node)
        return text if estimated_width(text) <= PAGE - 14 else r"\ldots"

    def one_input(self, name: str, step: PlanStep) -> tuple[list[Statement], SymbolicDensity | None]:
        x = self.symbols[name]
        beside = [other for other in step.inputs if other != name]
        statements = [
            Statement(
                "The distribution function is the probability of the region in which the formula stays below "
                "a value:",
                rf"F_{{{self.y}}}(§)=P\left(\left\{{{x}:\,g({x})\leq §\right\}}\right)",
                "region",
            )
        ]
        found = self.branches(name)
        statements += self.limits(name)
        if found is None:
            statements.append(Statement(
                "Change of variables over all roots $x_k(§)$ of $g(x)=y$ (every branch of the inverse):",
                rf"f_{{{self.y}}}(§)=\sum_k \frac{{f_{{{x}}}(x_k)}}{{\left|g'(x_k)\right|}}", "density",
            ))  # fmt: skip
            return statements, None
        slopes = [self.slope(branch) for branch in found]
        one, marks = len(found) == 1, self.marks(found)
        jacobian = r"\\ ".join(
            self.wrapped(rf"\frac{{\mathrm{{d}}{x}{mark}}}{{\mathrm{{d}}§}}=", slope)
            for mark, slope in zip(marks, slopes, strict=True)
        )
        statements.append(Statement(
            f"The derivative of {'the' if one else 'each'} branch is its Jacobian:", jacobian, "jacobian"
        ))  # fmt: skip
        total, k = ("", "") if one else (r"\sum_k ", "_k")
        statements.append(Statement(
            "Change of variables" + (":" if one else ", summed over the branches:"),
            rf"f_{{{self.y}}}(§)={total}f_{{{x}}}\left({x}{k}(§)\right)"
            rf"\left|\frac{{\mathrm{{d}}{x}{k}}}{{\mathrm{{d}}§}}\right|", "density",
        ))  # fmt: skip
        if beside or any(branch.parameters for branch in found) or self.laws[name].continuous_mass < 1:
            return statements, None
        function = _density_function(found, slopes, name, self.laws[name], self.expression, self.value)
        latex = rf"f_{{{self.y}}}(§)=" + "+".join(
            rf"f_{{{x}}}\left({self.latex(branch.value)}\right)\left|{self.latex(slope)}\right|"
            for branch, slope in zip(found, slopes, strict=True)
        )
        if estimated_width(latex) > PAGE:
            return statements, None
        return statements, SymbolicDensity(latex, function, "change of variables")

    def region(self, inner: str, outer: str, step: PlanStep, result: NumericLaw) -> list[Statement]:
        x, z = self.symbols[outer], self.symbols[inner]
        law = f"f_{{{z}\\mid {x}}}" if _dependent(result) else f"f_{{{z}}}"
        mass = (
            f"P\\left({z}\\in S(§,{x})\\mid {x}\\right)"
            if _dependent(result)
            else f"P\\left({z}\\in S(§,{x})\\right)"
        )
        low, high = _limits(self.laws[outer])
        found = self.branches(inner)
        statements = [
            Statement(
                f"The region in which the formula stays below $§$, cut at a fixed ${x}$, is a set of values "
                f"of ${z}$:",
                rf"S(§,{x})=\left\{{{z}:\,g\leq §\right\}}", "region",
            ),
            *self.limits(inner),
            Statement(
                f"The distribution function is the probability of the region: exact in ${z}$, integrated "
                f"over ${x}$.",
                rf"F_{{{self.y}}}(§)=\int_{{{low}}}^{{{high}}} f_{{{x}}}({x})\;{mass}\;\mathrm{{d}}{x}",
                "cdf",
            ),
        ]  # fmt: skip
        one = found is not None and len(found) == 1
        total, k = ("", "") if one else (r"\sum_k ", "_k")
        slope = rf"\left|\frac{{\partial {z}{k}}}{{\partial §}}\right|"
        statements.append(Statement(
            "The density follows by differentiating under the integral sign; "
            f"{'the limit moves' if one else 'the limits move'} with $§$ (Leibniz rule).",
            rf"f_{{{self.y}}}(§)=\int_{{{low}}}^{{{high}}} f_{{{x}}}({x})"
            rf"{total}{law}\left({z}{k}(§,{x})\right){slope}\;\mathrm{{d}}{x}",
            "density",
        ))  # fmt: skip
        if found is not None and len(found) <= 2:
            text = r"\\ ".join(
                self.wrapped(rf"\frac{{\partial {z}{mark}}}{{\partial §}}=", self.slope(branch))
                for mark, branch in zip(self.marks(found), found, strict=True)
            )
            of = "the limit" if one else "each limit"
            statements.append(Statement(f"with the derivative of {of}", text, "jacobian"))
        if _flattens(self.expression, inner):
            statements.append(Statement(
                f"Where the formula does not depend on ${z}$ over an interval, that interval enters the "
                f"region as a whole: the density there of the formula, a function of ${x}$ alone, is added, "
                "weighted with the probability of the interval."
            ))  # fmt: skip
        if step.inputs and len(step.inputs) > 2:
            rest = r",\,".join(self.symbols[name] for name in step.inputs if name not in (inner, outer))
            statements.append(
                Statement(f"This is done for each combination of ${rest}$ and weighted with its probability.")
            )
        return statements

    def integral(self, step: PlanStep) -> SymbolicIntegral:
        """The density of a region integral as written, or why it is not written in symbols."""
        inner, outer = step.inner, step.outer[0]
        found = self.branches(inner)
        missing = ""
        if step.substeps:
            missing = "laws that come out of earlier steps enter, which have no formula"
        elif found is None:
            missing = f"the formula has no inverse in {inner} that can be written"
        elif any(branch.parameters for branch in found):
            missing = f"the inverse in {inner} has infinitely many branches"
        elif _flattens(self.expression, inner):
            missing = f"the formula does not depend on {inner} everywhere, which adds to what is written"
        elif len(names(self.expression)) > 2:
            missing = "the integral is summed over the values of discrete inputs"
        if missing or found is None:
            return SymbolicIntegral(inner, outer, self.value, (), missing)
        branches = tuple(
            SymbolicBranch(branch.value, self.slope(branch), branch.conditions)
            for branch in found
        )
        return SymbolicIntegral(inner, outer, self.value, branches)

    def atoms(self, count: int) -> list[Statement]:
        if not count:
            return []
        number = "one value carries" if count == 1 else f"{count} values carry"
        return [
            Statement(
                f"Where the formula is constant on a set of positive probability, {number} probability by "
                "itself; these sets are measured exactly and the density describes the rest.",
                rf"P({self.y}=c)=P\left(\{{g=c\}}\right)", "note",
            )
        ]  # fmt: skip


def _flattens(expression: Node, name: str) -> bool:
    """Whether a minimum or maximum stands around the input, so that the formula stops depending on it."""
    return any(
        isinstance(part, Apply) and part.operator in ("min", "max") and occurrences(part, name) > 0
        for part in walk(expression)
    )


def _limits(law: Law) -> tuple[str, str]:
    low, high = law.support()
    return _number(low), _number(high)


def _number(value: float) -> str:
    if np.isinf(value):
        return r"\infty" if value > 0 else r"-\infty"
    return f"{value:.6g}" if "e" not in f"{value:.6g}" else rf"{value:.3e}".replace("e", r"\cdot 10^{") + "}"


def _dependent(result: NumericLaw) -> bool:
    return any(piece.problem.correlated() for piece in result.pieces)


def _density_function(
    found: tuple[Branch, ...], slopes: list[Node], name: str, law: Law, expression: Node, value: str
) -> Callable[[Array], Array]:
    """The written density as a function of y, coded from the inverse formulas alone."""
    parts = [
        (compile_numpy(branch.value, (value,)), compile_numpy(slope, (value,)))
        for branch, slope in zip(found, slopes, strict=True)
    ]
    forward = compile_numpy(expression, (name,))

    def density(y: Array) -> Array:
        total = np.zeros(np.shape(y))
        seen: list[Array] = []
        with np.errstate(all="ignore"):
            for inverse, slope in parts:
                x = np.broadcast_to(np.asarray(inverse(y), float), np.shape(y))
                back = np.asarray(forward(x), float)
                holds = np.isfinite(x) & (np.abs(back - y) <= 1e-7 * (np.abs(y) + np.abs(back)) + 1e-300)
                for earlier in seen:  # two branches that give one root count once
                    holds &= ~(np.abs(x - earlier) <= 1e-13 * np.abs(x))
                seen.append(np.where(holds, x, np.nan))
                term = law.pdf(np.where(holds, x, 0.0)) * np.abs(np.asarray(slope(y), float))
                total = total + np.where(holds, term, 0.0)
        return total

    return density
