"""A law's expressions as the checks see them: constants folded, terms written out where that stays small."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from hybgen.expr.core import INT, Const, Kind, Node, Ref, RefKind, rebuild, refs, walk
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


def values_of(state: State) -> list[Const]:
    """The members of a logic variable, as constants."""
    if state.type.kind is Kind.ENUM:
        return [Const(i, state.type) for i in range(len(state.values))]
    return [Const(int(v), INT) for v in state.values]


def logic_ref(state: State) -> Ref:
    """The reference to a logic variable."""
    return Ref(RefKind.STATE, state.name, state.type)


def value_name(state: State, value: Const) -> str:
    """How the author writes a value of a logic variable."""
    return str(state.values[int(value.value)]) if state.type.kind is Kind.ENUM else str(value.value)


def logic_states(law: Law) -> list[State]:
    """The logic variables."""
    return [s for s in law.states if s.kind is StateKind.LOGIC]


def possible(node: Node, states: list[State]) -> list[Const] | None:
    """The constants that an expression for a logic variable may become, or None where that is not plain."""
    if isinstance(node, Const):
        return [node]
    if isinstance(node, Ref):
        owner = next((s for s in states if s.name == node.name and node.kind is RefKind.STATE), None)
        return values_of(owner) if owner else None
    if node.op == "select":
        yes, no = (possible(a, states) for a in node.args[1:])
        return None if yes is None or no is None else yes + no
    read = [s for s in states if any(r.name == s.name for r in refs(node, RefKind.STATE))]
    if len(read) == 1 and all(r.name == read[0].name for r in refs(node)):
        found = [fold(node, {logic_ref(read[0]): v}) for v in values_of(read[0])]
        constants = [f for f in found if isinstance(f, Const)]
        return constants if len(constants) == len(found) else None
    return None
