"""A step law with exact constants -> the same in fixed point: every real number becomes a raw integer with binary places.

The places of inputs, parameters and states come from their ranges, those of results from interval arithmetic (scaled.py). What
is stored is rounded to the places of the state and held; so every leaf's interval is enforced by the program itself.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from fractions import Fraction

from hybgen.diag.finding import Findings
from hybgen.diag.span import Span
from hybgen.expr.core import FALSE, INT, REAL, TRUE, Const, Node, Op, Ref, RefKind, integer, op, truth
from hybgen.expr.fold import decide
from hybgen.kernels.word import ELEMENTARY
from hybgen.law.model import Law, Value
from hybgen.numbers.bounds import Bounds, Range
from hybgen.step import resolution
from hybgen.step.curves import curve, grid
from hybgen.step.functions import elementary, picked
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
    StepTable,
)
from hybgen.step.scaled import (
    MOST,
    Refused,
    Scaled,
    added,
    chosen,
    constant,
    divided,
    multiplied,
    ordered,
    raw,
    rescaled,
    room,
)

Key = tuple[RefKind, str]
_REALS = ("lt", "le", "gt", "ge")


def in_fixed_point(made: StepLaw, bounds: Bounds, findings: Findings) -> StepLaw:
    """The step law on raw integers; findings where nothing fits, or an operation is not defined everywhere."""
    leaves = _leaves(made, findings)
    findings.stop()
    fixed = _Fixed(made, bounds, findings, leaves, {})
    return fixed.built()


def _leaves(made: StepLaw, findings: Findings) -> dict[Key, tuple[int, int, int]]:
    """(places, lowest raw, highest raw) of inputs, parameters and states."""
    found: dict[Key, tuple[int, int, int]] = {}
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
    assert declared.low is not None and declared.high is not None, x.name
    if declared.limit:
        return _between(declared.low, declared.high, x.name, x.span, findings, [])
    places, _, _ = _between(2 * declared.low, 2 * declared.high, x.name, x.span, findings, [])
    return places, -MOST, MOST


def _between(
    low: Fraction, high: Fraction, name: str, span: Span, findings: Findings, others: list[Fraction]
) -> tuple[int, int, int]:
    """Ends are rounded inward, other values to the nearest. No end is ± MOST: what is held there is out of range."""
    try:
        places = room(max(abs(v) for v in (low, high, *others)))
        if max(abs(v) for v in (low, high)) * Fraction(2) ** places > MOST - 1:
            places -= 1
    except Refused as refused:
        findings.error("HG421", span, f"'{name}' does not fit fixed32: {refused}", hint="use another unit")
        return 0, 0, 0
    unit = Fraction(2) ** places
    first, last = math.ceil(low * unit), math.floor(high * unit)
    if first > last:
        findings.error("HG421", span, f"'{name}' does not fit fixed32: no raw value lies in its range")
        return 0, 0, 0
    raws = [first, last, *(raw(v, places) for v in others)]
    return places, min(raws), max(raws)


@dataclass(slots=True)
class _Fixed:
    """The elaboration of one step law."""

    made: StepLaw
    bounds: Bounds
    findings: Findings
    leaves: Mapping[Key, tuple[int, int, int]]
    locals: dict[str, Scaled]
    known: dict[Node, Scaled] = field(default_factory=dict)
    more: list[Definition] = field(default_factory=list)
    """Every definition, those of the elaboration too, each before its use."""
    current: StepJump | None = None
    """The jump whose condition is elaborated."""

    def built(self) -> StepLaw:
        made = self.made
        for d in made.definitions:
            self.more.append(self.definition(d))
        places = self.output_places()
        fixed = replace(
            made,
            inputs=tuple(self.input(u) for u in made.inputs),
            parameters=tuple(self.parameter(p) for p in made.parameters),
            rules=tuple(Rule(self.condition(r.condition), r.text, r.span) for r in made.rules),
            states=tuple(self.state(x) for x in made.states),
            alarms=(),
            jumps=tuple(self.jump(j) for j in made.jumps),
            flow_condition=None if made.flow_condition is None else self.condition(made.flow_condition),
            outputs=tuple(self.output(o, places.get(o.name)) for o in made.outputs),
            flow=tuple(self.assign(a) for a in made.flow),
            sample=tuple(self.assign(a) for a in made.sample),
            law=replace(
                made.law, outputs=tuple(replace(o, type=INT if o.type == REAL else o.type) for o in made.law.outputs)
            ),
            places={k: v[0] for k, v in self.leaves.items()}
            | {(RefKind.OUTPUT, name): p for name, p in places.items()},
        )
        self.findings.stop()
        for finding in resolution.findings(made, self.real, fixed.places):
            self.findings.add(finding)
        return replace(fixed, definitions=tuple(self.more), tables=())

    # ------------------------------------------------------------------ declarations

    def input(self, u: StepInput) -> StepInput:
        if u.type != REAL:
            return u
        places, _, _ = self.leaves[(RefKind.INPUT, u.name)]
        unit = Fraction(2) ** places
        low, high = math.ceil(Fraction(u.low) * unit), math.floor(Fraction(u.high) * unit)
        given, initial = (raw(Fraction(v), places) for v in (u.substitute, u.initial))
        return replace(u, type=INT, scaled=True, low=low, high=high, substitute=given, initial=initial)

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
        initial = tuple(max(low, min(high, raw(Fraction(v), places))) for v in x.initial)
        return replace(x, type=INT, initial=initial, low=low, high=high)

    def definition(self, d: Definition) -> Definition:
        if d.expr.type == REAL:
            value = self.real(d.expr)
            named = Ref(RefKind.LOCAL, d.name, INT, None, d.span)
            self.locals[d.name] = value.named(named)
            return replace(d, expr=value.node)
        return replace(d, expr=self.other(d.expr))

    def jump(self, j: StepJump) -> StepJump:
        self.current = j
        condition = self.condition(j.condition)
        self.current = None
        return replace(j, condition=condition, assigns=tuple(self.assign(a) for a in j.assigns))

    def condition(self, node: Node) -> Node:
        return decide(self.other(node))

    def assign(self, a: StepAssign) -> StepAssign:
        if a.expr.type != REAL:
            return replace(a, expr=self.other(a.expr))
        places, low, high = self.leaves[(RefKind.STATE, a.state)]
        ends = (low, high) if self.made.law.state(a.state).limit else None
        expr, clamp = self.stored(a.expr, places, ends, a.span)
        return replace(a, expr=expr, guarded=False, clamp=clamp)

    def stored(
        self, node: Node, places: int, ends: tuple[int, int] | None, span: Span
    ) -> tuple[Node, tuple[Value, Value] | None]:
        """A real expression with the places of what it is stored in; the ends in which it has to be held, None where it
        is inside them anyway."""
        value = rescaled(self.real(node), places, span)
        if ends is None or (ends[0] <= value.low and value.high <= ends[1]):
            return value.node, None
        if isinstance(value.node, Const):
            return integer(min(max(int(value.node.value), ends[0]), ends[1]), span), None
        return value.node, ends

    def output_places(self) -> dict[str, int]:
        """Places of the real outputs: those of the range, and not more than any component leaves room for."""
        found: dict[str, int] = {}
        for o in self.made.outputs:
            if o.expr.type == REAL:
                value = self.real(o.expr)
                declared = next(d for d in self.made.law.outputs if d.name == o.name)
                places = value.places
                if o.clamp is not None:
                    places = room(max(abs(Fraction(e)) for e in o.clamp))
                elif declared.low is not None and declared.high is not None:
                    most = max(abs(v) for v in (*value.ends, declared.low, declared.high))
                    places = room(most)
                found[o.name] = min(places, found.get(o.name, places))
        return found

    def output(self, o: StepOutput, places: int | None) -> StepOutput:
        if places is None:
            return replace(o, expr=self.other(o.expr))
        ends: tuple[int, int] | None = None
        if o.clamp is not None:
            low, high = (Fraction(c) * Fraction(2) ** places for c in o.clamp)
            ends = math.ceil(low), math.floor(high)
        expr, clamp = self.stored(o.expr, places, ends, o.span)
        return replace(o, expr=expr, guarded=False, fallback=0, clamp=clamp)

    # ------------------------------------------------------------------ expressions

    def other(self, node: Node) -> Node:
        """A boolean, integer or enumeration: its parts that are real are elaborated."""
        match node:
            case Op(op="finite"):
                return TRUE
            case Op() if node.op in _REALS and node.args[0].type == REAL:
                return self.tried(node, lambda: self.comparison(node)) or FALSE
            case Op(op="to_steps"):
                return self.tried(node, lambda: self.steps(node)) or integer(0)
            case Op():
                return Op(node.op, tuple(self.other(a) for a in node.args), node.type, node.table, node.span)
            case _:
                return node

    def steps(self, node: Op) -> Node:
        value = self.real(node.args[0])
        if value.places < 0:
            value = rescaled(value, 0, node.span)
        return op("fixed_steps", value.node, integer(value.places), span=node.span)

    def comparison(self, node: Op) -> Node:
        """With a constant: exact, whatever its digits (thresholds: nearest - the nearest raw value)."""
        left, right = node.args
        mirror = {"lt": "gt", "gt": "lt", "le": "ge", "ge": "le"}
        if isinstance(right, Const):
            return self.against(node.op, self.real(left), Fraction(right.value), node.span)
        if isinstance(left, Const):
            return self.against(mirror[node.op], self.real(right), Fraction(left.value), node.span)
        return ordered(node.op, self.real(left), self.real(right), node.span)

    def against(self, name: str, x: Scaled, value: Fraction, span: Span) -> Node:
        exact = value * Fraction(2) ** x.places
        edge = safe = math.ceil(exact) if name in ("ge", "lt") else math.floor(exact)
        if self.made.law.thresholds == "nearest":
            edge = round(exact)
            if edge != safe and self.current is not None:
                unit = Fraction(2) ** -x.places
                self.findings.add(resolution.moved(self.current, self.current.span, edge * unit, safe * unit))
        if abs(edge) > MOST:
            return truth((edge > 0) is (name in ("lt", "le")), span)
        return op(name, x.node, integer(edge, span), span=span)

    def tried(self, node: Node, make: Callable[[], Node]) -> Node | None:
        """What `make` gives; a finding where it refuses."""
        try:
            return make()
        except Refused as refused:
            self.findings.error("HG422", node.span, f"fixed32: {refused}", hint="limit it first, such as max(x, 0.01)")
            return None

    def real(self, node: Node) -> Scaled:
        """A real expression."""
        found = self.known.get(node)
        if found is None:
            try:
                found = self.computed(node)
            except Refused as refused:
                self.findings.error(
                    "HG422", node.span, f"fixed32: {refused}", hint="limit it first, such as max(x, 0.01)"
                )
                found = Scaled(integer(0), 0, 0, 0)
            self.known[node] = found
        return found

    def computed(self, node: Node) -> Scaled:
        match node:
            case Const():
                return constant(Fraction(node.value), node.span)
            case Ref(kind=RefKind.LOCAL):
                return self.locals[node.name]
            case Ref():
                places, low, high = self.leaves[(node.kind, node.name)]
                return Scaled(Ref(node.kind, node.name, INT, node.index, node.span), places, low, high)
            case Op():
                return self.operation(node)

    def operation(self, node: Op) -> Scaled:
        span = node.span
        match node.op:
            case "select":
                return chosen(self.condition(node.args[0]), self.real(node.args[1]), self.real(node.args[2]), span)
            case "to_real":
                known: Range = self.bounds.of(node.args[0])
                low, high = max(-MOST, math.floor(known.low)), min(MOST, math.ceil(known.high))
                return Scaled(self.other(node.args[0]), 0, low, high)
        args = [self.real(a) for a in node.args]
        match node.op:
            case "add" | "sub":
                return added(args[0], args[1], node.op == "sub", span)
            case "mul":
                return multiplied(args[0], args[1], span)
            case "div":
                return divided(args[0], args[1], span)
            case "floor":
                return self.floor(args[0], span)
            case "sign":
                return Scaled(op("isign", args[0].node, span=span), 0, -1, 1)
            case "lookup" | "lookup2":
                table = next(t for t in self.made.tables if t.name == node.table)
                if isinstance(table, StepTable):
                    return curve(table, args[0], span, self.defined(span))
                return grid(table, args[0], args[1], span, self.defined(span))
        if node.op in ELEMENTARY:
            return elementary(node.op, args, span)
        return picked(node.op, args, span)

    def defined(self, span: Span) -> Callable[[str, Scaled], Scaled]:
        """Makes definitions; their names have blanks, so no name of the author is the same."""

        def define(name: str, value: Scaled) -> Scaled:
            if not isinstance(value.node, Op):
                return value
            unique = f"{name} number {len(self.more) + 1}"
            self.more.append(Definition(unique, value.node, span, name))
            return value.named(Ref(RefKind.LOCAL, unique, INT, None, span))

        return define

    def floor(self, x: Scaled, span: Span) -> Scaled:
        if x.places <= 0:
            return x
        low, high = (math.floor(e) for e in x.ends)
        return Scaled(op("fixed_floor", x.node, integer(x.places), span=span), 0, low, high)
