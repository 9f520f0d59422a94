"""How the tails of a derived law fall off, read off its own values: it decides which moments exist.

The local exponent y f(y) / P(beyond y) of a tail like a power tends to the power's exponent, and grows
without limit where the tail is lighter than every power (Embrechts, Klüppelberg and Mikosch 1997, Modelling
Extremal Events, section 3.3). It knows nothing of formulas; what their structure says is `tail_index`'s.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from outspread.laws.law import Array

if TYPE_CHECKING:
    from outspread.laws.derived import DerivedLaw

_FAR = np.array([1e-16, 1e-32, 1e-64, 1e-128])
#: beside a pole, where the input's own last digit limits how far a tail can be followed
_NEAR = np.array([1e-4, 1e-6, 1e-8, 1e-10, 1e-12])
_KNOWN = 1e-4  # relative error up to which a probability tells an exponent
_LIGHT = 60.0  # a local exponent above this is no power's


@dataclass(frozen=True)
class Tail:
    """How probability beyond y falls off: like y^-exponent (inf: faster than any power), or `ends`."""

    exponent: float
    ends: bool


def observed_tail(law: DerivedLaw, side: int) -> Tail:
    """The tail of the law below (side -1) or above (side 1)."""
    end = law.support()[0 if side < 0 else 1]
    if np.isfinite(end) or law.continuous_mass == 0:
        return Tail(np.inf, True)
    exponent = _exponents(law, side, _FAR)
    if exponent.size < 3:
        exponent = np.concatenate([_exponents(law, side, _NEAR), exponent])
    if exponent.size < 3:
        return Tail(np.inf, False)
    second, third = exponent[-2:]
    if third > _LIGHT or abs(third - second) > 0.05 * third + 0.02:
        return Tail(np.inf, False)
    # logarithmic corrections fade like 1 / log y, which halves from level to level
    limit = 2 * third - second
    whole = round(limit)
    return Tail(float(whole if abs(limit - whole) < 2e-3 else limit), False)


def _exponents(law: DerivedLaw, side: int, levels: Array) -> Array:
    """The local exponents at those tail probabilities at which the law is known well enough."""
    levels = levels[levels > law.tail_probability]
    y = law.rough_quantile(levels, upper=side > 0)
    centre = float(law.icdf(0.5))
    beyond, density = law.estimate("ccdf" if side > 0 else "cdf", y), law.estimate("pdf", y)
    known = (beyond.error <= _KNOWN * beyond.value) & (density.error <= _KNOWN * density.value)
    known &= (beyond.value > 0) & (density.value > 1e-300)  # a density that underflows says nothing
    return np.asarray((np.abs(y - centre)[known] * density.value[known]) / beyond.value[known], float)
