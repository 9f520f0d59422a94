"""The wording that error messages share: lists, values and near misses; it decides nothing about models."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Mapping

#: longest piece of the user's own text that a message quotes
_QUOTED = 60


def quoted(text: object) -> str:
    """`text` in backquotes on one line, shortened where it is long."""
    flat = " ".join(str(text).split())
    if len(flat) > _QUOTED:
        flat = flat[: _QUOTED - 1] + "…"
    return f"`{''.join(c if c.isprintable() else '�' for c in flat)}`"


def listed(items: Iterable[str], last: str = "or") -> str:
    """`a`, `b` or `c`."""
    words = [quoted(item) for item in items]
    if len(words) < 2:
        return "".join(words)
    return f"{', '.join(words[:-1])} {last} {words[-1]}"


def near(word: str, known: Iterable[str]) -> str | None:
    """The known word that `word` most likely misspells, or None."""
    choices = list(dict.fromkeys(known))
    plain = {choice.lower().replace("-", "_").replace(" ", "_"): choice for choice in reversed(choices)}
    key = word.lower().replace("-", "_").replace(" ", "_")[:100]
    if key in plain:
        return plain[key]
    found = difflib.get_close_matches(key, list(plain), n=1, cutoff=0.68)
    return plain[found[0]] if found else None


def suggestion(word: str, known: Iterable[str], kind: str = "known names") -> str:
    """`did you mean ...?`, or the list of what is known where nothing is near (or that there is nothing)."""
    choices = list(dict.fromkeys(known))
    match = near(word, choices)
    if match is not None:
        return f"did you mean {quoted(match)}?"
    if not choices:
        return f"there are no {kind}"
    if len(choices) > 15:
        return f"{kind} begin with {listed(choices[:10], 'and')}"
    return f"{kind}: {listed(choices, 'and')}"


def shown(value: object) -> str:
    """A value as a message names it: `the text `x``, `the number 3`, `a list`, `nothing`, ..."""
    if value is None:
        return "empty"
    if isinstance(value, bool):
        return f"the truth value `{str(value).lower()}`"
    if isinstance(value, str):
        return f"the text {quoted(value)}" if value.strip() else "empty text"
    if isinstance(value, int | float):
        return f"the number {number(value)}"
    if isinstance(value, Mapping):
        return "a group of keys" if value else "an empty group of keys"
    return "a list" if value else "an empty list"


def number(value: float) -> str:
    """A number as short as it reads back, integers without a point."""
    if isinstance(value, int):
        text = str(value)
        return text if len(text) <= 30 else f"{float(value):g}"
    return f"{value:.15g}"
