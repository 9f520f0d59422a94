"""The families as text for a terminal: what each is for and how its parameters may be given."""

from __future__ import annotations

from outspread.laws.build import CONSTRUCTIONS
from outspread.laws.registry import FAMILIES

_WIDTH = 26


def family_lines() -> list[str]:
    """A readable table: key and usage on one line, the parameter sets below it, families first."""
    lines: list[str] = []
    for kind in ("continuous", "discrete"):
        chosen = [family for family in FAMILIES.values() if family.kind == kind]
        lines.append(f"{kind.capitalize()} families ({len(chosen)})")
        for family in chosen:
            sets = tuple(str(candidate) for candidate in family.parameter_sets)
            lines.extend(_entry(family.key, family.usage, sets))
        lines.append("")
    lines.append("Other ways to state a distribution")
    for made in CONSTRUCTIONS.values():
        lines.extend(_entry(made.key, made.usage, made.parameter_sets))
    lines.extend(
        (
            "",
            "{quantiles} maps two probabilities to values, as in quantiles: {0.05: 1.2, 0.95: 3.4}.",
            "Any distribution can be cut with truncate: {lower: …, upper: …}.",
        )
    )
    return lines


def _entry(key: str, usage: str, sets: tuple[str, ...]) -> list[str]:
    first = f"  {key:<{_WIDTH}}{usage}"
    return [first, *(f"  {'':<{_WIDTH}}{'or ' if i else ''}{text}" for i, text in enumerate(sets))]
