"""A step law with exact constants -> the same in fixed point: every real number becomes a raw integer with binary places.

The places of inputs, parameters and states come from their ranges, those of results from interval arithmetic (scaled.py). What
is stored is rounded to the places of the state and held; so every leaf's interval is enforced by the program itself.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from fractions import Fraction

from hybgen.diag.finding import Findings
from hybgen.diag.span import Span
from hybgen.expr.core import INT, REAL, Const, Node, Op, Ref, RefKind, integer, op
from hybgen.law.model import Law, Value
from hybgen.numbers.bounds import Bounds
from hybgen.step.elaborate import Elaborator, Key, Leaf
from hybgen.step.model import (
    Definition,
    Rule,
    StepAssign,
    StepInput,
    StepJump,
    StepLaw,
    StepOutput,
    StepParameter,
    StepState,
)
from hybgen.step.scaled import (
    MOST,
    Refused,
    Scaled,
    raw,
    rescaled,
    room,
)


def in_fixed_point(made: StepLaw, bounds: Bounds, findings: Findings) -> StepLaw:
    """The step law on raw integers; findings where a range is missing, nothing fits, or an operation is not defined everywhere."""
    leaves = _leaves(made, findings)
    findings.stop()
    return _Fixed(made, leaves, Elaborator(made, bounds, findings, leaves, {})).built()


def _leaves(made: StepLaw, findings: Findings) -> dict[Key, Leaf]:
    """(places, lowest raw, highest raw) of inputs, parameters and states."""
    found: dict[Key, Leaf] = {}
    for u in made.inputs:
        if u.type == REAL:
            held = [Fraction(u.initial), Fraction(u.substitute)]
            found[(RefKind.INPUT, u.name)] = _between(Fraction(u.low), Fraction(u.high), u.name, u.span, findings, held)
    for p in made.parameters:
        if p.type == REAL:
            ends = (min(map(Fraction, p.default)), max(map(Fraction, p.default)))
            low, high = (Fraction(e if v is None else v) for v, e in zip((p.low, p.high), ends, strict=True))
            found[(RefKind.PARAMETER, p.name)] = _between(low, high, p.name, p.span, findings, [])
    for x in made.states:
        if x.type == REAL:
            found[(RefKind.STATE, x.name)] = _state(x, made.law, findings)
    return found


def _state(x: StepState, law: Law, findings: Findings) -> tuple[int, int, int]:
    """A state that is not limited may reach every raw value: it gets room for twice its range."""
    declared = law.state(x.name)
    assert declared.low is not None and declared.high is not None, "every real state has a range"
    if declared.limit:
        return _between(declared.low, declared.high, x.name, x.span, findings, [])
    places, _, _ = _between(2 * declared.low, 2 * declared.high, x.name, x.span, findings, [])
    return places, -MOST, MOST


def _between(
    low: Fraction, high: Fraction, name: str, span: Span, findings: Findings, others: list[Fraction]
) -> tuple[int, int, int]:
    """Ends are rounded inward, other values to the nearest."""
    try:
        places = room(max(abs(v) for v in (low, high, *others)))
    except Refused as refused:
        findings.error("HG421", span, f"'{name}' does not fit fixed32: {refused}", hint="use another unit")
        return 0, 0, 0
    unit = Fraction(2) ** places
    raws = [math.ceil(low * unit), math.floor(high * unit), *(raw(v, places) for v in others)]
    return places, min(raws), max(raws)


@dataclass(frozen=True, slots=True)
class _Fixed:
    """The elaboration of one step law."""

    made: StepLaw
    leaves: Mapping[Key, Leaf]
    expressions: Elaborator

    def built(self) -> StepLaw:
        made = self.made
        for d in made.definitions:
            self.expressions.more.append(self.definition(d))
        outputs = tuple(self.output(o) for o in made.outputs)
        fixed = replace(
            made,
            inputs=tuple(self.input(u) for u in made.inputs),
            parameters=tuple(self.parameter(p) for p in made.parameters),
            rules=tuple(Rule(self.expressions.condition(r.condition), r.text, r.span) for r in made.rules),
            states=tuple(self.state(x) for x in made.states),
            alarms=(),
            jumps=tuple(self.jump(j) for j in made.jumps),
            flow_condition=None if made.flow_condition is None else self.expressions.condition(made.flow_condition),
            outputs=tuple(o for o, _ in outputs),
            flow=tuple(self.assign(a) for a in made.flow),
            sample=tuple(self.assign(a) for a in made.sample),
            law=replace(
                made.law, outputs=tuple(replace(o, type=INT if o.type == REAL else o.type) for o in made.law.outputs)
            ),
            places={k: v[0] for k, v in self.leaves.items()}
            | {(RefKind.OUTPUT, o.name): places for o, places in outputs if places is not None},
        )
        self.expressions.findings.stop()
        return replace(
            fixed,
            definitions=tuple(self.expressions.more),
            tables=(),
            bounds=tuple(dict.fromkeys(self.expressions.records)),
        )

    # ------------------------------------------------------------------ declarations

    def input(self, u: StepInput) -> StepInput:
        if u.type != REAL:
            return u
        places, _, _ = self.leaves[(RefKind.INPUT, u.name)]
        unit = Fraction(2) ** places
        low, high = math.ceil(Fraction(u.low) * unit), math.floor(Fraction(u.high) * unit)
        given, initial = (raw(Fraction(v), places) for v in (u.substitute, u.initial))
        return replace(u, type=INT, low=low, high=high, substitute=given, initial=initial)

    def parameter(self, p: StepParameter) -> StepParameter:
        if p.type != REAL:
            return p
        places, low, high = self.leaves[(RefKind.PARAMETER, p.name)]
        default = tuple(max(low, min(high, raw(Fraction(v), places))) for v in p.default)
        return replace(p, type=INT, default=default, low=low, high=high)

    def state(self, x: StepState) -> StepState:
        if x.type != REAL:
            return x
        places, low, high = self.leaves[(RefKind.STATE, x.name)]
        return replace(x, type=INT, initial=tuple(max(low, min(high, raw(Fraction(v), places))) for v in x.initial))

    def definition(self, d: Definition) -> Definition:
        if d.expr.type == REAL:
            value = self.expressions.real(d.expr)
            named = Ref(RefKind.LOCAL, d.name, INT, None, d.span)
            self.expressions.locals[d.name] = replace(value, node=named)
            return replace(d, expr=value.node)
        return replace(d, expr=self.expressions.other(d.expr))

    def jump(self, j: StepJump) -> StepJump:
        if self.made.law.thresholds == "safe":
            self.expressions.asking = j.name
        condition = self.expressions.condition(j.condition)
        self.expressions.asking = ""
        return replace(j, condition=condition, assigns=tuple(self.assign(a) for a in j.assigns))

    def assign(self, a: StepAssign) -> StepAssign:
        if a.expr.type != REAL:
            return replace(a, expr=self.expressions.other(a.expr))
        places, low, high = self.leaves[(RefKind.STATE, a.state)]
        ends = (low, high)
        expr = self.stored(self.expressions.held(a.expr, places), places, ends, a.span)
        inside = self.made.law.state(a.state).limit and a.clamp is not None
        return replace(a, expr=expr, guarded=False, clamp=(low, high) if inside else None)

    def stored(self, value: Scaled, places: int, ends: tuple[int, int], span: Span) -> Node:
        """A choice is rounded branch by branch: a branch that is the state itself stays as it is; constants are inside the ends."""
        node = value.node
        if isinstance(node, Op) and node.op == "select":
            asked, yes, no = node.args
            parts = [self.stored(replace(value, node=n), places, ends, span) for n in (yes, no)]
            return op("select", asked, *parts, span=span)
        if isinstance(node, Op) and node.op == "fixed_scale" and isinstance(node.args[1], Const):
            back = node.args[0]
            if value.places - int(node.args[1].value) == places and int(node.args[1].value) >= 0:
                return back
        node = rescaled(value, places, span).node
        if isinstance(node, Const):
            return integer(min(max(int(node.value), ends[0]), ends[1]), span)
        return node

    def output(self, o: StepOutput) -> tuple[StepOutput, int | None]:
        if o.expr.type != REAL:
            return replace(o, expr=self.expressions.other(o.expr)), None
        value = self.expressions.real(o.expr)
        low, high = -MOST, MOST
        clamp: tuple[Value, Value] | None = None
        places = value.places
        if o.clamp is not None:
            ends = [Fraction(c) for c in o.clamp]
            places = room(max(abs(e) for e in ends))
            low, high = math.ceil(ends[0] * Fraction(2) ** places), math.floor(ends[1] * Fraction(2) ** places)
            clamp = (low, high)
        node = self.stored(value, places, (low, high), o.span)
        return replace(o, expr=node, guarded=False, fallback=0, clamp=clamp), places
