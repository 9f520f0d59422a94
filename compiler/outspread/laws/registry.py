"""All families under their keys: a plain dict, and nothing else."""

from __future__ import annotations

from outspread.laws.families import (
    curvilinear,
    discrete,
    exponential,
    gamma,
    heavy,
    interval,
    normal,
)
from outspread.laws.families.base import Family

_MODULES = (normal, interval, curvilinear, exponential, gamma, heavy, discrete)

#: key -> Family, in the order in which they are listed to the user
FAMILIES: dict[str, Family] = {family.key: family for module in _MODULES for family in module.FAMILIES}
