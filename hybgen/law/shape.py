"""The keys of a law file: one table, from which both the structural check and the JSON Schema come."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

PIECE = r"[\[\](){}<>=!+*/,.@ ]|^[0-9-]"
"""A key that looks so and has no value is a piece of an expression that YAML has cut at a comma (the same in Python and
in ECMA 262, for the schema)."""


@dataclass(frozen=True, slots=True)
class Text:
    """A text for people."""


@dataclass(frozen=True, slots=True)
class Word:
    """One of some words."""

    words: tuple[str, ...]
    later: tuple[str, ...] = ()
    """Words of the language that are not available yet."""


@dataclass(frozen=True, slots=True)
class Flag:
    """true or false."""


@dataclass(frozen=True, slots=True)
class Whole:
    """A whole number above zero, without unit."""


@dataclass(frozen=True, slots=True)
class Value:
    """A constant, a logic value, or (where `deep`) a list of constants, or a list of such lists."""

    deep: bool = False


@dataclass(frozen=True, slots=True)
class Pair:
    """[low, high]"""


@dataclass(frozen=True, slots=True)
class Words:
    """A list of words."""


@dataclass(frozen=True, slots=True)
class Expression:
    """An expression: text, cases, or a list (a vector)."""


@dataclass(frozen=True, slots=True)
class Later:
    """Not available yet."""


@dataclass(frozen=True, slots=True)
class Named:
    """Any names, each with a value of one kind."""

    item: Kind


@dataclass(frozen=True, slots=True)
class Listed:
    """A list of values of one kind."""

    item: Kind


@dataclass(frozen=True, slots=True)
class Record:
    """Known keys."""

    fields: Mapping[str, Field]


@dataclass(frozen=True, slots=True)
class Either:
    """A short form (no keys), or the full form."""

    short: Value
    full: Record


Kind = Text | Word | Flag | Whole | Value | Pair | Words | Expression | Later | Named | Listed | Record | Either


@dataclass(frozen=True, slots=True)
class Field:
    """One key."""

    kind: Kind
    about: str
    required: bool = False
    excludes: tuple[str, ...] = field(default=())
    """Keys that have no meaning beside it."""
    needs: tuple[str, ...] = field(default=())
    """Keys without which it has no meaning."""


_UNIT = Field(Text(), "unit of the quantity, with its scale: m, mm, V/K, degC; left out: dimensionless")
_ABOUT = Field(Text(), "one line for people")
_RANGE = Field(Pair(), "[low, high]: the declared range")
_LIMIT = Field(Flag(), "true: hold the value inside its range")
_VECTOR = Field(Whole(), "number of components of a vector")

_INPUT = Record(
    {
        "unit": _UNIT,
        "about": _ABOUT,
        "range": _RANGE,
        "vector": _VECTOR,
        "type": Field(Word(("real", "bool", "integer")), "real (left out), bool or integer"),
        "noise": Field(Value(), "peak bound of the disturbance on the sample"),
        "resolution": Field(Value(), "quantum of the sample"),
        "rate": Field(Value(), "largest slope, per second"),
        "invalid": Field(Value(), "what a bad sample becomes: hold (left out), clamp, or a value"),
        "initial": Field(Value(), "last valid sample before the first one; left out: the middle of the range"),
        "angle": Field(Later(), "on the circle"),
    }
)
_PARAMETER = Record(
    {
        "value": Field(Value(deep=True), "the (default) value: a number, list or list of lists", required=True),
        "unit": _UNIT,
        "about": _ABOUT,
        "range": _RANGE,
        "type": Field(Word(("real", "bool", "integer")), "real (left out), bool or integer"),
        "tunable": Field(Flag(), "true: a field of the parameter struct, may change at run time inside its range"),
    }
)
_REAL_ONLY = ("range", "limit", "vector", "unit")
_STATE = Record(
    {
        "about": _ABOUT,
        "logic": Field(
            Words(),
            "a logic variable: its value names, or its whole numbers",
            excludes=("timer", "count", "type", *_REAL_ONLY),
        ),
        "timer": Field(
            Value(),
            "time since it was last set; counts whole steps and holds here",
            excludes=("count", "type", *_REAL_ONLY),
        ),
        "count": Field(Value(), "a whole number from 0 that holds here", excludes=("type", *_REAL_ONLY)),
        "type": Field(Word(("bool", "real")), "bool, or real (left out)"),
        "unit": _UNIT,
        "range": _RANGE,
        "limit": _LIMIT,
        "vector": _VECTOR,
        "initial": Field(Value(deep=True), "value after init; left out: 0, false, the first logic value"),
        "angle": Field(Later(), "on the circle"),
        "unit_vector": Field(Later(), "on the sphere"),
    }
)
_TABLE = Record(
    {
        "x": Field(Value(deep=True), "rising points of the (first) input", required=True),
        "y": Field(
            Value(deep=True), "values at these points; beside z: rising points of the second input", required=True
        ),
        "z": Field(Value(deep=True), "values of a table of two inputs: a row for each x, in it a value for each y"),
        "x_unit": _UNIT,
        "y_unit": _UNIT,
        "z_unit": Field(_UNIT.kind, _UNIT.about, needs=("z",)),
        "about": _ABOUT,
    }
)
_TERM = Record({"value": Field(Expression(), "the expression", required=True), "unit": _UNIT, "about": _ABOUT})
_FLOW = Record(
    {
        "set": Field(Expression(), "the flow condition; left out: wherever no jump condition holds"),
        "map": Field(Named(Expression()), "state: rate of change per second"),
        "method": Field(
            Word(("auto", "euler", "heun", "rk4", "exact")),
            "integration method; auto: exact for an affine map, else rk4",
        ),
    }
)
_JUMP = Record(
    {
        "set": Field(Expression(), "the jump condition", required=True),
        "map": Field(Named(Expression()), "state: new value, all computed from the old ones"),
        "keep": Field(Words(), "states left alone on purpose"),
        "note": Field(Text(), "for people"),
    }
)
_OUTPUT = Record(
    {
        "value": Field(Expression(), "the expression", required=True),
        "unit": _UNIT,
        "about": _ABOUT,
        "range": _RANGE,
        "limit": _LIMIT,
        "type": Field(Word(("real", "bool", "integer")), "left out: the type of the value"),
    }
)
_CLAIM_KINDS = ("always", "between", "leaves", "falls", "bump")
_CLAIM = Record(
    {
        "always": Field(Expression(), "a condition that always holds", excludes=_CLAIM_KINDS[1:]),
        "between": Field(
            Words(), "[jump, jump]: with at_least, the shortest time between the two", excludes=_CLAIM_KINDS[2:]
        ),
        "at_least": Field(Value(), "a time"),
        "leaves": Field(Expression(), "a condition that ends within a time", excludes=_CLAIM_KINDS[3:]),
        "within": Field(Value(), "a time"),
        "falls": Field(
            Expression(), "a potential that decreases along flows and across jumps", excludes=_CLAIM_KINDS[4:]
        ),
        "except": Field(Expression(), "where it need not fall"),
        "bump": Field(Text(), "an output; with at_most, its largest step across a jump"),
        "at_most": Field(Value(), "a size"),
        "note": Field(Text(), "for people"),
    }
)

LAW = Record(
    {
        "law": Field(Text(), "a C identifier; prefix of every file and symbol", required=True),
        "about": _ABOUT,
        "step": Field(Value(), "the fixed step", required=True),
        "number": Field(Word(("float32", "float64", "fixed32")), "number format of the C; left out: float32"),
        "thresholds": Field(
            Word(("safe", "nearest")), "safe (left out): thresholds are rounded so that rounding never causes a jump"
        ),
        "prefer": Field(
            Word(("jump", "flow")),
            "jump (left out): jump as soon as a jump condition holds; flow: only outside the flow set",
        ),
        "jumps_per_step": Field(
            Whole(), "most jumps in one step; left out: the number that the check shows to be enough"
        ),
        "inputs": Field(Named(_INPUT), "measured signals, sampled once a step"),
        "parameters": Field(
            Named(Either(Value(deep=True), _PARAMETER)), "constants, and (tunable) what may change at run time"
        ),
        "states": Field(Named(_STATE), "the memory of the law"),
        "terms": Field(Named(Either(Value(), _TERM)), "named expressions without a state of their own"),
        "tables": Field(Named(_TABLE), "curves and tables of two inputs: linear between points, held beyond the ends"),
        "flow": Field(_FLOW, "what happens between jumps"),
        "sample": Field(Named(Expression()), "state: expression, taken once at the end of each step"),
        "jumps": Field(Named(_JUMP), "listed order is priority"),
        "outputs": Field(Named(Either(Value(), _OUTPUT)), "values for the actuators and the log"),
        "claims": Field(Named(_CLAIM), "what the author wants proved"),
        "assume": Field(Listed(Expression()), "conditions on inputs and parameters that proofs may use"),
        "parts": Field(Later(), "named instances of other law files"),
    }
)
