"""The model as the rest of the program sees it: frozen values without behaviour.

Built by `reading.build` from a checked document; nothing here reads files or computes.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from outspread.errors import Place
from outspread.formula.tree import Node

NO_PLACE = Place("")


@dataclass(frozen=True)
class Constant:
    name: str
    value: float
    unit: str = ""
    symbol: str = ""  # LaTeX; "" = made from the name
    description: str = ""
    basis: str = ""
    place: Place = NO_PLACE


@dataclass(frozen=True)
class Distribution:
    """A family by its key with the parameters as written (constants resolved to numbers).

    `parameters` values: float | str | tuple[float, ...] | Node (formula of other inputs: conditional).
    "mixture" has `weights` and `components`; "density" has density: Node (in x), lower, upper;
    "table"/"histogram"/"sample" have their columns as tuples of floats (the CSV is read by `reading`).
    """

    family: str
    parameters: Mapping[str, object] = field(default_factory=dict)
    components: tuple[Distribution, ...] = ()
    lower: float | None = None  # truncation limits, in the input's unit; None = not cut on that side
    upper: float | None = None
    place: Place = NO_PLACE


@dataclass(frozen=True)
class Input:
    name: str
    distribution: Distribution | None  # None: described by a joint density or joint sample
    unit: str = ""
    symbol: str = ""
    description: str = ""
    basis: str = ""
    place: Place = NO_PLACE


@dataclass(frozen=True)
class Dependence:
    """One entry of `dependence`. `kind`: copula | joint_density | joint_sample.

    For a copula: `family` (gaussian, student_t, clayton, gumbel, frank), `measure` (pearson, spearman,
    kendall, normal_scores, parameter) and the full symmetric `matrix` in the order of `inputs`.
    """

    inputs: tuple[str, ...]
    kind: str
    family: str = ""
    measure: str = ""
    matrix: tuple[tuple[float, ...], ...] = ()
    parameters: Mapping[str, object] = field(default_factory=dict)
    place: Place = NO_PLACE
    basis: str = ""


@dataclass(frozen=True)
class Step:
    """A named step of `transformation.where`, as written (names of inputs, constants and other steps)."""

    name: str
    text: str
    written: Node
    unit: str = ""
    place: Place = NO_PLACE
    description: str = ""


@dataclass(frozen=True)
class Output:
    """`written` is the formula as typed; `expression` holds input names only: steps and constants are put
    in, and explicit factors make it numerically right for inputs in their units and the result in `unit`."""

    name: str
    text: str
    written: Node
    expression: Node
    unit: str = ""
    symbol: str = ""
    description: str = ""
    route: str = ""
    place: Place = NO_PLACE


@dataclass(frozen=True)
class Requirement:
    """`kind` probability: `event` (names of outputs; comparisons) with at_least / at_most on its probability.
    `kind` quantile: the quantile of `output` at probability `at`, with at_least / at_most in its unit."""

    name: str
    kind: str
    text: str = ""
    event: Node | None = None
    output: str = ""
    at: float = 0.0
    at_least: float | None = None
    at_most: float | None = None
    place: Place = NO_PLACE


@dataclass(frozen=True)
class Readings:
    """What the model asks to be stated; `headline` is the coverage of the interval that stands for the whole:
    the largest that the model lists, 0.95 where it lists none."""

    coverage: tuple[float, ...] = (0.95, 0.99)
    quantiles: tuple[float, ...] = (0.001, 0.025, 0.5, 0.975, 0.999)
    probabilities: tuple[tuple[str, Node], ...] = ()  # (text, event over outputs)
    values: Mapping[str, tuple[float, ...]] = field(default_factory=dict)
    headline: float = 0.95


@dataclass(frozen=True)
class Accuracy:
    digits: int = 8
    seed: int = 20260401
    time_limit: float | None = None  # seconds


@dataclass(frozen=True)
class Model:
    file: str  # as given on the command line
    source: bytes
    sha256: str
    title: str
    purpose: str
    record: Mapping[str, str]
    safety: bool  # the model says (or its words show) that people may be hurt: cautions are shown in full
    constants: tuple[Constant, ...]
    inputs: tuple[Input, ...]
    dependence: tuple[Dependence, ...]
    steps: tuple[Step, ...]
    outputs: tuple[Output, ...]
    requirements: tuple[Requirement, ...]
    readings: Readings
    accuracy: Accuracy
    data: Mapping[str, bytes] = field(default_factory=dict)  # CSV file name -> bytes
    cautions: tuple[str, ...] = ()
