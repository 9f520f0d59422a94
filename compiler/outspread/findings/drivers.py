"""What drives an output: the share of its variance that each input explains by itself.

The share is the first-order index Var(E[Y | X]) / Var(Y), the squared correlation ratio (Pearson 1905),
estimated from the draws of the evidence by their ranks (Chatterjee 2021; Gamboa, Gremaud, Klein and
Lagnoux 2022, Bernoulli 28, 2345-2374): with the draws sorted by X, the mean product of neighbours' Y.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from outspread.evidence.drawing import BATCHES
from outspread.findings.results import Absent, Driver, Figure, Finding
from outspread.formula.tree import names
from outspread.laws.law import Array
from outspread.reading.distributions import parents
from outspread.reading.model import Model

Order = npt.NDArray[np.intp]

#: two-sided 99.99 % point of Student's t with 19 degrees of freedom (scipy.stats.t.isf(5e-5, 19))
T_POINT = 4.897462
ROWS_AT_MOST = 2_000_000  # values sorted in one batch, over all inputs
FEWEST = 1000
#: above this kurtosis the spread of the batches says too little about the error of a variance
LARGEST_KURTOSIS = 100.0

VARIANCE = "share of the variance explained by this input alone (first-order index)"
RANKS = "share of the variance of the ranks explained by this input alone, because {why}"


def _groups(model: Model) -> dict[str, frozenset[str]]:
    """Every input with those it depends on or that depend on it, directly or by others, itself included."""
    joined = {described.name: {described.name} for described in model.inputs}
    links = [set(entry.inputs) for entry in model.dependence]
    links += [
        {described.name, *parents(described.distribution)}
        for described in model.inputs
        if described.distribution is not None
    ]
    for link in links:
        together: set[str] = set().union(*(joined[name] for name in link))
        for name in together:
            joined[name] = together
    return {name: frozenset(group) for name, group in joined.items()}


@dataclass
class Shares:
    """Collects the estimates batch by batch while the evidence is drawn: an observer of `draw_sample`.

    For each pair of output and input it keeps one estimate a batch, by values and by ranks, and the
    same from the first half of the batch, whose difference shows the bias that is left.
    """

    model: Model
    estimates: dict[tuple[str, str, str], list[tuple[float, float]]] = field(default_factory=dict)
    entering: Mapping[str, frozenset[str]] = field(default_factory=dict)

    def __post_init__(self) -> None:
        groups = _groups(self.model)
        self.entering = {
            output.name: frozenset().union(*(groups[name] for name in names(output.expression)))
            for output in self.model.outputs
        }

    def alone(self, output: str) -> bool:
        """Whether one single input enters the output."""
        return len(self.entering[output]) == 1

    def __call__(self, batch: int, values: Mapping[str, Array]) -> None:
        size = max(FEWEST, ROWS_AT_MOST // max(len(self.model.inputs), 1))
        wanted = [
            (described.name, output.name)
            for described in self.model.inputs
            for output in self.model.outputs
            if described.name in self.entering[output.name] and not self.alone(output.name)
        ]
        order: dict[str, tuple[Order, Order]] = {}
        measured: dict[str, dict[str, Array]] = {}
        for name, output in wanted:
            if name not in order:
                x = values[name][:size]
                order[name] = (_order(x), _order(x[: x.size // 2]))
            if output not in measured:
                y = values[output][:size]
                ranks = np.empty(y.size)
                ranks[_order(y)] = np.arange(y.size)
                measured[output] = {"values": y, "ranks": ranks / y.size}
            whole, half = order[name]
            for kind, y in measured[output].items():
                pair = (_neighbours(y, whole), _neighbours(y[: y.size // 2], half))
                self.estimates.setdefault((output, name, kind), []).append(pair)


def _order(x: Array) -> Order:
    """The order of ascending x, equal ones as they were drawn: the same on every machine.

    The fast sort leaves the order of equal values to the processor, so it serves only where none are equal.
    """
    order = np.argsort(x)
    ordered = x[order]
    return np.argsort(x, kind="stable") if bool(np.any(ordered[1:] == ordered[:-1])) else order


def _neighbours(y: Array, order: Order) -> float:
    """The rank estimator of the first-order index; nan where y does not vary or is not finite."""
    with np.errstate(all="ignore"):
        centred = y - np.mean(y)
        square = float(np.mean(centred * centred))
        if not (math.isfinite(square) and square > 0.0):
            return math.nan
        ordered = centred[order]
        return float(np.mean(ordered * np.roll(ordered, -1))) / square


def find_drivers(
    shares: Shares, deviations: Mapping[str, Finding], kurtoses: Mapping[str, Finding]
) -> tuple[Driver, ...]:
    """For each output, the share of each input that enters it, the largest first.

    `deviations` and `kurtoses` of the outputs decide whether shares of the variance can be estimated;
    where not, shares of the variance of the ranks are stated, and the reason with them.
    """
    found: list[Driver] = []
    for output in shares.model.outputs:
        kind, measure = _measure(deviations[output.name], kurtoses[output.name])
        rows = [
            Driver(output.name, described.name, _share(shares, output.name, described.name, kind), measure)
            for described in shares.model.inputs
            if described.name in shares.entering[output.name]
        ]
        place = {described.name: i for i, described in enumerate(shares.model.inputs)}
        rows.sort(key=lambda row: (-_rounded(row.share), place[row.input]))
        found.extend(rows)
    return tuple(found)


def _rounded(share: Finding) -> float:
    """For sorting: shares are ranked by what will be printed of them."""
    return -1.0 if isinstance(share, Absent) else round(share.value, 2)


def _measure(deviation: Finding, kurtosis: Finding) -> tuple[str, str]:
    if isinstance(deviation, Absent):
        return "ranks", RANKS.format(why="the variance of the output does not exist")
    if isinstance(kurtosis, Absent) or kurtosis.value > LARGEST_KURTOSIS:
        return "ranks", RANKS.format(why="the tails of the output are too heavy to estimate its variance")
    return "values", VARIANCE


def _share(shares: Shares, output: str, name: str, kind: str) -> Finding:
    if shares.alone(output):
        return Figure(1.0, 0.0)  # the output is a function of this input
    return _from_batches(shares.estimates[output, name, kind])


def _from_batches(pairs: Sequence[tuple[float, float]]) -> Finding:
    """Mean of the batches; its error is 99.99 % of their spread plus the bias that half batches show."""
    table = np.asarray(pairs, float)
    if table.shape[0] < BATCHES or not bool(np.all(np.isfinite(table))):
        return Absent("the output does not vary, or is not finite, in the draws")
    mean = float(np.mean(table[:, 0]))
    spread = float(np.std(table[:, 0], ddof=1)) / math.sqrt(table.shape[0])
    bias = abs(mean - float(np.mean(table[:, 1])))
    return Figure(min(max(mean, 0.0), 1.0), T_POINT * spread + bias)
