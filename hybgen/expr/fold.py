"""Exact folding: constants computed with fractions, dead branches removed.

Two uses: constants of a law become single numbers (rounded once, later), and conditions are simplified under
facts that are known (a mode, a jump just taken).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from fractions import Fraction

from hybgen.expr.core import FALSE, OPPOSITE, REAL, TRUE, Const, Node, Op, Ref, op, truth

Known = Mapping[Node, Const]
MOST_BITS = 8192

_EXACT: dict[str, Callable[..., Fraction | int | bool]] = {
    "add": lambda a, b: a + b,
    "sub": lambda a, b: a - b,
    "mul": lambda a, b: a * b,
    "neg": lambda a: -a,
    "abs": abs,
    "min": min,
    "max": max,
    "clamp": lambda x, low, high: low if x < low else min(x, high),
    "sign": lambda a: Fraction((a > 0) - (a < 0)),
    "floor": lambda a: Fraction(a.numerator // a.denominator),
    "iadd": lambda a, b: a + b,
    "isub": lambda a, b: a - b,
    "imul": lambda a, b: a * b,
    "ineg": lambda a: -a,
    "iabs": abs,
    "imin": min,
    "imax": max,
    "iclamp": lambda x, low, high: low if x < low else min(x, high),
    "isign": lambda a: (a > 0) - (a < 0),
    "to_real": Fraction,
    "lt": lambda a, b: a < b,
    "le": lambda a, b: a <= b,
    "gt": lambda a, b: a > b,
    "ge": lambda a, b: a >= b,
    "eq": lambda a, b: a == b,
    "ne": lambda a, b: a != b,
    "finite": lambda _: True,
    "not": lambda a: not a,
}


def fold(node: Node, known: Known | None = None) -> Node:
    """The tree of a law with known nodes replaced and constants folded exactly."""
    return _fold(node, known or {}, False)


def decide(node: Node, known: Known | None = None) -> Node:
    """The tree of a step law with known nodes replaced: logic, choices, comparisons and integers are folded.

    Real arithmetic is not: there each operation rounds, a constant has to stay representable, and zero has a sign.
    """
    return _fold(node, known or {}, True)


def _fold(node: Node, known: Known, rounds: bool) -> Node:
    if known and (found := known.get(node)) is not None:
        return found
    if not isinstance(node, Op):
        return node
    args = tuple(_fold(a, known, rounds) for a in node.args)
    if any(a is not b for a, b in zip(args, node.args, strict=True)):
        node = Op(node.op, args, node.type, node.table, node.span)
        if known and (found := known.get(node)) is not None:
            return found
    match node.op:
        case "and" | "or":
            return _logic(node, rounds)
        case "select":
            return _select(node)
        case "add" | "sub" | "mul" | "div" if rounds:
            return node
        case "neg" if rounds and isinstance(args[0], Const) and args[0].value == 0:
            return node
        case "div":
            return _divided(node)
        case _:
            return _computed(node)


_REFLEXIVE = {"lt": False, "le": True, "gt": False, "ge": True, "eq": True, "ne": False}


def _computed(node: Op) -> Node:
    if (
        node.op in _REFLEXIVE
        and node.args[0] == node.args[1]
        and (isinstance(node.args[0], Ref) or node.args[0].type != REAL)
    ):
        return truth(_REFLEXIVE[node.op], node.span)
    exact = _EXACT.get(node.op)
    if exact is None or not all(isinstance(a, Const) for a in node.args):
        return node
    return _constant(node, exact(*(a.value for a in node.args if isinstance(a, Const))))


def _constant(node: Op, value: Fraction | int | bool) -> Node:
    if isinstance(value, Fraction) and value.numerator.bit_length() + value.denominator.bit_length() > MOST_BITS:
        return node
    return Const(value, node.type, node.span)


def _divided(node: Op) -> Node:
    a, b = node.args
    if isinstance(a, Const) and isinstance(b, Const) and b.value != 0:
        return _constant(node, Fraction(a.value) / Fraction(b.value))
    return node


def _logic(node: Op, rounds: bool) -> Node:
    ends = node.op == "or"  # the value that decides the whole
    kept: list[Node] = []
    for arg in node.args:
        if isinstance(arg, Const):
            if bool(arg.value) is ends:
                return truth(ends, node.span)
        elif arg not in kept:
            kept.append(arg)
    if not kept:
        return truth(not ends, node.span)
    if len(kept) == 1:
        return kept[0]
    if not ends and (simpler := _under_the_first(kept, rounds)) is not None:
        return _logic(op("and", *simpler, span=node.span), rounds)
    return node if len(kept) == len(node.args) else op(node.op, *kept, span=node.span)


def _under_the_first(parts: list[Node], rounds: bool) -> list[Node] | None:
    """Conjuncts simplified by what the ones before them say, or None where that changes nothing."""
    known: dict[Node, Const] = {}
    found: list[Node] = []
    for part in parts:
        found.append(_fold(part, known, rounds) if known else part)
        known.update(facts(part))
    return found if any(a is not b for a, b in zip(found, parts, strict=True)) else None


def _select(node: Op) -> Node:
    condition, yes, no = node.args
    if isinstance(condition, Const):
        return yes if condition.value else no
    return yes if yes == no else node


def facts(condition: Node) -> dict[Node, Const]:
    """What is known where a condition holds: its conjuncts, and what they exclude."""
    known: dict[Node, Const] = {}
    todo = [condition]
    while todo:
        node = todo.pop()
        if isinstance(node, Op) and node.op == "and":
            todo.extend(node.args)
            continue
        known[node] = TRUE
        if isinstance(node, Op) and node.op == "not":
            known[node.args[0]] = FALSE
        elif isinstance(node, Op) and node.op in OPPOSITE:
            known[Op(OPPOSITE[node.op], node.args, node.type)] = FALSE
            if node.op == "eq" and isinstance(node.args[1], Const) and isinstance(node.args[0], Ref):
                known[node.args[0]] = node.args[1]
        if isinstance(node, Ref):
            known[Op("not", (node,), node.type)] = FALSE
    return known
