"""The declarations of a law in a number format: inputs, parameters, states, rules."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from hybgen.expr.core import INT, REAL, Kind, Node, Ref, RefKind, Type, integer, op, real
from hybgen.law.model import Law, Parameter, State, StateKind, Value
from hybgen.numbers.format import LARGEST_COUNT
from hybgen.step.model import Rule, StepInput, StepParameter, StepState
from hybgen.step.translate import Translator, component


def value_of(value: Value, type_: Type, translator: Translator) -> Value:
    """A declared value as the format has it."""
    match type_.kind:
        case Kind.REAL:
            return translator.rounded(Fraction(value))
        case Kind.BOOL:
            return bool(value)
        case _:
            return int(value)


def inputs(law: Law, translator: Translator) -> tuple[StepInput, ...]:
    """The inputs."""
    made = []
    for u in law.inputs:
        low, high, substitute = (
            value_of(v if v is not None else u.initial, u.type, translator) for v in (u.low, u.high, u.substitute)
        )
        made.append(
            StepInput(
                u.name,
                u.type,
                u.size,
                low,
                high,
                u.invalid,
                substitute,
                value_of(u.initial, u.type, translator),
                u.span,
            )
        )
    return tuple(made)


def parameters(law: Law, translator: Translator) -> tuple[StepParameter, ...]:
    """The tunable parameters."""
    made = []
    for p in law.tunables:
        low, high = (None if v is None else value_of(v, p.type, translator) for v in (p.low, p.high))
        made.append(
            StepParameter(
                p.name,
                p.type,
                len(p.value) if p.shape else None,
                tuple(value_of(v, p.type, translator) for v in p.value),
                low,
                high,
                p.span,
            )
        )
    return tuple(made)


def maximum(state: State, translator: Translator) -> int:
    """Where a timer (in steps) or a count holds."""
    assert state.maximum is not None
    if state.kind is StateKind.TIMER:
        exact = state.maximum * state.unit.scale / translator.step
        steps = -((-exact.numerator) // exact.denominator)
        if steps > LARGEST_COUNT:
            days = float(LARGEST_COUNT * translator.step / 86400)
            translator.findings.error(
                "HG404",
                state.span,
                f"timer '{state.name}' needs {steps} steps: a 32-bit count of steps of "
                f"{float(translator.step):.9g} s ends after {days:.6g} d",
                hint="use a longer step or a shorter timer",
            )
        return min(steps, LARGEST_COUNT)
    return min(int(state.maximum), LARGEST_COUNT)


def state_range(state: State, translator: Translator) -> tuple[Fraction, Fraction] | None:
    """The range that the program itself keeps a state in."""
    match state.kind:
        case StateKind.REAL if state.limit and state.low is not None and state.high is not None:
            return state.low, state.high
        case StateKind.TIMER | StateKind.COUNT:
            return Fraction(0), Fraction(maximum(state, translator))
        case StateKind.LOGIC if state.type == INT:
            whole = [int(v) for v in state.values]
            return Fraction(min(whole)), Fraction(max(whole))
        case _:
            return None


def states(law: Law, translator: Translator) -> tuple[StepState, ...]:
    """The states."""
    made = []
    for x in law.states:
        top = maximum(x, translator) if x.kind in (StateKind.TIMER, StateKind.COUNT) else None
        if x.kind is StateKind.TIMER:
            assert top is not None
            initial: tuple[Value, ...] = tuple(
                max(0, min(top, translator.steps(Fraction(v), x.unit, x.span))) for v in x.initial
            )
            type_ = INT
        else:
            initial, type_ = tuple(value_of(v, x.type, translator) for v in x.initial), x.type
        made.append(StepState(x.name, x.kind, type_, x.size, x.values, initial, top, x.span))
    return tuple(made)


def range_rules(law: Law, translator: Translator) -> Iterator[Rule]:
    """low <= parameter <= high for each component of each tunable number."""
    for p in law.tunables:
        if p.low is None or p.high is None or p.type.kind is Kind.BOOL:
            continue
        for i in range(len(p.value)):
            index = i if p.shape else None
            name = component(p.name, index)
            yield Rule(_inside(p, index, translator), f"{_text(p.low)} <= {name} <= {_text(p.high)}{_unit(p)}", p.span)


def _inside(p: Parameter, index: int | None, translator: Translator) -> Node:
    ref = Ref(RefKind.PARAMETER, p.name, p.type, index, p.span)
    assert p.low is not None and p.high is not None
    if p.type == REAL:
        low: Node = real(translator.rounded(p.low))
        high: Node = real(translator.rounded(p.high))
    else:
        low, high = integer(int(p.low)), integer(int(p.high))
    return op("and", op("ge", ref, low), op("le", ref, high))


def _text(value: Fraction) -> str:
    return f"{float(value):.9g}"


def _unit(p: Parameter) -> str:
    return "" if p.unit.plain else f" {p.unit}"
