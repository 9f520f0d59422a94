"""What a route hands on: the law of an output, the mathematics that led to it, and what it cost."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from outspread.formula.tree import Node
from outspread.laws.law import Array, Law


@dataclass(frozen=True)
class Value:
    """A number with a bound on its absolute error."""

    value: float
    error: float


@dataclass(frozen=True)
class Statement:
    """A sentence (plain text; $...$ holds inline LaTeX) followed by an optional display formula (LaTeX).

    `role`: region | inverse | jacobian | cdf | density | closed_form | note, so that the report can place it.
    """

    text: str
    latex: str = ""
    role: str = "note"


@dataclass(frozen=True)
class SymbolicDensity:
    """A density written as a formula in y, shown only after it agreed with the law at 200 points."""

    latex: str
    function: Callable[[Array], Array]
    name: str = ""  # e.g. "Rice distribution"
    source: str = ""  # published source


@dataclass(frozen=True)
class SymbolicBranch:
    """One limit of a region as written: `value` in the names of the outer input and of the result's value,
    `slope` its derivative by that value; a solution where all `conditions` hold and it is a real number."""

    value: Node
    slope: Node
    conditions: tuple[Node, ...] = ()


@dataclass(frozen=True)
class SymbolicIntegral:
    """A density written as an integral over one input, f(y) = ∫ f(x, z_k(y, x)) |∂z_k/∂y| dx summed over the
    branches z_k, for evidence that evaluates what is written.

    `outer` and `inner` name the inputs x and z, `value` the name of y in the branches. Where the integral
    is not written in symbols, or is not the whole density, `missing` says why and there are no branches.
    """

    inner: str
    outer: str
    value: str
    branches: tuple[SymbolicBranch, ...] = ()
    missing: str = ""


@dataclass(frozen=True)
class DerivedOutput:
    """The law of one output with its written-out derivation.

    `numeric` is the law by the numeric route where `law` is a closed form (else None), for comparison.
    """

    output: str
    route: str
    law: Law
    mathematics: tuple[Statement, ...] = ()
    symbolic: SymbolicDensity | SymbolicIntegral | None = None
    numeric: Law | None = None
    evaluations: int = 0
    assumptions: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class JointLaw:
    """The joint law of n outputs of n inputs (inverse and Jacobian): density at points of shape (n, k)."""

    outputs: tuple[str, ...]
    pdf: Callable[[Array], Array]
    mathematics: tuple[Statement, ...] = ()
    relative_error: float = 1e-12
    branches: int = 1
    region: Callable[[Array], Array] | None = None
    pdf_error: Callable[[Array], Array] | None = (
        None  # bound on |pdf - true density| at points of shape (n, k)
    )
