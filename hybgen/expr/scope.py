"""What a name may mean where an expression stands."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction

from hybgen.expr.core import RefKind, Type
from hybgen.expr.units import ONE, Unit


@dataclass(frozen=True, slots=True)
class Symbol:
    """A declared quantity.

    `shape` is () for a scalar, (n,) for a vector, (m, n) for a matrix; `constant` the exact components of a
    parameter that is not tunable; `bounds` the range of an integer; `values` the members of an integer logic
    variable; `timer` a timer state; `jumped` a term that uses jumped().
    """

    kind: RefKind
    name: str
    type: Type
    shape: tuple[int, ...] = ()
    unit: Unit = ONE
    constant: tuple[Fraction | int | bool, ...] | None = None
    bounds: tuple[Fraction, Fraction] | None = None
    timer: bool = False
    values: tuple[int, ...] = ()
    jumped: bool = False


@dataclass(frozen=True, slots=True)
class Lookup:
    """A table as a function: the units of its inputs (one or two) and of its value."""

    name: str
    takes: tuple[Unit, ...]
    gives: Unit


@dataclass(frozen=True, slots=True)
class Scope:
    """The names that an expression may use; `allow` says which kinds, VALID and JUMPED included."""

    symbols: Mapping[str, Symbol]
    tables: Mapping[str, Lookup] = field(default_factory=dict)
    jumps: tuple[str, ...] = ()
    allow: frozenset[RefKind] = frozenset(RefKind)
    place: str = "here"
    """Where the expression stands, for messages: `in a jump condition`."""
