"""Typed scalar expressions: what every stage after the type check works on.

Vectors and matrices are gone at this level (each component is its own tree), names are resolved, units are
checked. A law's trees are about real numbers (constants are exact fractions); a step law's trees are about
one number format (constants are exactly representable in it, timers are whole steps).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from enum import StrEnum
from fractions import Fraction

from hybgen.diag.span import NOWHERE, Span


class Kind(StrEnum):
    """What a value is."""

    BOOL = "bool"
    INT = "int"
    REAL = "real"
    ENUM = "enum"


@dataclass(frozen=True, slots=True)
class Type:
    """A scalar type; an enumeration knows its value names and the logic variable that declares it."""

    kind: Kind
    values: tuple[str, ...] = ()
    owner: str = ""


BOOL = Type(Kind.BOOL)
INT = Type(Kind.INT)
REAL = Type(Kind.REAL)


class RefKind(StrEnum):
    """What a name stands for."""

    INPUT = "input"
    """The input after its `invalid` policy."""
    VALID = "valid"
    """valid(name): was this step's sample good?"""
    PARAMETER = "parameter"
    STATE = "state"
    TERM = "term"
    JUMPED = "jumped"
    """jumped(name): was that jump taken in this step?"""
    OUTPUT = "output"
    """An output's value, in claims."""
    LOCAL = "local"
    """A definition of a step law."""


# The hash of each node is computed once, when it is made: trees are keys in many places.


@dataclass(frozen=True, slots=True)
class Const:
    """A constant: a Fraction (real), int (int), bool (bool), or the code of an enumeration's value (enum)."""

    value: Fraction | int | bool
    type: Type
    span: Span = field(default=NOWHERE, compare=False, repr=False)
    hashed: int = field(init=False, compare=False, repr=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "hashed", hash((self.value, self.type)))

    def __hash__(self) -> int:
        return self.hashed


@dataclass(frozen=True, slots=True)
class Ref:
    """A name, with the component (row-major) for a vector or matrix."""

    kind: RefKind
    name: str
    type: Type
    index: int | None = None
    span: Span = field(default=NOWHERE, compare=False, repr=False)
    hashed: int = field(init=False, compare=False, repr=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "hashed", hash((self.kind, self.name, self.type, self.index)))

    def __hash__(self) -> int:
        return self.hashed


@dataclass(frozen=True, slots=True)
class Op:
    """An operation of the table OPS; `table` names the table of a lookup."""

    op: str
    args: tuple[Node, ...]
    type: Type
    table: str = ""
    span: Span = field(default=NOWHERE, compare=False, repr=False)
    hashed: int = field(init=False, compare=False, repr=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "hashed", hash((self.op, self.args, self.type, self.table)))

    def __hash__(self) -> int:
        return self.hashed


Node = Const | Ref | Op


@dataclass(frozen=True, slots=True)
class Row:
    """One operation: kinds of its arguments and of its result, and what it means."""

    name: str
    takes: tuple[str, ...]
    gives: str
    means: str


