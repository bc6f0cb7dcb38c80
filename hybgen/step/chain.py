"""How many jumps can follow each other in one step?

After a jump its new constants are known, and so are those parts of its condition that it did not touch. A jump
whose condition folds to false under these facts can't follow. The longest path over the remaining pairs is
enough; a cycle means that no number is shown to be enough.
"""

from __future__ import annotations

from collections.abc import Sequence

from hybgen.expr.core import FALSE, Const, Node, Ref, RefKind, rebuild, refs
from hybgen.expr.fold import decide, facts
from hybgen.step.model import Definition, StepJump

MOST_JUMPS = 64


def followers(jumps: Sequence[StepJump], definitions: Sequence[Definition]) -> dict[int, tuple[int, ...]]:
    """For each jump (by position) the jumps that may be due right after it."""
    conditions = [_expanded(j.condition, definitions) for j in jumps]
    return {
        i: tuple(k for k, c in enumerate(conditions) if decide(c, known) != FALSE)
        for i, known in enumerate(_after(j, c) for j, c in zip(jumps, conditions, strict=True))
    }


def longest(jumps: Sequence[StepJump], definitions: Sequence[Definition]) -> int | None:
    """The longest chain of jumps in one step, or None where a cycle is not excluded (or there are too many jumps to ask)."""
    if len(jumps) > MOST_JUMPS:
        return None
    next_ = followers(jumps, definitions)
    length: dict[int, int] = {}
    for _ in range(len(jumps)):
        for i, after in next_.items():
            if i not in length and all(k in length for k in after):
                length[i] = 1 + max((length[k] for k in after), default=0)
    return None if len(length) < len(jumps) else max(length.values(), default=0)


def _after(jump: StepJump, condition: Node) -> dict[Node, Const]:
    """What is known right after a jump."""
    touched = {(a.state, a.index) for a in jump.assigns}
    known = {
        node: value
        for node, value in facts(condition).items()
        if not any((r.name, r.index) in touched for r in refs(node, RefKind.STATE))
        and not any(refs(node, RefKind.LOCAL))
    }
    for assign in jump.assigns:
        value = decide(assign.expr, known)
        if isinstance(value, Const):
            known[Ref(RefKind.STATE, assign.state, value.type, assign.index)] = value
    return known


def _expanded(condition: Node, definitions: Sequence[Definition]) -> Node:
    """The condition with boolean definitions written out where that stays small."""
    bodies: dict[Node, Node] = {}
    for definition in definitions:
        body = _replaced(definition.expr, bodies)
        if sum(1 for _ in refs(body)) <= 32:
            bodies[Ref(RefKind.LOCAL, definition.name, definition.expr.type)] = body
    return _replaced(condition, bodies)


def _replaced(node: Node, bodies: dict[Node, Node]) -> Node:
    return rebuild(node, lambda n: bodies.get(n, n))
