"""Rates as affine functions of the flowing states, with exact coefficients.

rate = sum of coefficient * state + sum of coefficient * atom, where an atom is an expression that does not
change while flowing (inputs are held). A rate by cases is affine in each case.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from hybgen.expr.core import REAL, TRUE, Const, Node, Op, Ref, RefKind, real, refs, truth
from hybgen.expr.fold import fold

Key = tuple[str, int | None]
ONE_NODE = real(1)


class Split(Exception):
    """The rate has cases: `condition` has to be decided first."""

    def __init__(self, condition: Node) -> None:
        self.condition = condition
        super().__init__()


class NotAffine(Exception):
    """The rate is not affine with constant coefficients."""


@dataclass(frozen=True, slots=True)
class Form:
    """Coefficients of the flowing states and of the atoms, in order of appearance."""

    states: Mapping[Key, Fraction]
    atoms: Mapping[Node, Fraction]

    def scaled(self, factor: Fraction) -> Form:
        return Form({k: c * factor for k, c in self.states.items()}, {n: c * factor for n, c in self.atoms.items()})

    def plus(self, other: Form) -> Form:
        states, atoms = dict(self.states), dict(self.atoms)
        for key, c in other.states.items():
            states[key] = states.get(key, Fraction(0)) + c
        for node, c in other.atoms.items():
            atoms[node] = atoms.get(node, Fraction(0)) + c
        return Form(states, atoms)


@dataclass(frozen=True, slots=True)
class Affine:
    """Reads affine forms. `flowing`: the states that flow; `terms`: the law's terms, by (name, component)."""

    flowing: frozenset[Key]
    terms: Mapping[Key, Node]
    moving: frozenset[Key]
    """The terms that depend on a flowing state."""
    known: Mapping[Node, Const]
    """Conditions decided so far."""
    memo: dict[Key, Form]

    def moves(self, node: Node) -> bool:
        """Does the expression change while flowing?"""
        return any(
            (r.kind is RefKind.STATE and (r.name, r.index) in self.flowing)
            or (r.kind is RefKind.TERM and (r.name, r.index) in self.moving)
            for r in refs(node)
        )

    def form(self, node: Node) -> Form:
        """The affine form of a real expression; raises Split or NotAffine."""
        node = fold(node, self.known)
        if not self.moves(node):
            return self._held(node)
        match node:
            case Ref(kind=RefKind.STATE):
                return Form({(node.name, node.index): Fraction(1)}, {})
            case Ref(kind=RefKind.TERM):
                return self._term((node.name, node.index))
            case Op(op="add"):
                return self.form(node.args[0]).plus(self.form(node.args[1]))
            case Op(op="sub"):
                return self.form(node.args[0]).plus(self.form(node.args[1]).scaled(Fraction(-1)))
            case Op(op="neg"):
                return self.form(node.args[0]).scaled(Fraction(-1))
            case Op(op="mul"):
                return self._product(node)
            case Op(op="div"):
                return self.form(node.args[0]).scaled(1 / self._constant(node.args[1]))
            case Op(op="select"):
                if self.moves(node.args[0]):
                    raise NotAffine
                raise Split(node.args[0])
            case _:
                raise NotAffine

    def _term(self, key: Key) -> Form:
        if key not in self.memo:
            self.memo[key] = self.form(self.terms[key])
        return self.memo[key]

    def _held(self, node: Node) -> Form:
        """An expression that is held: one atom, with its constant factor taken out."""
        match node:
            case Const():
                return Form({}, {ONE_NODE: Fraction(node.value)})
            case Op(op="neg"):
                return self._held(node.args[0]).scaled(Fraction(-1))
            case Op(op="mul", args=(Const() as c, other)) | Op(op="mul", args=(other, Const() as c)):
                return self._held(other).scaled(Fraction(c.value))
            case Op(op="div", args=(other, Const() as c)) if c.value != 0:
                return self._held(other).scaled(1 / Fraction(c.value))
            case _:
                return Form({}, {node: Fraction(1)})

    def _product(self, node: Op) -> Form:
        left, right = node.args
        if isinstance(left, Const):
            return self.form(right).scaled(Fraction(left.value))
        return self.form(left).scaled(self._constant(right))

    def _constant(self, node: Node) -> Fraction:
        if isinstance(node, Const) and node.value != 0 and node.type == REAL:
            return Fraction(node.value)
        raise NotAffine


def decided(known: Mapping[Node, Const], condition: Node, value: bool) -> dict[Node, Const]:
    """What is known after a condition has been decided; a mode that is one value is no other."""
    found = {**known, condition: truth(value)}
    if value and isinstance(condition, Op) and condition.op == "eq":
        state, constant = condition.args
        if isinstance(state, Ref) and isinstance(constant, Const):
            found[state] = constant
    if value and isinstance(condition, Op) and condition.op == "and":
        for part in condition.args:
            found[part] = TRUE
    return found
