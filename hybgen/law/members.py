"""Which values an expression for a logic variable can take."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Sequence

from hybgen.expr.core import INT, Const, Kind, Node, Op, Ref, RefKind, refs
from hybgen.expr.extent import Extent
from hybgen.expr.fold import Known, fold
from hybgen.law.model import State

MOST_WORK = 40000
"""Most operations, over all cases, that are tried for one expression."""


def values_of(state: State) -> list[Const]:
    """The members of a logic variable, as constants."""
    if state.type.kind is Kind.ENUM:
        return [Const(i, state.type) for i in range(len(state.values))]
    return [Const(int(v), INT) for v in state.values]


def logic_ref(state: State) -> Ref:
    """The reference to a logic variable."""
    return Ref(RefKind.STATE, state.name, state.type)


def possible(
    node: Node,
    states: Sequence[State],
    constants: Known | None = None,
    spend: Callable[[int], None] = lambda _: None,
) -> list[Const] | None:
    """The constants that an expression may become, or None where it depends on more than the logic variables, or on
    too many cases of them. `spend` is told of the operations tried."""
    node = fold(node, constants)
    if isinstance(node, Const):
        return [node]
    if isinstance(node, Op) and node.op == "select":
        yes, no = (possible(a, states, constants, spend) for a in node.args[1:])
        return None if yes is None or no is None else yes + no
    read = [s for s in states if logic_ref(s) in set(refs(node))]
    if {r.name for r in refs(node)} != {s.name for s in read}:
        return None
    axes = [[(logic_ref(s), v) for v in values_of(s)] for s in read]
    work = math.prod(len(a) for a in axes) * Extent().of(node)[0]
    if work > MOST_WORK:
        return None
    spend(work)
    found = [fold(node, dict(case)) for case in itertools.product(*axes)]
    constants_found = [f for f in found if isinstance(f, Const)]
    return list(dict.fromkeys(constants_found)) if len(constants_found) == len(found) else None
