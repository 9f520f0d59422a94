"""What a family of distributions is: its parameter sets, its checks, its texts, and how a law is built.

The families themselves live in the modules beside this one, `registry` collects them.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Any

import numpy as np

from outspread.errors import LawError
from outspread.laws.law import Law

Parameters = dict[str, Any]


def _as_written(parameters: Parameters) -> Parameters:
    return parameters


@dataclass(frozen=True)
class ParameterSet:
    """One way to give the parameters: their names, the defaults of those that may be left out, and
    the conversion of checked finite numbers to the canonical set (raises LawError)."""

    names: tuple[str, ...]
    defaults: Mapping[str, float] = field(default_factory=dict)
    convert: Callable[[Parameters], Parameters] = _as_written

    def accepts(self, given: Iterable[str]) -> bool:
        """Whether exactly these names, up to optional ones, make up this set."""
        given = set(given)
        return given <= set(self.names) and set(self.names) - set(self.defaults) <= given

    def __str__(self) -> str:
        parts = [
            f"{name} (default {self.defaults[name]:g})" if name in self.defaults else name
            for name in self.names
        ]
        return "{" + ", ".join(parts) + "}"


@dataclass(frozen=True)
class Family:
    """A named family. `density_latex` is the density (or probability mass) at x in the canonical
    parameters' own symbols, `reference` the textbook or standard that defines it in this form."""

    key: str
    title: str
    kind: str  # continuous | discrete
    canonical_names: tuple[str, ...]
    parameter_sets: tuple[ParameterSet, ...]
    builder: Callable[..., Law]
    density_latex: str
    usage: str
    reference: str
    check: Callable[[Parameters], None] = lambda parameters: None
    symbols: Mapping[str, str] = field(default_factory=dict)  # canonical name -> its LaTeX in density_latex

    def canonical(self, parameters: Mapping[str, Any]) -> Parameters:
        """The canonical parameters, in the order of `canonical_names`.

        Raises LawError where no parameter set fits or a value is out of range, saying what would be right.
        """
        chosen = self.parameter_set(parameters)
        values = {name: as_number(name, value) for name, value in parameters.items()}
        converted = chosen.convert({**chosen.defaults, **values})
        self.check(converted)
        return {name: converted[name] for name in self.canonical_names}

    def parameter_set(self, parameters: Iterable[str]) -> ParameterSet:
        """The set that these names make up; raises LawError where none does."""
        given = tuple(parameters)
        for candidate in self.parameter_sets:
            if candidate.accepts(given):
                return candidate
        known = {name for candidate in self.parameter_sets for name in candidate.names}
        unknown = [name for name in given if name not in known]
        choices = " or ".join(str(candidate) for candidate in self.parameter_sets)
        written = ", ".join(given) if given else "none"
        raise LawError(
            f"the parameters of {self.key} do not fit together ({written} given), write {choices}",
            unknown[0] if unknown else None,
        )

    def build(self, canonical: Mapping[str, Any]) -> Law:
        """The law with these canonical parameters (which `canonical` has checked)."""
        law = self.builder(**canonical)
        law.name, law.family = self.title, self.key
        law.parameters = MappingProxyType(dict(canonical))
        return law


def as_number(name: str, value: Any) -> Any:
    """A finite float, a tuple of them, or a mapping of them; raises LawError for anything else."""
    if isinstance(value, Mapping):
        return {as_number(name, key): as_number(name, entry) for key, entry in value.items()}
    if isinstance(value, (tuple, list)):
        return tuple(as_number(name, entry) for entry in value)
    try:
        number = float(value)
    except (TypeError, ValueError):
        raise LawError(f"{name} is {value!r}, and a number would be right", name) from None
    if not np.isfinite(number):
        raise LawError(f"{name} is {number}, and a finite number would be right", name)
    return number


def positive(parameters: Parameters, *names: str) -> None:
    for name in names:
        if not parameters[name] > 0:
            raise LawError(f"{name} is {parameters[name]:g}, and a number above 0 would be right", name)


def not_negative(parameters: Parameters, *names: str) -> None:
    for name in names:
        if not parameters[name] >= 0:
            raise LawError(f"{name} is {parameters[name]:g}, and 0 or more would be right", name)


def whole(parameters: Parameters, *names: str, least: int = 0) -> None:
    """Demand whole numbers of at least `least` that doubles hold exactly."""
    for name in names:
        value = parameters[name]
        if value != np.floor(value) or not least <= value <= 2**53:
            raise LawError(f"{name} is {value:g}, and a whole number from {least} on would be right", name)


def proportion(parameters: Parameters, name: str, *, lower_open: bool = False) -> None:
    value = parameters[name]
    if not 0 <= value <= 1 or (lower_open and value == 0):
        interval = "above 0 and at most 1" if lower_open else "from 0 to 1"
        raise LawError(f"{name} is {value:g}, and a probability {interval} would be right", name)


def ascending(parameters: Parameters, *names: str, strictly: bool = True) -> None:
    for left, right in itertools.pairwise(names):
        low, high = parameters[left], parameters[right]
        if not (low < high if strictly else low <= high):
            relation = "above" if strictly else "at or above"
            raise LawError(
                f"{right} is {high:g} and {left} is {low:g}, and {right} {relation} {left} would be right",
                right,
            )


def two_quantiles(parameters: Parameters) -> tuple[float, float, float, float]:
    """(p1, x1, p2, x2) with p1 < p2 of `quantiles`, a mapping of two probabilities to increasing values."""
    given = parameters["quantiles"]
    if not isinstance(given, Mapping) or len(given) != 2:
        raise LawError("quantiles needs two entries such as {0.05: 1.2, 0.95: 3.4}", "quantiles")
    (p1, x1), (p2, x2) = sorted(given.items())
    if not 0 < p1 < p2 < 1:
        raise LawError("the probabilities in quantiles must lie strictly between 0 and 1", "quantiles")
    if not x1 < x2:
        raise LawError(
            f"the quantiles at {p1:g} and {p2:g} are {x1:g} and {x2:g}, and increasing values would be right",
            "quantiles",
        )
    return p1, x1, p2, x2


def by_quantiles(
    convert: Callable[[float, float, float, float], Parameters], logarithmic: bool = False
) -> ParameterSet:
    """The parameter set {quantiles} whose two points `convert(p1, x1, p2, x2)` solves for the parameters."""

    def solve(parameters: Parameters) -> Parameters:
        p1, x1, p2, x2 = two_quantiles(parameters)
        if logarithmic and x1 <= 0:
            message = f"the quantile at {p1:g} is {x1:g}, and a value above 0 would be right"
            raise LawError(message, "quantiles")
        return convert(p1, x1, p2, x2)

    return ParameterSet(("quantiles",), convert=solve)
