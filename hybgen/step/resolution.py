"""What the resolution of fixed point costs a law: states that can't move, samples finer than raw values, gaps of a few of them."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterator, Mapping
from fractions import Fraction

from hybgen.diag.codes import CODES
from hybgen.diag.finding import Finding, Severity, Verdict
from hybgen.diag.span import Span
from hybgen.expr.core import REAL, Const, Kind, Node, Op, Ref, RefKind, walk
from hybgen.expr.units import Unit
from hybgen.step.model import StepAssign, StepJump, StepLaw
from hybgen.step.scaled import Scaled

LEAST_GAP = 4
"""Raw values between opposite thresholds, below which a gap is hardly one."""

Atom = tuple[Node, Fraction]
"""An expression and what it is compared with."""


def findings(
    made: StepLaw, value: Callable[[Node], Scaled], places: Mapping[tuple[RefKind, str], int]
) -> list[Finding]:
    """Warnings about a step law with exact constants; `value` gives its real expressions in fixed point."""
    return [*_samples(made, places), *_still(made, value, places), *_gaps(made, value)]


def moved(jump: StepJump, least: Fraction, most: Fraction) -> Finding:
    """What `thresholds: nearest` costs: a constant that rounding moves to the side where the law does not jump."""
    message = (
        f"'{jump.name}' compares with {float(least):.10g} in C, where the law needs {float(most):.10g}: "
        "rounding can cause a jump"
    )
    return Finding(
        "HG411",
        CODES["HG411"].property,
        Verdict.REFUTED,
        Severity.NOTE,
        jump.span,
        jump.name,
        message,
        hint="leave out thresholds: nearest",
    )


def _warning(code: str, span: Span, subject: str, message: str, hint: str, value: Mapping[str, object]) -> Finding:
    return Finding(
        code, CODES[code].property, Verdict.REFUTED, Severity.WARNING, span, subject, message, value=value, hint=hint
    )


def _amount(value: Fraction, unit: Unit) -> str:
    return f"{float(value):.3g}{'' if unit.plain else f' {unit}'}"


def _samples(made: StepLaw, places: Mapping[tuple[RefKind, str], int]) -> Iterator[Finding]:
    """Inputs whose declared noise or resolution is finer than their raw values."""
    for u in made.law.inputs:
        if u.type != REAL:
            continue
        step = Fraction(2) ** -places[(RefKind.INPUT, u.name)]
        for word, size in (("noise", u.noise), ("resolution", u.resolution)):
            if 0 < size < step:
                yield _warning(
                    "HG424",
                    u.span,
                    u.name,
                    f"the {word} of '{u.name}' is {_amount(size, u.unit)}, its raw values in fixed32 are "
                    f"{_amount(step, u.unit)} apart",
                    "declare a smaller range, or use float64",
                    {"resolution": float(step), "unit": str(u.unit)},
                )
                break


def _still(
    made: StepLaw, value: Callable[[Node], Scaled], places: Mapping[tuple[RefKind, str], int]
) -> Iterator[Finding]:
    """States whose flow never changes them, because each increment is below half of their resolution."""
    for a in made.flow:
        steps = _increments(a.expr, a) if a.expr.type == REAL else None
        if not steps:
            continue
        largest = max(abs(e) for s in steps for e in value(s).ends)
        half = Fraction(2) ** -places[(RefKind.STATE, a.state)] / 2
        if 0 < largest < half:
            unit = made.law.state(a.state).unit
            yield _warning(
                "HG423",
                a.span,
                a.state,
                f"'{a.state}' can't move in fixed32: a step changes it by {_amount(largest, unit)} at most, and half of "
                f"its resolution is {_amount(half, unit)}",
                "declare a smaller range, take a longer step, or use a float format",
                {"increment": float(largest), "resolution": float(2 * half), "unit": str(unit)},
            )


def _increments(node: Node, a: StepAssign) -> list[Node] | None:
    """The increments of x + increment, in each case that changes x; None where a new value has another form."""
    match node:
        case Op(op="select"):
            parts = [_increments(n, a) for n in node.args[1:]]
            found = [p for p in parts if p is not None]
            return [s for p in found for s in p] if len(found) == len(parts) else None
        case Op(op="add", args=(Ref() as x, step)) if _itself(x, a):
            return [step]
        case Ref() if _itself(node, a):
            return []
        case _:
            return None


def _itself(ref: Ref, a: StepAssign) -> bool:
    return (ref.kind, ref.name, ref.index) == (RefKind.STATE, a.state, a.index)


def _gaps(made: StepLaw, value: Callable[[Node], Scaled]) -> Iterator[Finding]:
    """Pairs of jumps, one from a threshold up and one from a lower threshold down, with few raw values between them."""
    defaults = {
        Ref(RefKind.PARAMETER, p.name, p.type, i if p.size is not None else None): Fraction(v)
        for p in made.parameters
        if p.type == REAL
        for i, v in enumerate(p.default)
    }
    definitions = {d.name: d.expr for d in made.definitions}
    sides = [(j, _atoms(j.condition, definitions, defaults)) for j in made.jumps]
    for (one, first), (other, second) in itertools.permutations(sides, 2):
        for (x, high), (y, low) in itertools.product(first["up"], second["down"]):
            places = value(x).places if x == y else 0
            step = Fraction(2) ** -places
            if x == y and 0 < high - low < LEAST_GAP * step:
                yield _warning(
                    "HG425",
                    one.span,
                    one.name,
                    f"'{one.name}' and '{other.name}' are {float(high - low):.3g} apart, {float((high - low) / step):.3g} "
                    f"raw values of fixed32",
                    "declare smaller ranges, or use float64",
                    {"gap": float(high - low), "resolution": float(step)},
                )


def _atoms(condition: Node, definitions: Mapping[str, Node], defaults: Mapping[Ref, Fraction]) -> dict[str, list[Atom]]:
    """The comparisons of a condition with constants and parameters (at their defaults): x above it (up), below it (down)."""
    found: dict[str, list[Atom]] = {"up": [], "down": []}
    todo = [condition]
    while todo:
        for node in walk(todo.pop()):
            if isinstance(node, Ref) and node.kind is RefKind.LOCAL and node.type.kind is Kind.BOOL:
                todo.append(definitions[node.name])
            if isinstance(node, Op) and node.op in ("ge", "gt", "le", "lt") and node.args[0].type == REAL:
                left, right = node.args
                up, down = ("up", "down") if node.op in ("ge", "gt") else ("down", "up")
                for x, bound, side in ((left, right, up), (right, left, down)):
                    edge = _edge(bound, defaults)
                    if edge is not None and not isinstance(x, Const):
                        found[side].append((x, edge))
    return found


def _edge(node: Node, defaults: Mapping[Ref, Fraction]) -> Fraction | None:
    if isinstance(node, Const):
        return Fraction(node.value)
    return defaults.get(node) if isinstance(node, Ref) else None
