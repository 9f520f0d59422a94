"""The results of a derivation as frozen values: what the results file holds and the report prints.

Writing them as JSON is `findings.writing`'s business; computing them `findings.compute`'s.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True)
class Figure:
    """A value and a bound on its absolute error (>= 0; 0 only for exact values)."""

    value: float
    error: float


@dataclass(frozen=True)
class Absent:
    """A figure that does not exist (or diverges), with the reason in words."""

    because: str


Finding = Figure | Absent


@dataclass(frozen=True)
class AtomFigure:
    at: float
    probability: Figure


@dataclass(frozen=True)
class Coverage:
    """An interval holding `probability`; `kind` symmetric (probabilistically symmetric) | shortest."""

    probability: float
    kind: str
    lower: Finding
    upper: Finding


@dataclass(frozen=True)
class ValueRow:
    """pdf, cdf and ccdf at a point; pdf is Absent where the density is unbounded or undefined."""

    at: float
    pdf: Finding
    cdf: Finding
    ccdf: Finding


@dataclass(frozen=True)
class OutputResults:
    name: str
    unit: str
    route: str
    support: tuple[Finding, Finding]  # Absent("unbounded below") for an infinite end
    atoms: tuple[AtomFigure, ...]  # the heaviest first 200 where there are more; `atom_count` has all
    atom_count: int
    atom_mass: Finding
    mean: Finding
    standard_deviation: Finding
    skewness: Finding
    kurtosis: Finding
    median: Finding
    mode: Finding
    quantiles: tuple[tuple[float, Finding], ...]
    coverage: tuple[Coverage, ...]
    values: tuple[ValueRow, ...]
    probabilities: tuple[tuple[str, Finding], ...]  # event text -> probability (events in this output only)
    largest_error: float  # stated bound on |cdf error|
    headline: float = 0.95  # probability of the coverage interval that stands for the whole

    def headline_interval(self) -> Coverage | None:
        """The symmetric interval at the headline's probability, whose ends may be absent."""
        symmetric = (row for row in self.coverage if row.kind == "symmetric")
        return next((row for row in symmetric if row.probability == self.headline), None)


@dataclass(frozen=True)
class Joint:
    """Findings on several outputs together."""

    correlation: tuple[tuple[str, str, Finding], ...]
    events: tuple[tuple[str, Finding], ...]


@dataclass(frozen=True)
class Verdict:
    """`verdict`: met | not met | undecided. `value` is the probability or quantile that was judged."""

    name: str
    verdict: str
    #: "P(clearance > 0.002) is at least 0.999", "the 0.99 quantile of clearance is at most 0.045 mm"
    statement: str
    value: Finding
    limit: float
    sense: str  # at_least | at_most
    unit: str = ""


@dataclass(frozen=True)
class Evidence:
    """One comparison of the derivation with something independent.

    `curve` is (x, difference) for the evidence plot where there is one; `largest_difference` is judged
    against `allowed`. `confidence` is the probability with which a right answer stays inside the band.
    """

    output: str
    against: str  # "plain sampling of 1,000,000 draws", "integral of the density", "symbolic density"
    points: int
    largest_difference: float
    allowed: float
    agrees: bool
    confidence: float = 1.0
    curve: tuple[tuple[float, float], ...] = ()
    note: str = ""


@dataclass(frozen=True)
class Driver:
    """What drives an output: the share of one input, and how that share is defined in words."""

    output: str
    input: str
    share: Finding
    measure: str


@dataclass(frozen=True)
class Assumption:
    id: str  # A1, A2, …
    text: str
    made_by: str  # model | compiler
    about: tuple[str, ...] = ()  # inputs and outputs concerned


@dataclass(frozen=True)
class Results:
    version: str  # of outspread
    file: str  # base name of the model file
    title: str
    sha256: str
    data: Mapping[str, str]  # data file -> sha256
    outputs: tuple[OutputResults, ...]
    joint: Joint
    requirements: tuple[Verdict, ...]
    evidence: tuple[Evidence, ...]
    drivers: tuple[Driver, ...]
    assumptions: tuple[Assumption, ...]
