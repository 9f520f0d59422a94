"""Central moments of any law by quadrature over its density and sums over its atoms."""

from __future__ import annotations

import numpy as np

from outspread.laws.families.shapes import INF, NAN, Moments
from outspread.laws.law import Array, Law
from outspread.numerics.quadrature import integrate

_LEVELS = 10.0 ** np.array([-300, -200, -140, -100, -70, -50, -36, -26, -18, -13, -9, -6, -4, -3, -2, -1.0])
_BODY = np.array([0.25, 0.4])


def central_moments(law: Law) -> Moments:
    """Mean, variance, skewness and kurtosis of `law`, to about 1e-12 relative to the variance's scale.

    Orders that `law.moment_exists` denies: the mean is inf (one-sided) or nan, the variance inf, others nan.
    """
    if not law.moment_exists(1):
        return (INF if np.isfinite(law.support()[0]) else NAN, NAN, NAN, NAN)
    middle = float(law.icdf(0.5))
    mean = middle + _central(law, middle, (1,))[0]
    if not law.moment_exists(2):
        return (mean, INF, NAN, NAN)
    orders = tuple(order for order in (2, 3, 4) if law.moment_exists(order))
    central = dict(zip(orders, _central(law, mean, orders), strict=True))
    variance = central[2]
    if variance == 0:
        return (mean, 0.0, NAN, NAN)
    return (
        mean,
        variance,
        central[3] / variance**1.5 if 3 in central else NAN,
        central[4] / variance**2 if 4 in central else NAN,
    )


def _central(law: Law, about: float, orders: tuple[int, ...]) -> list[float]:
    totals = np.zeros(len(orders))
    atoms = law.atoms()
    for i, order in enumerate(orders):
        totals[i] = float(np.sum(atoms.masses * (atoms.values - about) ** order))
    if law.continuous_mass > 0:
        edges = _edges(law, about)
        result = integrate(
            lambda x, owner: np.stack([_product(law, x, about, order) for order in orders]),
            edges[:-1],
            edges[1:],
            np.zeros(edges.size - 1, dtype=np.int64),
            1,
            components=len(orders),
            # odd moments may vanish: what counts is their size against the spread
            relative=1e-13,
            absolute=1e-14 * float(np.max(np.abs(totals), initial=0.0)),
        )
        totals = totals + result.value[:, 0]
    return [float(total) for total in totals]


def _product(law: Law, x: Array, about: float, order: int) -> Array:
    with np.errstate(all="ignore"):
        value = law.pdf(x) * (x - about) ** order
    return np.asarray(np.where(np.isfinite(value), value, 0.0))


def _edges(law: Law, about: float) -> Array:
    levels = np.concatenate((_LEVELS, _BODY))
    with np.errstate(all="ignore"):
        points = np.concatenate((law.icdf(levels), law.iccdf(levels), [about], law.breaks()))
    ends = [end for end in law.support() if np.isfinite(end)]
    points = np.concatenate((points, ends))
    return np.unique(points[np.isfinite(points)])
