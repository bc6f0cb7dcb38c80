"""A step law as text, for people: what one step computes, in which order of operations."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from hybgen.expr.core import Const, Kind, Node, Op, Ref, RefKind
from hybgen.step.model import ConditionBound, StepAssign, StepJump, StepLaw, StepOutput
from hybgen.step.quantity import upward
from hybgen.step.translate import component

_INFIX = {
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
    "and": "and",
    "or": "or",
}
_PREFIX = {"neg": "-", "ineg": "-", "not": "not "}


def show(made: StepLaw) -> str:
    """The step law, one line a statement; constants as the shortest decimals that give their bits."""
    return "\n".join(_lines(made)) + "\n"


def _lines(made: StepLaw) -> Iterator[str]:
    yield f"step law {made.law.name}: {made.format.name}, step {float(made.step):.9g} s, method {made.method}"
    yield from _scales(made)
    yield ""
    yield "snapshot"
    for u in made.inputs:
        size = f"[{u.size}]" if u.size is not None else ""
        if u.type.kind is Kind.BOOL:
            yield f"  {u.name}{size}: bool"
        else:
            policy = f"value {_number(u.substitute, made)}" if u.invalid == "value" else u.invalid
            yield f"  {u.name}{size}: good in [{_number(u.low, made)}, {_number(u.high, made)}], else {policy}"
    for i, rule in enumerate(made.rules):
        yield f"  rule {i + 1}: {rule.text}"
    if made.definitions:
        yield ""
        yield "definitions"
        for d in made.definitions:
            yield f"  {d.name} = {expression(d.expr, made)}"
    yield ""
    yield f"jumps: at most {made.jumps_per_step} in one step, first in order; prefer {made.law.prefer}"
    for jump in made.jumps:
        yield from _jump(jump, made)
    yield ""
    yield "outputs"
    for o in made.outputs:
        yield f"  {component(o.name, o.index)} = {_kept(expression(o.expr, made), o, made)}"
    yield ""
    yield "flow" if made.flow_condition is None else f"flow where {expression(made.flow_condition, made)}"
    for a in made.flow:
        yield f"  {_assign(a, made)}"
    for x in made.states:
        if x.kind == "timer":
            yield f"  {x.name} = min({x.name} + 1, {x.maximum})    [steps]"
    if made.sample:
        yield ""
        yield "sample"
        for a in made.sample:
            yield f"  {_assign(a, made)}"


def _scales(made: StepLaw) -> Iterator[str]:
    """Fixed point: the scale of each quantity."""
    if made.places:
        yield ""
        yield "scales (raw = value * 2^n)"
        for (kind, name), places in made.places.items():
            yield f"  {kind} {name}: Q{31 - places}.{places}, resolution {2.0**-places:.3g}"


def _jump(jump: StepJump, made: StepLaw) -> Iterator[str]:
    yield f"  {jump.number} {jump.name}: {expression(jump.condition, made)}"
    yield from (f"      {_bound(b)}" for b in made.bounds if b.jump == jump.name)
    yield from (f"      {_assign(a, made)}" for a in jump.assigns)


def _bound(b: ConditionBound) -> str:
    """What rounding does to one comparison."""
    place = f"line {b.span.line}, {b.text}" if b.text else f"line {b.span.line}"
    if b.error is None:
        return f"rounding without a bound ({place}): {b.why}"
    unit = f" {b.unit}" if b.unit and b.unit != "1" else ""
    late = "without a bound of the delay" if b.margin is None else f"at the latest {upward(b.margin, 3)}{unit} beyond"
    found = f"rounding at most {upward(b.error, 3)}{unit}, {late} ({place})"
    return f"{found} {b.within}" if b.within else found


def _assign(a: StepAssign, made: StepLaw) -> str:
    return f"{component(a.state, a.index)} := {_kept(expression(a.expr, made), a, made)}"


def _kept(text: str, item: StepAssign | StepOutput, made: StepLaw) -> str:
    if item.guarded:
        text += "    [if finite]"
    if item.clamp is not None:
        text += f"    [held in {_number(item.clamp[0], made)} .. {_number(item.clamp[1], made)}]"
    return text


def _number(value: Fraction | int | bool, made: StepLaw) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int):
        return str(value)
    return str(made.format.dtype.type(float(value)))


def expression(node: Node, made: StepLaw) -> str:
    """One expression, every operation in parentheses but the outermost."""
    text = _text(node, made)
    return text[1:-1] if text.startswith("(") and _closes_last(text) else text


def _closes_last(text: str) -> bool:
    depth = 0
    for i, sign in enumerate(text):
        depth += (sign == "(") - (sign == ")")
        if depth == 0:
            return i == len(text) - 1
    return False


def _text(node: Node, made: StepLaw) -> str:
    match node:
        case Const():
            return node.type.values[int(node.value)] if node.type.kind is Kind.ENUM else _number(node.value, made)
        case Ref(kind=RefKind.VALID | RefKind.JUMPED):
            return f"{node.kind}({node.name})"
        case Ref():
            return node.name if node.index is None else f"{node.name}[{node.index}]"
        case Op():
            args = [_text(a, made) for a in node.args]
            if node.op in _INFIX:
                return f"({f' {_INFIX[node.op]} '.join(args)})"
            if node.op in _PREFIX:
                return f"({_PREFIX[node.op]}{args[0]})"
            name = node.table or {"select": "choose"}.get(node.op, node.op)
            return f"{name}({', '.join(args)})"
