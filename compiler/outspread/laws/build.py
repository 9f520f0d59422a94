"""From a distribution as the model states it to a law."""

from __future__ import annotations

from typing import TYPE_CHECKING

from outspread.errors import LawError
from outspread.laws.law import Law
from outspread.laws.registry import FAMILIES

if TYPE_CHECKING:
    from outspread.reading.model import Distribution


def build_law(distribution: Distribution) -> Law:
    """The law of a distribution whose parameters are numbers. Raises LawError."""
    family = FAMILIES.get(distribution.family)
    if family is None:
        raise LawError(f"there is no family {distribution.family!r}")
    return family.build(family.canonical(distribution.parameters))
