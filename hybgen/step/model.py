"""The step law: one step of a law at a fixed period in one number format, as data.

Every constant is exactly representable in the format; timers are whole steps (int); every expression is a
tree of hybgen.expr.core over inputs, tunable parameters, states and the step law's own definitions. All
definitions are pure functions of the state and of this step's snapshot, so a phase may evaluate any of them
at the state it sees: while jumping, that is the state reached so far; for outputs and flow, the state after
the last jump.

Meaning of one step (LANGUAGE, section 2):

1. snapshot: bad samples become what `StepInput` says (status INVALID_INPUT). If `rules` are broken by the
   parameters handed in, the defaults are used for this step (status PARAMETER). `alarms` that are not finite
   set NON_FINITE.
2. while a jump is due and fewer than `jumps_per_step` were taken: take it. A jump is due: the first of
   `jumps` in order whose condition holds; under `prefer: flow` only where `flow_condition` does not hold.
   If one is still due afterwards: status JUMP_LIMIT.
3. outputs, from the state and the snapshot.
4. flow (`flow`, then every timer counts one step up to its maximum) if there is no flow condition or it
   holds; else, if no jump is due, status STUCK. `sample` states take their new values in either case. All new
   values are computed from the values before any of them is stored.

A guarded assignment whose new value is not finite keeps the old value (status NON_FINITE).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from enum import IntFlag
from fractions import Fraction

from hybgen.diag.finding import Finding
from hybgen.diag.span import Span
from hybgen.expr.core import Node, RefKind, Type
from hybgen.law.model import Law, StateKind, Value
from hybgen.numbers.format import Format
from hybgen.step.quantity import upward


class Status(IntFlag):
    """The status bits that a step returns."""

    INVALID_INPUT = 1
    JUMP_LIMIT = 2
    STUCK = 4
    NON_FINITE = 8
    PARAMETER = 16


@dataclass(frozen=True, slots=True)
class StepInput:
    """An input and what becomes of a bad sample. A number is good if low <= u <= high (NaN is not)."""

    name: str
    type: Type
    size: int | None
    low: Value
    high: Value
    """Representable; meaningless for bool, which is always good."""
    invalid: str
    """hold: the last good sample (a vector as a whole) | clamp: NaN and infinities as hold, else the nearest
    end of the range, each component for itself | value: `substitute`"""
    substitute: Value
    initial: Value
    """What `hold` holds before the first good sample (each component)."""
    span: Span
    scaled: bool = False
    """A raw value of fixed point: NO_NUMBER stands for NaN and infinities."""

    @property
    def held(self) -> bool:
        """Does the instance have to remember the last good sample?"""
        real = self.type.kind == "real" or self.scaled
        return (real and self.invalid in ("hold", "clamp")) or (self.type.kind == "int" and self.invalid == "hold")


@dataclass(frozen=True, slots=True)
class StepParameter:
    """A tunable parameter: a field of the parameter struct."""

    name: str
    type: Type
    size: int | None
    """Number of components (row-major) of a vector or matrix, None for a scalar."""
    default: tuple[Value, ...]
    low: Value | None
    high: Value | None
    span: Span


@dataclass(frozen=True, slots=True)
class Rule:
    """A condition that the parameters have to meet; the number of the first broken one is reported."""

    condition: Node
    text: str
    """Such as `0.25 m <= high <= 0.5 m`."""
    span: Span


@dataclass(frozen=True, slots=True)
class StepState:
    """A state; a timer's initial value and maximum are whole steps."""

    name: str
    kind: StateKind
    type: Type
    size: int | None
    values: tuple[str, ...] | tuple[int, ...]
    initial: tuple[Value, ...]
    maximum: int | None
    span: Span
    low: int | None = None
    high: int | None = None
    """Fixed point: the raw values that a real state can have; else None."""


@dataclass(frozen=True, slots=True)
class StepTable:
    """A curve in the format: y[i] + slope[i] * (x - x[i]) for x[i] <= x < x[i+1]; y[0] for x <= x[0]; y[-1] for
    x >= x[-1]; NaN for NaN. Slopes are those between the rounded points."""

    name: str
    x: tuple[Fraction, ...]
    y: tuple[Fraction, ...]
    slope: tuple[Fraction, ...]
    span: Span


@dataclass(frozen=True, slots=True)
class StepGrid:
    """A table of two inputs in the format; at (u, v), each operation rounded once, in this order:

    1. along x, i is the last point with x[i] <= u. Between the ends: k = i + 1, s = (u - x[i]) * per_x[i].
       Below x[0] and at it i = k = 0, from x[-1] on both are the last point, and s = 0.
    2. along y likewise, from v: j, l, t = (v - y[j]) * per_y[j].
    3. low = z[i][j] + s * (z[k][j] - z[i][j]); high = z[i][l] + s * (z[k][l] - z[i][l]).
    4. low + t * (high - low).

    per_x[i] is the rounded inverse of the rounded x[i+1] - x[i], never so large that s could exceed 1. So the value is
    exact at the points and where the corners around it are equal, held beyond the ends (infinities too), NaN if u or v
    is NaN, and leaves the hull of the corners by less than 8 * 2**-precision of their largest magnitude: at s = 1 the
    rounding of z[k][j] - z[i][j] and of the sum make up to 3 of them, and the same once more along y.
    """

    name: str
    x: tuple[Fraction, ...]
    y: tuple[Fraction, ...]
    z: tuple[tuple[Fraction, ...], ...]
    """A row for each x."""
    per_x: tuple[Fraction, ...]
    per_y: tuple[Fraction, ...]
    span: Span


