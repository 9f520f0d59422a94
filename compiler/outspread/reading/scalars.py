"""Values of unquoted YAML scalars by YAML 1.2's core schema; ambiguous ones refused, nothing is parsed."""

from __future__ import annotations

import math
import re

from outspread.reading.words import quoted

_INTEGER = re.compile(r"[-+]?(?:0|[1-9][0-9]*)\Z")
_FLOAT = re.compile(r"[-+]?(?:\.[0-9]+|[0-9]+(?:\.[0-9]*)?)(?:[eE][-+]?[0-9]+)?\Z")
_LEADING_ZERO = re.compile(r"[-+]?0[0-9_]+\Z")
_SEXAGESIMAL = re.compile(r"[-+]?[0-9][0-9_]*(?::[0-5]?[0-9])+(?:\.[0-9_]*)?\Z")
_OTHER_BASE = re.compile(r"[-+]?0[xob][0-9a-fA-F_]+\Z")
_UNDERSCORED = re.compile(r"[-+]?[0-9][0-9_]*(?:\.[0-9_]*)?(?:[eE][-+]?[0-9]+)?\Z")
_NOT_FINITE = re.compile(r"(?:[-+]?\.(?:inf|Inf|INF)|\.(?:nan|NaN|NAN))\Z")
_WORDS: dict[str, bool | None] = {
    "": None, "~": None, "null": None, "Null": None, "NULL": None,
    "true": True, "True": True, "TRUE": True, "false": False, "False": False, "FALSE": False,
}  # fmt: skip


def plain_value(text: str) -> tuple[object, str]:
    """Value of an unquoted scalar by YAML 1.2's core schema, and what is wrong with it ("" if nothing).

    Refused as ambiguous: whatever YAML 1.1 and 1.2 read as two different values, or both read as a number
    that the writer may have meant as text.
    """
    if text in _WORDS:
        return _WORDS[text], ""
    if _LEADING_ZERO.match(text):
        return None, f"{quoted(text)} can be read as octal or as decimal; quote it, or drop the leading zeros"
    if _INTEGER.match(text):
        value = int(text) if len(text) <= 300 else math.inf
        return value, "" if math.isfinite(value) else f"{quoted(text)} is too long for a number"
    if _FLOAT.match(text):
        real = float(text)
        if not math.isfinite(real):
            return None, f"{quoted(text)} is too large for a number; the largest is 1.7e308"
        if real == 0 and re.search(r"[1-9]", re.split("[eE]", text)[0]):
            return (
                None,
                f"{quoted(text)} is too small for a number and would be read as 0; the smallest is 1e-308",
            )
        return real, ""
    if _SEXAGESIMAL.match(text):
        return None, f"{quoted(text)} can be read as a number to base 60 or as text; quote it"
    if _OTHER_BASE.match(text):
        return (
            None,
            f"{quoted(text)} can be read as a number to another base or as text; quote it, or "
            "write it in decimal",
        )
    if "_" in text and _UNDERSCORED.match(text):
        return None, f"{quoted(text)} can be read as a number or as text; quote it, or drop the underscores"
    if _NOT_FINITE.match(text):
        return None, f"{quoted(text)} is no finite number; leave out a limit that does not exist, or quote it"
    return text, ""
