"""What the author wrote, as a tree: names unresolved, units as written, order kept."""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction

from hybgen.diag.span import NOWHERE, Span
from hybgen.expr.units import Unit


@dataclass(frozen=True, slots=True)
class Number:
    """A number as written, with its unit if it has one."""

    value: Fraction
    unit: Unit | None
    text: str = field(compare=False)
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Truth:
    """`true` or `false`."""

    value: bool
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Name:
    """A name."""

    name: str
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Unary:
    """`-x` or `not x`."""

    op: str
    operand: Expr
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Binary:
    """`+ - * / @` between two operands; `**` with a whole number on the right."""

    op: str
    left: Expr
    right: Expr
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Chain:
    """One or more comparisons in a row: `a <= x < b`."""

    ops: tuple[str, ...]
    operands: tuple[Expr, ...]
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Logic:
    """`and` or `or` of two or more operands."""

    op: str
    operands: tuple[Expr, ...]
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Item:
    """A component: `x[0]`, `A[1, 2]`."""

    base: Expr
    indexes: tuple[Expr, ...]
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Call:
    """A function, table or question: `min(a, b)`, `curve(u)`, `valid(level)`."""

    function: str
    args: tuple[Expr, ...]
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Vector:
    """`[a, b, c]`; a matrix is a vector of vectors."""

    items: tuple[Expr, ...]
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Cases:
    """The first branch whose condition holds, else `otherwise`. Written in YAML, not in expression text."""

    branches: tuple[tuple[Expr, Expr], ...]
    otherwise: Expr
    span: Span = field(default=NOWHERE, compare=False, repr=False)


Expr = Number | Truth | Name | Unary | Binary | Chain | Logic | Item | Call | Vector | Cases
