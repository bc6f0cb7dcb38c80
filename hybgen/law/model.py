"""The law: what the author wrote, resolved and typed; continuous time, real numbers, all values frozen."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from fractions import Fraction
from typing import TypeVar

from hybgen.diag.span import Span
from hybgen.expr.core import Node, Type
from hybgen.expr.units import Unit

Value = Fraction | int | bool
"""An exact value: Fraction (real), int (integer, count, code of a logic value), bool."""


@dataclass(frozen=True, slots=True)
class Input:
    """A measured signal. Numbers are in `unit`; differences (noise, resolution) and rates in its K for degC."""

    name: str
    type: Type
    size: int | None
    """Number of components of a vector, None for a scalar."""
    unit: Unit
    low: Fraction | None
    high: Fraction | None
    """The range; None for bool."""
    noise: Fraction
    resolution: Fraction
    rate: Fraction | None
    """Largest slope per second."""
    invalid: str
    """What a bad sample becomes: `hold`, `clamp` or `value`."""
    substitute: Fraction | None
    """The value of `invalid: value`."""
    initial: Value
    """The last valid sample before the first one."""
    about: str
    span: Span


@dataclass(frozen=True, slots=True)
class Parameter:
    """A constant number, vector or matrix, or (tunable) one that may change at run time inside its range."""

    name: str
    type: Type
    shape: tuple[int, ...]
    unit: Unit
    value: tuple[Value, ...]
    """Row-major."""
    low: Fraction | None
    high: Fraction | None
    tunable: bool
    about: str
    span: Span


class StateKind(StrEnum):
    """What a state is."""

    LOGIC = "logic"
    BOOL = "bool"
    TIMER = "timer"
    COUNT = "count"
    REAL = "real"


@dataclass(frozen=True, slots=True)
class State:
    """A state of the controller.

    `values` are the names of a logic variable, or its integers; `maximum` is where a timer (in `unit`) or a
    count holds; `limit` keeps a real state inside [low, high]; `sampled` states have no flow.
    """

    name: str
    kind: StateKind
    type: Type
    size: int | None
    unit: Unit
    values: tuple[str, ...] | tuple[int, ...]
    initial: tuple[Value, ...]
    low: Fraction | None
    high: Fraction | None
    limit: bool
    maximum: Fraction | None
    about: str
    span: Span


@dataclass(frozen=True, slots=True)
class Term:
    """A named expression without a state of its own; one tree for each component."""

    name: str
    type: Type
    size: int | None
    unit: Unit
    exprs: tuple[Node, ...]
    span: Span
    text: str


@dataclass(frozen=True, slots=True)
class Table:
    """A curve: linear between points with rising x, held beyond the ends."""

    name: str
    x: tuple[Fraction, ...]
    y: tuple[Fraction, ...]
    x_unit: Unit
    y_unit: Unit
    span: Span


@dataclass(frozen=True, slots=True)
class Grid:
    """A table of two inputs: bilinear between points with rising x and rising y, held beyond the ends of each.

    `z` has a row for each x, and in it a value for each y.
    """

    name: str
    x: tuple[Fraction, ...]
    y: tuple[Fraction, ...]
    z: tuple[tuple[Fraction, ...], ...]
    x_unit: Unit
    y_unit: Unit
    z_unit: Unit
    span: Span


@dataclass(frozen=True, slots=True)
class Assign:
    """A value for one component of a state: a new value, or in a flow map its rate per second."""

    state: str
    index: int | None
    expr: Node
    span: Span
    text: str


@dataclass(frozen=True, slots=True)
class Jump:
    """A named jump: condition (the jump set) and new values (the jump map). Order in the law is priority."""

    name: str
    condition: Node
    text: str
    """The condition as the author wrote it."""
    span: Span
    """Where the condition stands."""
    name_span: Span
    assigns: tuple[Assign, ...]
    keep: tuple[str, ...]
    note: str


@dataclass(frozen=True, slots=True)
class Flow:
    """The flow condition (None: wherever no jump condition holds), the rates, and the integration method."""

    condition: Node | None
    text: str
    span: Span
    rates: tuple[Assign, ...]
    method: str
    """auto | exact | euler | heun | rk4"""


@dataclass(frozen=True, slots=True)
class Output:
    """A value for the actuators or the log."""

    name: str
    type: Type
    size: int | None
    unit: Unit
    exprs: tuple[Node, ...]
    low: Fraction | None
    high: Fraction | None
    limit: bool
    about: str
    span: Span
    text: str


class ClaimKind(StrEnum):
    """What kind of promise the author wants proved."""

    ALWAYS = "always"
    BETWEEN = "between"
    LEAVES = "leaves"
    FALLS = "falls"
    BUMP = "bump"


@dataclass(frozen=True, slots=True)
class Claim:
    """A claim: `expr` is the condition or potential, `names` the jumps or the output, `bound` the time or size."""

    name: str
    kind: ClaimKind
    expr: Node | None
    exception: Node | None
    names: tuple[str, ...]
    bound: Fraction | None
    span: Span
    text: str


@dataclass(frozen=True, slots=True)
class Assumption:
    """A condition on inputs and parameters that proofs may use."""

    condition: Node
    span: Span
    text: str


@dataclass(frozen=True, slots=True)
class Law:
    """A hybrid feedback law."""

    name: str
    about: str
    step: Fraction
    """seconds"""
    number: str
    thresholds: str
    """safe | nearest"""
    prefer: str
    """jump | flow"""
    jumps_per_step: int | None
    inputs: tuple[Input, ...]
    parameters: tuple[Parameter, ...]
    states: tuple[State, ...]
    terms: tuple[Term, ...]
    """In an order in which each uses only earlier ones."""
    tables: tuple[Table | Grid, ...]
    flow: Flow
    sample: tuple[Assign, ...]
    jumps: tuple[Jump, ...]
    outputs: tuple[Output, ...]
    claims: tuple[Claim, ...]
    assume: tuple[Assumption, ...]
    file: str
    """The file's name without its folder."""
    digest: str
    """SHA-256 of the file's bytes, in hexadecimal."""
    notes: tuple[object, ...] = ()
    """Findings of reading that are no errors."""

    def input(self, name: str) -> Input:
        """The input with this name."""
        return _named(self.inputs, name)

    def parameter(self, name: str) -> Parameter:
        """The parameter with this name."""
        return _named(self.parameters, name)

    def state(self, name: str) -> State:
        """The state with this name."""
        return _named(self.states, name)

    def term(self, name: str) -> Term:
        """The term with this name."""
        return _named(self.terms, name)

    @property
    def tunables(self) -> tuple[Parameter, ...]:
        """The parameters of the parameter struct."""
        return tuple(p for p in self.parameters if p.tunable)


_Named = TypeVar("_Named", Input, Parameter, State, Term)


def _named(items: tuple[_Named, ...], name: str) -> _Named:
    return next(item for item in items if item.name == name)
