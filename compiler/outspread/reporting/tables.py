"""Shapes findings into the cells of the report's tables: values, errors and the reasons for gaps."""

from __future__ import annotations

from dataclasses import dataclass

from markupsafe import Markup

from outspread.findings.results import Absent, Coverage, Figure, Finding, OutputResults
from outspread.findings.writing import scale_of
from outspread.reporting.numbers import error_text, exact, grouped, unit_text, value_text

MOST_ATOMS = 24


@dataclass(frozen=True)
class Cell:
    """A figure in a table: value and error, or the reason why there is none."""

    value: Markup
    error: Markup
    because: str = ""

    @property
    def both(self) -> Markup:
        """Value and error in one cell."""
        if self.because:
            return Markup('<span class="gap">{}</span>').format(self.because)
        if not self.error or self.error == Markup("exact"):
            return self.value
        return Markup('{} <span class="error">± {}</span>').format(self.value, self.error)


@dataclass(frozen=True)
class Line:
    label: str
    cell: Cell
    unit: str = ""


@dataclass(frozen=True)
class Span:
    """An interval: its probability and ends, symmetric and shortest."""

    probability: str
    symmetric: tuple[Cell, Cell] | None
    shortest: tuple[Cell, Cell] | None


def cell(finding: Finding, scale: float = 0.0) -> Cell:
    """The finding's cell, with the digits that the results file has (`scale` as there)."""
    if isinstance(finding, Absent):
        return Cell(Markup(""), Markup(""), finding.because)
    error = error_text(finding.value, finding.error, scale)
    shown = Markup("exact") if error == "exact" else grouped(error)
    return Cell(grouped(value_text(finding.value, finding.error, scale)), shown)


def unit(text: str) -> str:
    """A unit for a column head; "" where the quantity is a plain number."""
    shown = unit_text(text)
    return "" if shown in ("", "1") else shown


def figures(output: OutputResults) -> list[Line]:
    """The standard set of figures."""
    in_unit, scale = unit(output.unit), scale_of(output)
    lines = [
        Line("Mean", cell(output.mean, scale), in_unit),
        Line("Standard deviation", cell(output.standard_deviation, scale), in_unit),
        Line("Skewness", cell(output.skewness, 1.0)),
        Line("Kurtosis (normal: 3)", cell(output.kurtosis, 1.0)),
        Line("Median", cell(output.median, scale), in_unit),
        Line("Mode", cell(output.mode, scale), in_unit),
        Line("Support, lower end", cell(output.support[0], scale), in_unit),
        Line("Support, upper end", cell(output.support[1], scale), in_unit),
    ]
    if output.atom_count and isinstance(output.atom_mass, Figure) and output.atom_mass.value < 1:
        lines.append(Line("Probability in atoms", cell(output.atom_mass)))
    return lines


def intervals(coverage: tuple[Coverage, ...], scale: float) -> list[Span]:
    """One row a probability, with the symmetric and the shortest interval side by side."""
    rows = []
    for probability in dict.fromkeys(interval.probability for interval in coverage):
        found: dict[str, tuple[Cell, Cell]] = {
            interval.kind: (cell(interval.lower, scale), cell(interval.upper, scale))
            for interval in coverage
            if interval.probability == probability
        }
        rows.append(Span(exact(probability), found.get("symmetric"), found.get("shortest")))
    return rows


def central(output: OutputResults) -> tuple[float, Figure, Figure] | None:
    """Probability and ends of the interval that stands for the whole; None where it has no finite ends."""
    row = output.headline_interval()
    if row is None or not (isinstance(row.lower, Figure) and isinstance(row.upper, Figure)):
        return None
    return row.probability, row.lower, row.upper


@dataclass(frozen=True)
class AtomRow:
    at: Markup
    cell: Cell


def atoms(output: OutputResults) -> tuple[list[AtomRow], int]:
    """The heaviest atoms in ascending order, and how many are left out."""
    heaviest = sorted(output.atoms, key=lambda atom: -atom.probability.value)[:MOST_ATOMS]
    shown = sorted(heaviest, key=lambda atom: atom.at)
    rows = [AtomRow(grouped(exact(atom.at)), cell(atom.probability)) for atom in shown]
    return rows, max(output.atom_count - len(rows), 0)
