"""A law's expressions as the checks see them: constants folded, terms written out where that stays small."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from hybgen.expr.core import Const, Kind, Node, Ref, RefKind, rebuild, walk
from hybgen.expr.fold import fold
from hybgen.law.model import Law, State, StateKind
from hybgen.step.translate import constants_of

MOST_NODES = 2000


@dataclass(frozen=True, slots=True)
class View:
    """Expands and folds the expressions of one law."""

    constants: dict[Node, Const]
    terms: dict[Node, Node]

    def of(self, node: Node) -> Node:
        """The expression with constants folded and terms written out."""
        return fold(rebuild(node, lambda n: self.terms.get(n, n)), self.constants)


def view(law: Law) -> View:
    """The view of a law."""
    constants = constants_of(law)
    terms: dict[Node, Node] = {}
    for term in law.terms:
        for i, expr in enumerate(term.exprs):
            body = fold(rebuild(expr, lambda n: terms.get(n, n)), constants)
            if sum(1 for _ in walk(body)) <= MOST_NODES:
                terms[Ref(RefKind.TERM, term.name, expr.type, i if term.size is not None else None)] = body
    return View(constants, terms)


def read_names(law: Law, node: Node) -> Iterator[str]:
    """The inputs, parameters, states, tables and terms that an expression reads, through terms."""
    todo, seen = [node], set[str]()
    while todo:
        here = todo.pop()
        for piece in walk(here):
            if isinstance(piece, Ref):
                yield piece.name
                if piece.kind is RefKind.TERM and piece.name not in seen:
                    seen.add(piece.name)
                    todo.extend(law.term(piece.name).exprs)
            elif not isinstance(piece, Const) and piece.table:
                yield piece.table


def value_name(state: State, value: Const) -> str:
    """How the author writes a value of a logic variable."""
    return str(state.values[int(value.value)]) if state.type.kind is Kind.ENUM else str(value.value)


def logic_states(law: Law) -> list[State]:
    """The logic variables."""
    return [s for s in law.states if s.kind is StateKind.LOGIC]
