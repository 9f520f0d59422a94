"""Change of measure: the joint density over a box of outputs integrates to the probability of the box."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from jacobian_maps import MAPS, draws, joint
from scipy.special import roots_legendre
from scipy.stats import beta

from outspread.formula.evaluate import compile_numpy
from outspread.formula.parser import parse

DRAWS = 400_000
CONFIDENCE = 0.9999

#: boxes (a1, a2, b1, b2) inside which the density is smooth
BOXES = {
    "polar": (0.4, 1.3, -2.0, 1.0),
    "Box-Muller": (-1.0, 0.4, 0.3, 1.5),
    "sum and share": (2.0, 7.0, 0.2, 0.5),
    "product and ratio": (0.2, 1.0, 0.5, 2.0),
    "squares and one": (1.0, 3.0, -0.4, 0.7),
    "order statistics": (-1.0, -0.2, 0.1, 1.4),
    "product and sum": (0.2, 0.5, 1.8, 2.4),
    "sine": (-0.5, 0.4, -2.0, -0.5),
    "absolute value and whole part": (0.1, 0.9, -0.5, 1.0),
    "decibels": (0.0, 4.0, -3.0, 1.0),
}


def box_integral(pdf: Callable[[np.ndarray], np.ndarray], box: tuple[float, ...], order: int) -> float:
    """Product Gauss-Legendre rule with scipy's nodes."""
    nodes, weights = roots_legendre(order)
    low, high, left, right = box
    a = 0.5 * (low + high) + 0.5 * (high - low) * nodes
    b = 0.5 * (left + right) + 0.5 * (right - left) * nodes
    values = pdf(np.stack(np.meshgrid(a, b, indexing="ij")))
    return float(0.25 * (high - low) * (right - left) * weights @ values @ weights)


@pytest.mark.parametrize("name", BOXES)
def test_the_density_integrates_to_the_probability_of_a_box(name: str) -> None:
    """The integral lies in the Clopper-Pearson interval of 400,000 draws at 99.99 %.

    C. J. Clopper, E. S. Pearson (1934), Biometrika 26, 404.
    """
    formulas, laws = MAPS[name]
    found = joint(formulas, laws)
    low, high, left, right = BOXES[name]
    mass = box_integral(found.pdf, BOXES[name], 16)
    error = abs(mass - box_integral(found.pdf, BOXES[name], 11))
    outputs = [compile_numpy(parse(text), tuple(laws))(*draws(laws, DRAWS, 77)) for text in formulas.values()]
    inside = (outputs[0] > low) & (outputs[0] <= high) & (outputs[1] > left) & (outputs[1] <= right)
    hits, rest = int(inside.sum()), (1.0 - CONFIDENCE) / 2.0
    smallest = beta.ppf(rest, hits, DRAWS - hits + 1)
    largest = beta.isf(rest, hits + 1, DRAWS - hits)
    assert error < 1e-4
    assert smallest - error <= mass <= largest + error