# kinds: real, int, bool; num = real or int (all alike); any = all alike; "*" = one or more of the kind before it
OPS: dict[str, Row] = {
    row.name: row
    for row in (
        Row("add", ("real", "real"), "real", "a + b"),
        Row("sub", ("real", "real"), "real", "a - b"),
        Row("mul", ("real", "real"), "real", "a * b"),
        Row("div", ("real", "real"), "real", "a / b"),
        Row("neg", ("real",), "real", "-a"),
        Row("abs", ("real",), "real", "-a if a < 0 else a"),
        Row("min", ("real", "real"), "real", "b if b < a else a"),
        Row("max", ("real", "real"), "real", "b if b > a else a"),
        Row("clamp", ("real", "real", "real"), "real", "lo if x < lo else (hi if x > hi else x)"),
        Row("sign", ("real",), "real", "1 if a > 0 else (-1 if a < 0 else 0)"),
        Row("floor", ("real",), "real", "largest whole number <= a; a itself where |a| has no fraction bits"),
        Row("sqrt", ("real",), "real", "square root, correctly rounded; NaN below 0"),
        Row("sin", ("real",), "real", "sine of an angle in radians"),
        Row("cos", ("real",), "real", "cosine of an angle in radians"),
        Row("tan", ("real",), "real", "tangent of an angle in radians"),
        Row("asin", ("real",), "real", "angle whose sine is a; NaN beyond -1 ... 1"),
        Row("acos", ("real",), "real", "angle whose cosine is a; NaN beyond -1 ... 1"),
        Row("atan2", ("real", "real"), "real", "angle of the point (b, a), -pi ... pi"),
        Row("exp", ("real",), "real", "e to the power a"),
        Row("log", ("real",), "real", "natural logarithm; NaN below 0"),
        Row("tanh", ("real",), "real", "hyperbolic tangent"),
        Row("hypot", ("real", "real"), "real", "square root of a^2 + b^2"),
        Row("wrap", ("real",), "real", "the angle in radians less whole turns, in (-pi, pi]"),
        Row("lookup", ("real",), "real", "linear between the points of a table, held beyond its ends"),
        Row(
            "lookup2",
            ("real", "real"),
            "real",
            "bilinear between the points of a table of two inputs, held beyond them",
        ),
        Row("iadd", ("int", "int"), "int", "a + b, never beyond 32 bits (checked by bounds)"),
        Row("isub", ("int", "int"), "int", "a - b"),
        Row("imul", ("int", "int"), "int", "a * b"),
        Row("ineg", ("int",), "int", "-a"),
        Row("iabs", ("int",), "int", "-a if a < 0 else a"),
        Row("imin", ("int", "int"), "int", "b if b < a else a"),
        Row("imax", ("int", "int"), "int", "b if b > a else a"),
        Row("iclamp", ("int", "int", "int"), "int", "lo if x < lo else (hi if x > hi else x)"),
        Row("isign", ("int",), "int", "1 if a > 0 else (-1 if a < 0 else 0)"),
        Row("to_real", ("int",), "real", "the nearest real of the format, ties to even"),
        Row("to_steps", ("real",), "int", "whole steps of a time, rounded up (numbers.steps)"),
        Row("fixed_add", ("int",) * 5, "int", "(a * 2**p + b * 2**q) / 2**s of (a, b, p, q, s): nearest even, held"),
        Row("fixed_mul", ("int",) * 3, "int", "a * b / 2**s of (a, b, s): nearest even, held"),
        Row("fixed_div", ("int",) * 3, "int", "a * 2**s / b of (a, b, s): nearest even, held"),
        Row("fixed_scale", ("int",) * 2, "int", "a * 2**s of (a, s): nearest even, held"),
        Row("fixed_order", ("int",) * 4, "int", "sign of a * 2**p - b * 2**q of (a, b, p, q)"),
        Row("fixed_floor", ("int",) * 2, "int", "a / 2**s of (a, s), rounded down"),
        Row("fixed_steps", ("int",) * 2, "int", "a / 2**s of (a, s) in whole steps, rounded up"),
        Row(
            "fixed_line",
            ("int",) * 6,
            "int",
            "(y * 2**p + m * (x - u)) / 2**s of (y, m, x, u, p, s): nearest even, held",
        ),
        Row(
            "fixed_sqrt",
            ("int",) * 3,
            "int",
            "sqrt of raw values: the arguments, their places, the places of the result",
        ),
        Row(
            "fixed_sin", ("int",) * 3, "int", "sin of raw values: the arguments, their places, the places of the result"
        ),
        Row(
            "fixed_cos", ("int",) * 3, "int", "cos of raw values: the arguments, their places, the places of the result"
        ),
        Row(
            "fixed_tan", ("int",) * 3, "int", "tan of raw values: the arguments, their places, the places of the result"
        ),
        Row(
            "fixed_asin",
            ("int",) * 3,
            "int",
            "asin of raw values: the arguments, their places, the places of the result",
        ),
        Row(
            "fixed_acos",
            ("int",) * 3,
            "int",
            "acos of raw values: the arguments, their places, the places of the result",
        ),
        Row(
            "fixed_atan2",
            ("int",) * 5,
            "int",
            "atan2 of raw values: the arguments, their places, the places of the result",
        ),
        Row(
            "fixed_exp", ("int",) * 3, "int", "exp of raw values: the arguments, their places, the places of the result"
        ),
        Row(
            "fixed_log", ("int",) * 3, "int", "log of raw values: the arguments, their places, the places of the result"
        ),
        Row(
            "fixed_tanh",
            ("int",) * 3,
            "int",
            "tanh of raw values: the arguments, their places, the places of the result",
        ),
        Row(
            "fixed_hypot",
            ("int",) * 5,
            "int",
            "hypot of raw values: the arguments, their places, the places of the result",
        ),
        Row(
            "fixed_wrap",
            ("int",) * 3,
            "int",
            "wrap of raw values: the arguments, their places, the places of the result",
        ),
        Row("lt", ("num", "num"), "bool", "a < b"),
        Row("le", ("num", "num"), "bool", "a <= b"),
        Row("gt", ("num", "num"), "bool", "a > b"),
        Row("ge", ("num", "num"), "bool", "a >= b"),
        Row("eq", ("discrete", "discrete"), "bool", "a == b; int, bool or enum"),
        Row("ne", ("discrete", "discrete"), "bool", "a != b; int, bool or enum"),
        Row("finite", ("real",), "bool", "-max <= a <= max of the format"),
        Row("and", ("bool", "*"), "bool", "all of them"),
        Row("or", ("bool", "*"), "bool", "any of them"),
        Row("not", ("bool",), "bool", "not a"),
        Row("select", ("bool", "any", "any"), "any", "a if c else b"),
    )
}

