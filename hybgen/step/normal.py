"""Conditions in negation normal form, guarded against numbers that are not finite.

After this, a comparison whose operands are not finite is false wherever it stands, also under a `not`, so such a
value can make no jump.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from hybgen.expr.core import BOOL, OPPOSITE, Const, Kind, Node, Op, Ref, RefKind, op, truth
from hybgen.numbers.bounds import Bounds


@dataclass(frozen=True, slots=True)
class Normalizer:
    """Rewrites conditions; `bounds` tells which operands are certainly finite, `opposites` names the definitions
    that have an opposite of their own."""

    bounds: Bounds
    opposites: Mapping[str, str]

    def normal(self, node: Node, positive: bool = True) -> Node:
        """The condition (or its opposite) in normal form."""
        match node:
            case Const():
                return truth(bool(node.value) is positive, node.span)
            case Op(op="not"):
                return self.normal(node.args[0], not positive)
            case Op(op="and" | "or"):
                name = node.op if positive else ("or" if node.op == "and" else "and")
                return op(name, *(self.normal(a, positive) for a in node.args), span=node.span)
            case Op() if node.op in OPPOSITE and node.args[0].type.kind is not Kind.BOOL:
                return self._comparison(node, positive)
            case Op(op="select"):
                asked, yes, no = node.args
                inner = op(
                    "select", self.normal(asked), self.normal(yes, positive), self.normal(no, positive), span=node.span
                )
                return self._all(inner, [f for n in self._operands(asked) for f in self._finite(n)])
            case Op() if node.op in OPPOSITE:
                name = node.op if positive else OPPOSITE[node.op]
                inner = Op(name, tuple(self.normal(a) for a in node.args), BOOL, "", node.span)
                return self._all(inner, [f for n in self._operands(node) for f in self._finite(n)])
            case Ref(kind=RefKind.LOCAL) if not positive and node.name in self.opposites:
                return Ref(RefKind.LOCAL, self.opposites[node.name], BOOL, None, node.span)
            case _:
                return node if positive else op("not", node, span=node.span)

    def _comparison(self, node: Op, positive: bool) -> Node:
        made = node if positive else Op(OPPOSITE[node.op], node.args, BOOL, "", node.span)
        return self._all(made, [f for a in node.args for f in self._finite(a)])

    def _all(self, node: Node, guards: list[Node]) -> Node:
        return op("and", node, *dict.fromkeys(guards), span=node.span) if guards else node

    def _finite(self, node: Node) -> list[Node]:
        return [] if self.bounds.finite(node) else [op("finite", node, span=node.span)]

    def _operands(self, node: Node) -> list[Node]:
        """The operands of the comparisons in a condition."""
        if isinstance(node, Op):
            if node.op in OPPOSITE and node.args[0].type.kind is not Kind.BOOL:
                return list(node.args)
            return [n for a in node.args for n in self._operands(a)]
        return []


def watched(condition: Node) -> list[Node]:
    """The expressions whose finiteness a condition asks."""
    if isinstance(condition, Op):
        if condition.op == "finite":
            return [condition.args[0]]
        return [n for a in condition.args for n in watched(a)]
    return []
