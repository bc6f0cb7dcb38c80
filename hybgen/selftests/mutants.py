"""Small changes of a step law: a comparison, a constant, an end of a range. What a test does not tell from the law, it does
not test.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace
from fractions import Fraction
from typing import Any

import numpy as np

from hybgen.expr.core import BOOL, Const, Kind, Node, Op, rebuild, walk
from hybgen.kernels.table import FIXED, kernel
from hybgen.law.model import Value
from hybgen.numbers.format import LARGEST_COUNT, Format
from hybgen.step.model import StepAssign, StepLaw, StepTable

_OTHER = {"lt": "le", "le": "lt", "gt": "ge", "ge": "gt", "eq": "ne", "ne": "eq"}
_SHIFTS = ("left", "right", "places", "wanted")
MOST = 250
"""So many mutants of a law are enough; of more, evenly spread ones are taken."""


def mutants(made: StepLaw) -> list[StepLaw]:
    """The law with one small change each, in a fixed order."""
    found = [
        *_of_trees(made),
        *_of_inputs(made),
        *_of_parameters(made),
        *_of_tops(made),
        *_of_clamps(made),
        *_of_tables(made),
    ]
    return found[:: max(1, -(-len(found) // MOST))]


def _near(value: Value, fmt: Format) -> list[Value]:
    """The neighbours of a constant, as far as there are any."""
    if isinstance(value, bool):
        return [not value]
    if isinstance(value, int):
        return [near for near in (value + 1, value - 1) if abs(near) <= LARGEST_COUNT]
    real = fmt.dtype.type
    there = (np.nextafter(real(float(value)), real(end)) for end in (np.inf, -np.inf))
    return [Fraction(float(t)) for t in there if np.isfinite(t)]


def _changes(made: StepLaw) -> Iterator[tuple[Node, Node]]:
    """(node, what it becomes), for every comparison and constant of the step."""
    seen: set[tuple[Node, Any]] = set()
    for root in (*(d.expr for d in made.definitions), *made.roots()):
        kept = _shifts(root)
        for node in walk(root):
            if (node, node.span) in seen or id(node) in kept:
                continue
            seen.add((node, node.span))
            if isinstance(node, Op) and node.op in _OTHER:
                yield node, _flipped(node)
            elif isinstance(node, Const) and node.type.kind is Kind.ENUM:
                yield node, Const((int(node.value) + 1) % len(node.type.values), node.type, node.span)
            elif isinstance(node, Const):
                yield from ((node, Const(near, node.type, node.span)) for near in _near(node.value, made.format))


def _flipped(node: Op) -> Op:
    """The comparison that answers otherwise where both sides are equal."""
    return Op(_OTHER[node.op], node.args, BOOL, span=node.span)


def _shifts(root: Node) -> set[int]:
    """The constants that say by how much a kernel shifts: C does not define every other one."""
    return {
        id(arg)
        for node in walk(root)
        if isinstance(node, Op) and node.op in FIXED
        for arg, (name, _) in zip(node.args, kernel(node.op, "fixed32").parameters, strict=True)
        if name.startswith(_SHIFTS)
    }


def _of_trees(made: StepLaw) -> Iterator[StepLaw]:
    for old, new in _changes(made):

        def change(node: Node, old: Node = old, new: Node = new) -> Node:
            return new if node == old and node.span == old.span else node

        yield _changed(made, change)


def _changed(made: StepLaw, change: Callable[[Node], Node]) -> StepLaw:
    """The law with `change` applied to every node of its trees."""

    def work(tree: Node) -> Node:
        return rebuild(tree, change)

    def assigns(rows: tuple[StepAssign, ...]) -> tuple[StepAssign, ...]:
        return tuple(replace(a, expr=work(a.expr)) for a in rows)

    return replace(
        made,
        definitions=tuple(replace(d, expr=work(d.expr)) for d in made.definitions),
        jumps=tuple(replace(j, condition=work(j.condition), assigns=assigns(j.assigns)) for j in made.jumps),
        flow_condition=None if made.flow_condition is None else work(made.flow_condition),
        outputs=tuple(replace(o, expr=work(o.expr)) for o in made.outputs),
        flow=assigns(made.flow),
        sample=assigns(made.sample),
    )


def _spread(rows: tuple[Any, ...], work: Callable[[Any], Iterator[Any]]) -> Iterator[tuple[Any, ...]]:
    """The rows with one of them replaced, for every replacement of every row."""
    for i, row in enumerate(rows):
        for other in work(row):
            yield (*rows[:i], other, *rows[i + 1 :])


def _of_inputs(made: StepLaw) -> Iterator[StepLaw]:
    def others(u: Any) -> Iterator[Any]:
        if u.type.kind is not Kind.BOOL:
            for end in ("low", "high"):
                yield from (replace(u, **{end: near}) for near in _near(getattr(u, end), made.format))

    yield from (replace(made, inputs=rows) for rows in _spread(made.inputs, others))


def _of_parameters(made: StepLaw) -> Iterator[StepLaw]:
    def others(p: Any) -> Iterator[Any]:
        for i, value in enumerate(p.default):
            for near in _near(value, made.format):
                yield replace(p, default=(*p.default[:i], near, *p.default[i + 1 :]))

    yield from (replace(made, parameters=rows) for rows in _spread(made.parameters, others))


def _of_tops(made: StepLaw) -> Iterator[StepLaw]:
    """Where timers hold."""

    def others(x: Any) -> Iterator[Any]:
        if x.kind == "timer":
            yield from (replace(x, maximum=near) for near in _near(x.maximum, made.format) if int(near) > 0)

    yield from (replace(made, states=rows) for rows in _spread(made.states, others))


def _of_clamps(made: StepLaw) -> Iterator[StepLaw]:
    def others(a: Any) -> Iterator[Any]:
        if a.clamp is not None:
            low, high = a.clamp
            yield from (replace(a, clamp=(near, high)) for near in _near(low, made.format))
            yield from (replace(a, clamp=(low, near)) for near in _near(high, made.format))

    def of_jump(j: Any) -> Iterator[Any]:
        yield from (replace(j, assigns=rows) for rows in _spread(j.assigns, others))

    yield from (replace(made, flow=rows) for rows in _spread(made.flow, others))
    yield from (replace(made, sample=rows) for rows in _spread(made.sample, others))
    yield from (replace(made, outputs=rows) for rows in _spread(made.outputs, others))
    yield from (replace(made, jumps=rows) for rows in _spread(made.jumps, of_jump))


def _of_tables(made: StepLaw) -> Iterator[StepLaw]:
    def others(table: Any) -> Iterator[Any]:
        if isinstance(table, StepTable):
            for rows in _spread(table.y, lambda v: iter(_near(v, made.format))):
                yield replace(table, y=rows)
        else:
            for line in _spread(table.z, lambda r: _spread(r, lambda v: iter(_near(v, made.format)))):
                yield replace(table, z=line)

    yield from (replace(made, tables=rows) for rows in _spread(made.tables, others))
