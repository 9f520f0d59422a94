"""What the modules that build a Model share while they do: the document, the faults, the units so far.

Also the one way from a formula in the document to a tree: parse, look up names, resolve units, and put
every fault at its line and column. It knows nothing of distributions, requirements or outputs.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass, field
from pathlib import Path as FilePath
from typing import Any

from outspread.errors import Fault, FormulaError, Place
from outspread.formula.folding import fold
from outspread.formula.parser import parse, parse_event
from outspread.formula.tree import Name, Node, Number, names, substitute, walk
from outspread.reading.document import Document, Path
from outspread.reading.model import Constant
from outspread.reading.words import quoted, suggestion


@dataclass
class Context:
    """One reading in progress. `units` holds those of constants, inputs, steps and outputs as they appear."""

    document: Document
    folder: FilePath
    faults: list[Fault] = field(default_factory=list)
    constants: dict[str, Constant] = field(default_factory=dict)
    units: dict[str, str] = field(default_factory=dict)
    inputs: tuple[str, ...] = ()
    data: dict[str, bytes] = field(default_factory=dict)

    # -- the document --------------------------------------------------------------------------------

    def get(self, path: Path, default: Any = None) -> Any:
        """The value at a path of the document, `default` where there is none."""
        value: Any = self.document.value
        for part in path:
            try:
                value = value[part]
            except (KeyError, IndexError, TypeError):
                return default
        return value

    def text(self, path: Path) -> str:
        """The text at a path, a number as it was written; "" where there is none."""
        value = self.get(path)
        if value is None:
            return ""
        return value.strip() if isinstance(value, str) else self.document.text(path)

    def place(self, path: Path) -> Place:
        return self.document.key(path)

    def fault(self, path: Path, message: str) -> None:
        """Something is wrong with the value at `path`."""
        self.faults.append(Fault(self.document.at(path), message))

    def key_fault(self, path: Path, message: str) -> None:
        """Something is wrong with the key at `path`, or with all that stands under it."""
        self.faults.append(Fault(self.document.key(path), message))

    # -- formulas ------------------------------------------------------------------------------------

    def formula_fault(self, path: Path, error: FormulaError) -> None:
        place, excerpt = self.document.within(path, error.text, error.start, error.end)
        self.faults.append(Fault(place, error.message, excerpt))

    def parsed(self, path: Path, known: Collection[str], kinds: str, event: bool = False) -> Node | None:
        """The tree of the formula at `path`; None, with its faults noted, where it cannot be read.

        `known` are the names it may use, `kinds` says in words what they are.
        """
        text = self.written(path)
        try:
            node = parse_event(text) if event else parse(text)
        except FormulaError as error:
            self.formula_fault(path, error)
            return None
        unknown = {
            part.name: part for part in walk(node) if isinstance(part, Name) and part.name not in known
        }
        for part in unknown.values():
            message = f"{quoted(part.name)} is not defined; {suggestion(part.name, known, kinds)}"
            self.formula_fault(path, FormulaError(message, text, *part.span))
        return None if unknown else node

    def written(self, path: Path) -> str:
        """The formula at `path` exactly as it stands, so that offsets into it are columns."""
        value = self.get(path)
        return value if isinstance(value, str) else self.document.text(path)

    def resolved(
        self,
        path: Path,
        node: Node,
        wanted: str | None,
        *,
        units: Mapping[str, str] | None = None,
        numbers: bool = False,
    ) -> tuple[Node, str] | None:
        """The tree with its units resolved, and its unit; None, the fault noted, where they do not fit."""
        from outspread.formula.units import resolve_units

        try:
            return resolve_units(
                node,
                self.units if units is None else units,
                wanted,
                self.written(path),
                numbers_take_units=numbers,
            )
        except FormulaError as error:
            self.formula_fault(path, error)
            return None

    def parameter(self, path: Path, node: Node, wanted: str) -> Node | None:
        """The formula of a distribution's parameter, right in the unit `wanted`, constants put in.

        A number beside a quantity is taken in that quantity's unit, as in `2*bias + 1`, but only where this
        is the parameter's own unit: beside a length in cm, the 1 of a parameter in mm could be either.
        """
        from outspread.formula.unit import parse_unit
        from outspread.formula.units import resolve_units

        text = self.written(path)
        numbers = not names(node)
        try:
            resolve_units(node, self.units, wanted, text, numbers_take_units=numbers)
        except FormulaError as strict:
            try:
                _, unit = resolve_units(node, self.units, None, text, numbers_take_units=True)
            except FormulaError as error:
                self.formula_fault(path, error)
                return None
            if parse_unit(unit).factor != parse_unit(wanted).factor:
                self.formula_fault(path, strict)
                return None
            numbers = True
        found = self.resolved(path, node, wanted, numbers=numbers)
        return None if found is None else self.with_constants(found[0])

    def with_constants(self, node: Node) -> Node:
        """The tree with each constant's name replaced by its number."""
        values = {name: Number(constant.value, name) for name, constant in self.constants.items()}
        return substitute(node, values)

    def constant_value(self, path: Path, node: Node, wanted: str) -> float | None:
        """The number of a parameter that is a formula of constants, in the unit `wanted`."""
        found = self.parameter(path, node, wanted)
        if found is None:
            return None
        value = fold(found)
        if isinstance(value, Number):
            return value.value
        self.fault(path, f"the formula {quoted(self.written(path))} has no finite value; check its constants")
        return None
