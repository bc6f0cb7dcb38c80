"""Program: how a step is computed, as typed statements for one number format. Imports nothing of the law."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from hybgen.kernels.table import ARITY

Literal = Fraction | int | bool | str
"""A real, integer or boolean constant, or the name of an enumerator."""


@dataclass(frozen=True, slots=True)
class Constant:
    """A constant; `type`: real, int, bool, word (uint32_t), or the name of an enum type."""

    value: Literal
    type: str


@dataclass(frozen=True, slots=True)
class Local:
    """A local constant."""

    name: str
    type: str


@dataclass(frozen=True, slots=True)
class Field:
    """A member of one of the structs at hand: self, p, u, now, y."""

    base: str
    name: str
    index: int | None
    type: str


@dataclass(frozen=True, slots=True)
class Apply:
    """An operation of OPS on operands; a look-up names its table."""

    op: str
    args: tuple[Value, ...]
    type: str
    table: str = ""


Value = Constant | Local | Field | Apply

# infix: the C operator; prefix: likewise; call: a helper function of that name
INFIX = {
    "add": "+",
    "sub": "-",
    "mul": "*",
    "div": "/",
    "iadd": "+",
    "isub": "-",
    "imul": "*",
    "lt": "<",
    "le": "<=",
    "gt": ">",
    "ge": ">=",
    "eq": "==",
    "ne": "!=",
    "and": "&&",
    "or": "||",
}
PREFIX = {"neg": "-", "ineg": "-", "not": "!"}
HELPERS = frozenset(
    {
        "abs",
        "min",
        "max",
        "clamp",
        "sign",
        "floor",
        "lookup",
        "lookup2",
        "to_steps",
        "finite",
        "iabs",
        "imin",
        "imax",
        "iclamp",
        "isign",
    }
)
OPS = frozenset(ARITY) | frozenset(INFIX) | frozenset(PREFIX) | HELPERS | {"select", "to_real"}


@dataclass(frozen=True, slots=True)
class Note:
    """Where the next statement comes from: `bilge_pump.yaml:27`, and the author's text."""

    place: str
    text: str


@dataclass(frozen=True, slots=True)
class Let:
    """A local constant is computed."""

    name: str
    type: str
    value: Value


@dataclass(frozen=True, slots=True)
class Store:
    """A member is assigned."""

    target: Field
    value: Value


@dataclass(frozen=True, slots=True)
class If:
    """A choice."""

    condition: Value
    then: tuple[Statement, ...]
    orelse: tuple[Statement, ...] = ()


@dataclass(frozen=True, slots=True)
class Switch:
    """A choice by the value of an enumeration or integer; each case has one or more labels."""

    subject: Value
    cases: tuple[tuple[tuple[Constant, ...], tuple[Statement, ...]], ...]
    default: tuple[Statement, ...] = ()


@dataclass(frozen=True, slots=True)
class Raise:
    """A status bit is set."""

    bit: str


@dataclass(frozen=True, slots=True)
class Answer:
    """The result of the function is set (a jump number, the number of a rule)."""

    value: Constant


Statement = Note | Let | Store | If | Switch | Raise | Answer


@dataclass(frozen=True, slots=True)
class Member:
    """A member of a struct; `note` is its comment."""

    name: str
    type: str
    size: int | None
    note: str
    places: int | None = None
    """Fixed point: binary places."""


@dataclass(frozen=True, slots=True)
class Enum:
    """An enumeration type and its enumerators."""

    name: str
    values: tuple[str, ...]
    note: str


@dataclass(frozen=True, slots=True)
class Table:
    """A curve: points and slopes."""

    name: str
    x: tuple[Fraction, ...]
    y: tuple[Fraction, ...]
    slope: tuple[Fraction, ...]
    note: str


@dataclass(frozen=True, slots=True)
class Grid:
    """A table of two inputs: points, values (a row for each x), inverses of the distances between points."""

    name: str
    x: tuple[Fraction, ...]
    y: tuple[Fraction, ...]
    z: tuple[tuple[Fraction, ...], ...]
    per_x: tuple[Fraction, ...]
    per_y: tuple[Fraction, ...]
    note: str


LOOKUPS: dict[str, type[Table | Grid]] = {"lookup": Table, "lookup2": Grid}
"""The operations that read a table, and what kind of table."""


@dataclass(frozen=True, slots=True)
class Function:
    """A static function: its body, and which of self, p, u, now, y it reads or writes."""

    name: str
    about: str
    body: tuple[Statement, ...]
    uses: frozenset[str]
    writes: frozenset[str]
    status: bool
    """Does it return status bits?"""


@dataclass(frozen=True, slots=True)
class Jump:
    """A jump: its number, macro and name."""

    number: int
    macro: str
    name: str


@dataclass(frozen=True, slots=True)
class Program:
    """One step as functions over structs."""

    name: str
    about: str
    origin: str
    """The law file's name."""
    digest: str
    version: str
    step: str
    number: str
    method: str
    real: str
    """float | double"""
    precision: int
    largest: Fraction
    enums: tuple[Enum, ...]
    inputs: tuple[Member, ...]
    parameters: tuple[Member, ...]
    outputs: tuple[Member, ...]
    states: tuple[Member, ...]
    now: tuple[Member, ...]
    defaults: tuple[tuple[Constant, ...], ...]
    """One row for each member of the parameters."""
    rules: tuple[str, ...]
    jumps: tuple[Jump, ...]
    jumps_per_step: int
    tables: tuple[Table | Grid, ...]
    helpers: tuple[str, ...]
    kernels: tuple[str, ...]
    """The kernels that are used, by their operations."""
    functions: tuple[Function, ...]
    flow_asked: bool
    """Does the flow depend on a flow condition?"""

    def function(self, name: str) -> Function:
        """The function of this name."""
        return next(f for f in self.functions if f.name == name)

    def has(self, name: str) -> bool:
        """Is there such a function?"""
        return any(f.name == name for f in self.functions)
