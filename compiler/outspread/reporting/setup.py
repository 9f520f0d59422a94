"""The report's statement of what was given: inputs, densities, dependence, constants and formulas."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from markupsafe import Markup

from outspread.formula.latex import symbol_for, to_latex
from outspread.laws.compound.truncated import TruncatedLaw
from outspread.laws.law import Law
from outspread.laws.registry import FAMILIES
from outspread.reading.model import Constant, Dependence, Distribution, Input, Model, Output, Step
from outspread.reporting import words
from outspread.reporting.numbers import exact, number_latex
from outspread.reporting.tables import unit
from outspread.reporting.typeset import display, inline, sentence


class Numbering:
    """Counts the displayed formulas of one report."""

    def __init__(self) -> None:
        self.last = 0

    def next(self) -> str:
        self.last += 1
        return str(self.last)


def symbol(name: str, latex: str = "") -> str:
    """The LaTeX by which a quantity is called: its own symbol, or one made from its name."""
    return latex or symbol_for(name)


def symbols(model: Model) -> dict[str, str]:
    """The LaTeX of every name that a formula of the model may hold."""
    named: tuple[Constant | Input | Output, ...] = (*model.constants, *model.inputs, *model.outputs)
    return {thing.name: symbol(thing.name, thing.symbol) for thing in named}


def own_symbol(name: str, latex: str) -> Markup:
    """The symbol beside a name, where it says more than the name."""
    return inline(latex) if latex and latex != name else Markup("")


@dataclass(frozen=True)
class InputRow:
    name: str
    symbol: Markup
    description: str
    written: str
    canonical: Markup
    unit: str
    basis: str


@dataclass(frozen=True)
class Density:
    """The density of one input: what it is the density of, the formula, and what its letters stand for."""

    lead: Markup
    formula: Markup
    source: str


@dataclass(frozen=True)
class Matrix:
    caption: str
    names: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]


def input_row(given: Input, law: Law | None) -> InputRow:
    stated = given.distribution
    written = words.distribution(stated) if stated is not None else "given by the dependence below"
    return InputRow(
        given.name,
        own_symbol(given.name, given.symbol),
        given.description,
        written,
        _canonical(stated, law),
        unit(given.unit),
        given.basis,
    )


def _letters(law: Law) -> list[tuple[str, str]]:
    """(letter, value) of the canonical parameters, as LaTeX; a formula of other inputs has no value."""
    family = FAMILIES.get(law.family)
    if family is None:
        return []
    letters = {name: family.symbols.get(name, rf"\text{{{name}}}") for name in family.canonical_names}
    return [(letters[name], _value(law.parameters[name])) for name in letters if name in law.parameters]


def _equation(letter: str, value: str) -> str:
    """`letter = value`, with a sign of its own where the value is rounded."""
    return f"{letter}{value}" if value.startswith(r"\approx") else f"{letter}={value}"


def _value(value: Any) -> str:
    if isinstance(value, (int, float)):
        short = float(f"{value:.10g}")  # a converted parameter would show all digits of a double
        return number_latex(short) if short == value else rf"\approx {number_latex(short)}"
    if isinstance(value, (tuple, list)) and len(value) <= 8:
        return r",\ ".join(_value(entry) for entry in value)
    return r"\text{as stated}"


def _canonical(stated: Distribution | None, law: Law | None) -> Markup:
    """The family by its full name with its canonical parameters."""
    if stated is None:
        return Markup("")
    title = words.family_title(stated.family)
    whole = law.base if isinstance(law, TruncatedLaw) else law
    letters = _letters(whole) if whole is not None and whole.family == stated.family else []
    if not letters:
        return sentence(title)
    values = Markup("; ").join(inline(_equation(letter, value)) for letter, value in letters)
    return Markup("{}: {}").format(title, values) + words.truncation(stated)


def densities(model: Model, laws: Mapping[str, Law], numbering: Numbering) -> list[Density]:
    """The density (or probability function) of each input whose family states one."""
    found = []
    for given in model.inputs:
        stated = given.distribution
        family = FAMILIES.get(stated.family) if stated is not None else None
        if stated is None or family is None or not family.density_latex:
            continue
        name = symbol(given.name, given.symbol)
        letter = "p" if family.kind == "discrete" else "f"
        what = "probability of the value" if family.kind == "discrete" else "density"
        cut = " before it is cut" if words.truncation(stated) else ""
        formula = family.density_latex
        if "=" not in formula.split("\\text")[0]:
            formula = rf"{letter}_{{{name}}}(x)={formula}"
        lead = Markup("{} of {}{}, {}:").format(what.capitalize(), inline(name), cut, family.title)
        found.append(Density(lead, display(formula, numbering.next()), family.reference))
    return found


def matrix(entry: Dependence) -> Matrix | None:
    """The correlation matrix of a dependence of three or more inputs."""
    if len(entry.matrix) < 3:
        return None
    rows = tuple(tuple(exact(value) for value in row) for row in entry.matrix)
    return Matrix(words.dependence(entry), entry.inputs, rows)


@dataclass(frozen=True)
class FormulaRow:
    """One named formula of the model: as typed, and typeset where that is possible."""

    name: str
    description: str
    text: str
    unit: str
    formula: Markup


def formulas(model: Model, numbering: Numbering) -> list[FormulaRow]:
    """Steps and outputs in the model's order, each as typed and typeset."""
    named = symbols(model)
    rows = []
    written: tuple[Step | Output, ...] = (*model.steps, *model.outputs)
    for row in written:
        left = named.get(row.name) or symbol_for(row.name)
        formula = display(f"{left}={to_latex(row.written, named)}", numbering.next())
        description = row.description if isinstance(row, Output) else ""
        rows.append(FormulaRow(row.name, description, row.text, unit(row.unit), formula))
    return rows
