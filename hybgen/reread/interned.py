"""Trees with shared parts: equal trees are one object, so that comparing is a look and walking is bounded.

Everything here works on hybgen.expr.core nodes; `Interner` hands out one object for each different node.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import partial

from hybgen.expr.core import FALSE, OPPOSITE, TRUE, Const, Kind, Node, Op, Ref, RefKind, op, walk
from hybgen.expr.fold import decide


class Interner:
    """Hands out one object for each different node."""

    def __init__(self) -> None:
        self._known: dict[object, Node] = {}

    def leaf(self, node: Const | Ref) -> Node:
        """The one object for a constant or reference."""
        return self._known.setdefault(node, node)

    def op(self, name: str, args: tuple[Node, ...], like: Op) -> Node:
        """The one object for an operation on interned operands."""
        key = (name, tuple(id(a) for a in args), like.type, like.table)
        found = self._known.get(key)
        if found is None:
            found = self._known[key] = Op(name, args, like.type, like.table)
        return found

    def of(self, node: Node, names: Mapping[str, Node] | None = None) -> Node:
        """A tree interned, with definitions (LOCAL references) replaced by interned trees."""
        memo: dict[int, Node] = {}

        def go(here: Node) -> Node:
            if id(here) in memo:
                return memo[id(here)]
            if isinstance(here, Op):
                made = self.op(here.op, tuple(go(a) for a in here.args), here)
            elif isinstance(here, Ref) and here.kind is RefKind.LOCAL and names is not None:
                made = names[here.name]
            else:
                made = self.leaf(here)
            memo[id(here)] = made
            return made

        return go(node)


Ends = Callable[[tuple[Node, ...]], bool]
"""Is clamp(x, low, high) of a state that is always inside these ends?"""


def _stored(node: Node) -> bool:
    """Constants, and what is stored, checked or sampled, are finite numbers."""
    return isinstance(node, Const) or (
        isinstance(node, Ref)
        and node.kind in (RefKind.STATE, RefKind.PARAMETER, RefKind.INPUT)
        and not node.name.startswith("raw ")
    )


@dataclass(frozen=True, slots=True)
class _Simplifier:
    """Simplifies under what is known; each shared part once."""

    interner: Interner
    known: Callable[[Node], Const | None]
    ends: Ends
    memo: dict[int, Node]

    def go(self, here: Node) -> Node:
        if id(here) not in self.memo:
            self.memo[id(here)] = self.step(here)
        return self.memo[id(here)]

    def step(self, here: Node) -> Node:
        if (found := self.known(here)) is not None:
            return self.interner.leaf(found)
        if not isinstance(here, Op):
            return here
        match here.op:
            case "select":
                return self.select(here)
            case "and" | "or":
                return self.logic(here)
            case _:
                return self.operation(here, tuple(self.go(a) for a in here.args))

    def operation(self, here: Op, args: tuple[Node, ...]) -> Node:
        if here.op == "finite" and _stored(args[0]):
            return self.interner.leaf(TRUE)
        if here.op in ("clamp", "iclamp") and self.ends(args):
            return args[0]
        made = self.interner.op(here.op, args, here)
        return self.interner.of(decide(made)) if all(isinstance(a, Const) for a in args) else made

    def select(self, here: Op) -> Node:
        asked = self.go(here.args[0])
        if isinstance(asked, Const):
            return self.go(here.args[1] if asked.value else here.args[2])
        yes, no = self.go(here.args[1]), self.go(here.args[2])
        if isinstance(yes, Const) and isinstance(no, Const) and yes.type.kind is Kind.BOOL and yes.value != no.value:
            return asked if yes.value else self.interner.op("not", (asked,), op("not", asked))
        return yes if yes is no else self.interner.op("select", (asked, yes, no), here)

    def logic(self, here: Op) -> Node:
        ends = here.op == "or"
        kept: list[Node] = []
        for arg in here.args:
            made = self.go(arg)
            if isinstance(made, Const):
                if bool(made.value) is ends:
                    return self.interner.leaf(TRUE if ends else FALSE)
            elif all(made is not k for k in kept):
                kept.append(made)
        if not kept:
            return self.interner.leaf(FALSE if ends else TRUE)
        return kept[0] if len(kept) == 1 else self.interner.op(here.op, tuple(kept), here)


def simplified(interner: Interner, node: Node, known: Callable[[Node], Const | None], ends: Ends) -> Node:
    """The tree under what is known about its atoms: logic and choices simplified, real arithmetic left alone."""
    return _Simplifier(interner, known, ends, {}).go(node)


def deciding(node: Node, inner: bool) -> Node | None:
    """An atom that decides something in the tree: a comparison or boolean leaf in a condition.

    `inner`: an atom inside the operands of another atom comes first.
    """
    seen: set[int] = set()
    todo: list[tuple[Node, bool]] = [(node, node.type.kind is Kind.BOOL)]
    while todo:
        here, asked = todo.pop()
        if id(here) in seen or isinstance(here, Const):
            continue
        seen.add(id(here))
        if isinstance(here, Op) and (here.op in ("and", "or", "not", "select") or not asked):
            todo += [(a, a.type.kind is Kind.BOOL) for a in reversed(here.args)]
        elif asked:
            found = (deciding(a, True) for a in here.args) if inner and isinstance(here, Op) else iter(())
            return next((i for i in found if i is not None), here)
    return None


def assumption(atom: Node, value: bool) -> Callable[[Node], Const | None]:
    """What is known when an atom is decided: itself and its opposite."""
    opposite = OPPOSITE.get(atom.op) if isinstance(atom, Op) else None

    def known(node: Node) -> Const | None:
        if node is atom:
            return TRUE if value else FALSE
        if isinstance(node, Op) and isinstance(atom, Op) and node.op == opposite and node.args == atom.args:
            return FALSE if value else TRUE
        return None

    return known


class Undecided(Exception):
    """Two trees could not be compared within the budget."""


@dataclass(frozen=True, slots=True)
class Judge:
    """Compares trees; `domains` are the logic variables with their values, `ends` the states kept inside a range."""

    interner: Interner
    domains: Mapping[Node, tuple[Const, ...]]
    ends: Ends
    budget: int = 10000

    def equivalent(self, one: Node, other: Node) -> bool:
        """Do two interned trees give the same bits for every value of their leaves?

        Case by case over the logic variables and the atoms that decide something; in each case what is left has to be
        the same tree, operation by operation. First atoms are taken as a whole, then, where that does not prove, from the
        inside. Raises Undecided if there are more cases than the budget.
        """
        one, other = (simplified(self.interner, n, _nothing, self.ends) for n in (one, other))
        try:
            if self._same(one, other, False, [self.budget // 10], set()):
                return True
        except Undecided:
            pass
        return self._same(one, other, True, [self.budget], set())

    def _same(self, a: Node, b: Node, inner: bool, left: list[int], done: set[tuple[int, int]]) -> bool:
        if a is b or (id(a), id(b)) in done:
            return True
        left[0] -= 1
        if left[0] < 0:
            raise Undecided
        atom = deciding(a, inner) or deciding(b, inner)
        if atom is None:
            return False
        for known in self._cases(atom):
            one, other = (simplified(self.interner, n, known, self.ends) for n in (a, b))
            if not self._same(one, other, inner, left, done):
                return False
        done.add((id(a), id(b)))
        return True

    def _cases(self, atom: Node) -> list[Callable[[Node], Const | None]]:
        """The ways in which an atom, or the logic variable it asks about, can be decided."""
        for node in walk(atom):
            if node in self.domains:
                return [partial(_is, node, value) for value in self.domains[node]]
        return [assumption(atom, True), assumption(atom, False)]


def _nothing(_: Node) -> Const | None:
    return None


def _is(variable: Node, value: Const, node: Node) -> Const | None:
    return value if node is variable else None