COMPARISONS = frozenset({"lt", "le", "gt", "ge", "eq", "ne"})
OPPOSITE = {"lt": "ge", "ge": "lt", "le": "gt", "gt": "le", "eq": "ne", "ne": "eq"}
"""The comparison that holds where the other fails (real arguments: where neither is NaN)."""

TRUE = Const(True, BOOL)
FALSE = Const(False, BOOL)


def truth(value: bool, span: Span = NOWHERE) -> Const:
    """The boolean constant."""
    return Const(value, BOOL, span)


def real(value: Fraction | int, span: Span = NOWHERE) -> Const:
    """A real constant."""
    return Const(Fraction(value), REAL, span)


def integer(value: int, span: Span = NOWHERE) -> Const:
    """An integer constant."""
    return Const(int(value), INT, span)


def op(name: str, *args: Node, span: Span = NOWHERE, table: str = "") -> Op:
    """An operation with the result type of its table row."""
    gives = OPS[name].gives
    match gives:
        case "any":
            result = args[-1].type
        case "real":
            result = REAL
        case "int":
            result = INT
        case _:
            result = BOOL
    return Op(name, args, result, table, span)


def walk(node: Node) -> Iterator[Node]:
    """Every node of a tree, parents before children."""
    todo = [node]
    while todo:
        here = todo.pop()
        yield here
        if isinstance(here, Op):
            todo.extend(reversed(here.args))


def refs(node: Node, *kinds: RefKind) -> Iterator[Ref]:
    """The references in a tree, of the kinds given (or all)."""
    for here in walk(node):
        if isinstance(here, Ref) and (not kinds or here.kind in kinds):
            yield here


def rebuild(node: Node, change: Callable[[Node], Node]) -> Node:
    """The tree with `change` applied to every node, children first."""
    if isinstance(node, Op):
        args = tuple(rebuild(a, change) for a in node.args)
        if any(a is not b for a, b in zip(args, node.args, strict=True)):
            node = Op(node.op, args, node.type, node.table, node.span)
    return change(node)
