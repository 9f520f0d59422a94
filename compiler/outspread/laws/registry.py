"""All families under their keys: a plain dict, and nothing else."""

from __future__ import annotations

from outspread.laws.families import (
    circular,
    counts,
    curvilinear,
    discrete,
    exponential,
    extreme,
    gamma,
    gamma_maps,
    heavy,
    interval,
    interval_maps,
    noncentral,
    normal,
    normal_maps,
    polygon,
    power_tail,
    symmetric,
)
from outspread.laws.families.base import Family

_MODULES = (
    normal,
    interval,
    polygon,
    curvilinear,
    interval_maps,
    heavy,
    symmetric,
    exponential,
    gamma,
    gamma_maps,
    noncentral,
    normal_maps,
    extreme,
    power_tail,
    circular,
    discrete,
    counts,
)

#: key -> Family, in the order in which they are listed to the user
FAMILIES: dict[str, Family] = {family.key: family for module in _MODULES for family in module.FAMILIES}
