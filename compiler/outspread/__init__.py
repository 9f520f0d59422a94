"""Outspread derives the distribution of a formula's result from uncertain inputs; this is its public face.

`import outspread` loads no library: `derive` and its kin are fetched when they are first used.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from outspread.derivation import Derivation, OutputLaw, derive
    from outspread.errors import DerivationError, FormulaError, ModelError, OutspreadError

__version__ = "0.1.0"

_HOMES = {
    "derive": "outspread.derivation",
    "Derivation": "outspread.derivation",
    "OutputLaw": "outspread.derivation",
    "OutspreadError": "outspread.errors",
    "ModelError": "outspread.errors",
    "FormulaError": "outspread.errors",
    "DerivationError": "outspread.errors",
}

__all__ = [
    "Derivation",
    "DerivationError",
    "FormulaError",
    "ModelError",
    "OutputLaw",
    "OutspreadError",
    "__version__",
    "derive",
]


def __getattr__(name: str) -> object:
    home = _HOMES.get(name)
    if home is None:
        raise AttributeError(f"module 'outspread' has no attribute {name!r}")
    from importlib import import_module

    return getattr(import_module(home), name)


def __dir__() -> list[str]:
    return sorted(__all__)