@dataclass(frozen=True, slots=True)
class Definition:
    """A named intermediate value (a term, or a stage of the integrator); Ref(LOCAL, name) reads it."""

    name: str
    expr: Node
    span: Span
    text: str
    """What the author wrote for it, or what it is (`rate of depth at half the step`)."""


@dataclass(frozen=True, slots=True)
class StepAssign:
    """A new value for one component of a state.

    `guarded`: a value that is not finite is not taken. `clamp`: then held inside [low, high] (the op
    clamp or iclamp; for a count [0, maximum], for a timer likewise).
    """

    state: str
    index: int | None
    expr: Node
    guarded: bool
    clamp: tuple[Value, Value] | None
    span: Span
    text: str


@dataclass(frozen=True, slots=True)
class ConditionBound:
    """What rounding does to one computed comparison of a jump condition.

    The comparison never holds where the law's (in real numbers, at the sampled inputs and the stored state) does not, and
    holds at the latest where the law's holds with `margin`. Valid inside the declared ranges (`within` says which of them
    nothing enforces). Times are whole steps in the law too.
    """

    jump: str
    span: Span
    error: float | None
    """The largest rounding error where it matters; None: no bound, and the comparison is as the author wrote it."""
    margin: float | None
    """None with a known error: a divisor near 0 or the like leaves the delay without a bound."""
    never: bool
    """Is it moved further than it can ever hold by?"""
    why: str
    """Why there is no bound."""
    text: str = ""
    """The comparison as the author wrote it."""
    unit: str | None = None
    """Of error and margin; None where constants leave it open."""
    within: str = ""
    noise: float | None = None
    """What noise and resolution of the samples can do to it at most; None where none is declared."""
    gap: tuple[str, float] | None = None
    """The jump with the opposite comparison, and the distance between both (at the default parameters)."""


@dataclass(frozen=True, slots=True)
class StepJump:
    """A jump; `number` counts from 1 in the listed order."""

    name: str
    number: int
    condition: Node
    """In negation normal form: a NaN makes no comparison true."""
    assigns: tuple[StepAssign, ...]
    flagged: bool
    """Does an output, sample or flow expression ask jumped(name)?"""
    span: Span
    text: str


@dataclass(frozen=True, slots=True)
class StepOutput:
    """One component of an output.

    `guarded`: a value that is not finite becomes `fallback` (status NON_FINITE); then `clamp`.
    """

    name: str
    index: int | None
    expr: Node
    guarded: bool
    fallback: Value
    clamp: tuple[Value, Value] | None
    span: Span
    text: str


@dataclass(frozen=True, slots=True)
class StepLaw:
    """One step of a law."""

    law: Law
    format: Format
    step: Fraction
    """seconds"""
    method: str
    """The integration method in effect: none | exact | euler | heun | rk4"""
    jumps_per_step: int
    inputs: tuple[StepInput, ...]
    parameters: tuple[StepParameter, ...]
    rules: tuple[Rule, ...]
    states: tuple[StepState, ...]
    tables: tuple[StepTable | StepGrid, ...]
    definitions: tuple[Definition, ...]
    """Each uses only earlier ones."""
    alarms: tuple[Node, ...]
    jumps: tuple[StepJump, ...]
    flow_condition: Node | None
    outputs: tuple[StepOutput, ...]
    flow: tuple[StepAssign, ...]
    sample: tuple[StepAssign, ...]
    places: Mapping[tuple[RefKind, str], int] = field(default_factory=dict)
    """Fixed point: binary places of inputs, parameters, states and outputs (value = raw * 2**-places); else empty."""
    bounds: tuple[ConditionBound, ...] = ()
    """One for each computed comparison of a jump condition."""
    notes: tuple[Finding, ...] = ()
    """What the step changes that the author should know (times that are no whole number of steps)."""

    def rounding(self, jump: str) -> str:
        """What the comment above a jump's condition adds: nothing where rounding can't mistake it."""
        mine = [b for b in self.bounds if b.jump == jump]
        if any(b.error is None for b in mine):
            return "; rounding without a bound"
        if not mine:
            return ""
        error = max(b.error or 0.0 for b in mine)
        if any(b.margin is None for b in mine):
            return f"; rounding at most {upward(error, 2)}, without a bound of the delay"
        margin = max(b.margin or 0.0 for b in mine)
        return f"; rounding at most {upward(error, 2)}, jumps at the latest {upward(margin, 2)} beyond"

    def roots(self) -> Iterator[Node]:
        """The expressions that are computed for their own sake: alarms, conditions, new values, outputs."""
        yield from self.alarms
        for jump in self.jumps:
            yield jump.condition
            yield from (a.expr for a in jump.assigns)
        if self.flow_condition is not None:
            yield self.flow_condition
        yield from (o.expr for o in self.outputs)
        yield from (a.expr for a in (*self.flow, *self.sample))

    def trees(self) -> Iterator[Node]:
        """Every expression: rules and definitions too."""
        yield from (r.condition for r in self.rules)
        yield from (d.expr for d in self.definitions)
        yield from self.roots()
