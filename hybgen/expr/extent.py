"""How large and how deep trees are: what keeps time, memory and every later walk over them bounded.

A tree is measured as if every shared piece were written out, since later stages may walk it that way.
"""

from __future__ import annotations

from collections.abc import Iterable

from hybgen.expr.core import TRUE, Node, Op
from hybgen.expr.tree import Binary, Call, Cases, Chain, Expr, Item, Logic, Unary, Vector

LARGEST = 20000
"""Operations of one expression, all its components together."""
DEEPEST = 200
"""Operations above one another."""
DEEPEST_TEXT = 100
"""Operators, functions and cases inside one another, as written."""


class Extent:
    """Measures trees that grow from one another: each piece is looked at once."""

    def __init__(self) -> None:
        self._known: dict[int, tuple[Node, int, int]] = {}  # the node is kept, so that its id stays its own

    def fits(self, nodes: Iterable[Node]) -> bool:
        """Are these trees together small and each flat enough?"""
        total = 0
        for node in nodes:
            size, depth = self.of(node)
            total += size
            if total > LARGEST or depth > DEEPEST:
                return False
        return True

    def of(self, node: Node) -> tuple[int, int]:
        """Size and depth of a tree."""
        todo = [node]
        while todo:
            here = todo[-1]
            if not isinstance(here, Op) or id(here) in self._known:
                todo.pop()
                continue
            new = [a for a in here.args if isinstance(a, Op) and id(a) not in self._known]
            if new:
                todo += new
                continue
            todo.pop()
            size, depth = 1, 1
            for arg in here.args:
                _, more, deep = self._known.get(id(arg), _LEAF)
                size, depth = size + more, max(depth, deep + 1)
            self._known[id(here)] = here, size, depth
        return self._known.get(id(node), _LEAF)[1:]


_LEAF: tuple[Node, int, int] = (TRUE, 1, 1)


def children(expr: Expr) -> tuple[Expr, ...]:
    """The parts of a surface tree, in the written order."""
    match expr:
        case Unary():
            return (expr.operand,)
        case Binary():
            return expr.left, expr.right
        case Chain() | Logic():
            return expr.operands
        case Item():
            return (expr.base,)
        case Call():
            return expr.args
        case Vector():
            return expr.items
        case Cases():
            return (*(e for branch in expr.branches for e in branch), expr.otherwise)
        case _:
            return ()


def too_deep(expr: Expr) -> Expr | None:
    """A part of a surface tree that stands deeper than DEEPEST_TEXT, or None."""
    todo = [(expr, 1)]
    while todo:
        here, depth = todo.pop()
        if depth > DEEPEST_TEXT:
            return here
        todo += [(part, depth + 1) for part in children(here)]
    return None
