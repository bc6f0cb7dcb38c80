"""Trees -> a list of array operations, each different subtree once."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hybgen.expr.core import Const, Kind, Node, Op, Ref, RefKind
from hybgen.reference.ops import lookup, operations
from hybgen.step.model import StepLaw

Array = NDArray[Any]
Load = Callable[[Ref], Array]


@dataclass(frozen=True, slots=True)
class Plan:
    """Slots in order: a reference to load, or an operation on earlier slots; `roots` are the results."""

    constants: tuple[tuple[int, Any], ...]
    loads: tuple[tuple[int, Ref], ...]
    work: tuple[tuple[int, Callable[..., Any], tuple[int, ...]], ...]
    roots: tuple[int, ...]
    size: int
    loaded: frozenset[int]
    """Roots that are references: copied, so that storing one result can't change another."""

    def run(self, load: Load, watch: Sequence[int] = ()) -> tuple[list[Array], list[Array]]:
        """Values of the roots and of the watched slots."""
        slots: list[Any] = [None] * self.size
        for at, value in self.constants:
            slots[at] = value
        for at, ref in self.loads:
            slots[at] = load(ref)
        for at, function, args in self.work:
            slots[at] = function(*[slots[a] for a in args])
        return [slots[r].copy() if r in self.loaded else slots[r] for r in self.roots], [slots[w] for w in watch]


class Planner:
    """Makes plans for one step law."""

    def __init__(self, made: StepLaw) -> None:
        self.functions = operations(made.format)
        self.tables = {t.name: lookup(t, made.format) for t in made.tables}
        self.real = made.format.dtype.type
        self.definitions = {d.name: d.expr for d in made.definitions}

    def scalar(self, node: Const) -> Any:
        """A constant as a numpy scalar of its type."""
        match node.type.kind:
            case Kind.REAL:
                return self.real(float(node.value))
            case Kind.BOOL:
                return np.bool_(node.value)
            case _:
                return np.int32(int(node.value))

    def plan(self, roots: Sequence[Node], watched: Sequence[Node] = ()) -> tuple[Plan, tuple[int, ...]]:
        """A plan for the roots, and the slots of the watched nodes."""
        building = _Building(self)
        slots = tuple(building.slot(r) for r in roots)
        watch = tuple(building.slot(w) for w in watched)
        loaded = frozenset(at for at, _ in building.loads)
        made = Plan(
            tuple(building.constants), tuple(building.loads), tuple(building.work), slots, building.size, loaded
        )
        return made, watch


class _Building:
    """One plan in the making."""

    def __init__(self, planner: Planner) -> None:
        self.planner = planner
        self.known: dict[Node, int] = {}
        self.constants: list[tuple[int, Any]] = []
        self.loads: list[tuple[int, Ref]] = []
        self.work: list[tuple[int, Callable[..., Any], tuple[int, ...]]] = []
        self.size = 0

    def slot(self, node: Node) -> int:
        if node in self.known:
            return self.known[node]
        if isinstance(node, Ref) and node.kind is RefKind.LOCAL:
            at = self.slot(self.planner.definitions[node.name])
        else:
            args = tuple(self.slot(a) for a in node.args) if isinstance(node, Op) else ()
            at = self.size
            self.size += 1
            self._add(at, node, args)
        self.known[node] = at
        return at

    def _add(self, at: int, node: Node, args: tuple[int, ...]) -> None:
        match node:
            case Const():
                self.constants.append((at, self.planner.scalar(node)))
            case Ref():
                self.loads.append((at, node))
            case Op():
                function = self.planner.tables[node.table] if node.table else self.planner.functions[node.op]
                self.work.append((at, function, args))


def atoms(condition: Node, definitions: Mapping[str, Node]) -> list[Node]:
    """The atomic conditions of a condition: comparisons and boolean leaves, through definitions."""
    match condition:
        case Op(op="and" | "or" | "not"):
            return [a for arg in condition.args for a in atoms(arg, definitions)]
        case Op(op="select"):
            return [a for arg in condition.args for a in atoms(arg, definitions)]
        case Ref(kind=RefKind.LOCAL):
            return atoms(definitions[condition.name], definitions)
        case Const():
            return []
        case _:
            return [condition]
