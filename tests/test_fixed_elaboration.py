"""From a law to raw integers: every interval holds, every operation rounds once, every error is inside its bound.

Random laws; all their expressions on raw values at the ends of their ranges and anywhere inside, against fractions.
"""

from __future__ import annotations

import random
from collections.abc import Iterator
from fractions import Fraction

from hybgen.diag.finding import LawError
from hybgen.expr.core import REAL, Node, Op, RefKind
from hybgen.kernels.errors import RELATIVE
from hybgen.kernels.word import ELEMENTARY
from hybgen.step.model import StepAssign
from hybgen.step.scaled import Scaled
from tests.fixed import REFUSED, Elaborated, Exact, Raw, elaborated, operation, random_law, some_leaves

LAWS = range(160)
TRIES = 5


def worlds(seeds: range) -> Iterator[tuple[Elaborated, Raw, Exact]]:
    """Laws in fixed point, with raw values for their names."""
    for seed in seeds:
        dice = random.Random(seed)
        try:
            e = elaborated(random_law(seed))
        except LawError as error:
            assert any(f.code in REFUSED for f in error.findings), (seed, error)
            continue
        for _ in range(TRIES):
            leaves = some_leaves(e, dice)
            yield e, Raw(e.expressions, leaves), Exact(e.made, leaves, e.done.places)


def value(raw: Raw, x: Scaled) -> Fraction:
    return raw.of(x.node) * Fraction(2) ** -x.places


def test_every_value_is_inside_the_interval_that_proves_that_nothing_overflows() -> None:
    checked = 0
    for e, raw, _ in worlds(LAWS):
        for node, x in e.expressions.known.items():
            assert x.low <= raw.of(x.node) <= x.high, (e.made.law.name, node)
            checked += 1
    assert checked > 8000


def bound(node: Op, x: Scaled, e: Elaborated, true: Fraction) -> Fraction:
    """How far the result of one operation may be from the exact one on the same operands, in its units: one rounding to the
    places of the result, and one of the operands to places that they can share."""
    if node.op in ELEMENTARY:
        return 1 + Fraction(RELATIVE[node.op]) * abs(true) * Fraction(2) ** x.places
    return Fraction(4 if node.table else 1)


def operands(node: Op, e: Elaborated, raw: Raw) -> list[Fraction]:
    return [value(raw, e.expressions.real(a)) for a in node.args]


def test_every_operation_is_rounded_once_from_its_operands() -> None:
    seen: set[str] = set()
    for e, raw, _ in worlds(LAWS):
        tables = {t.name: t for t in e.made.tables}
        for node, x in list(e.expressions.known.items()):
            if not isinstance(node, Op) or node.op in ("to_real", "select"):
                continue
            true = operation(node, operands(node, e, raw), tables.get(node.table))
            off = abs(value(raw, x) - true) * Fraction(2) ** x.places
            assert off <= bound(node, x, e, true), (e.made.law.name, node.op, float(off), x.places)
            seen.add(node.op)
    assert seen >= {
        "add",
        "sub",
        "mul",
        "div",
        "min",
        "max",
        "clamp",
        "abs",
        "neg",
        "lookup",
        "lookup2",
        "sqrt",
        "atan2",
    }


def test_every_error_is_inside_its_bound() -> None:
    checked = 0
    for e, raw, exact in worlds(LAWS):
        for node, x in e.expressions.known.items():
            try:
                law_says = exact.of(node)
            except ZeroDivisionError:  # of the exact law, beyond its ranges: an unlimited state
                continue
            assert abs(value(raw, x) - law_says) <= x.error, (e.made.law.name, node, float(x.error))
            checked += 1
    assert checked > 8000


def stores(e: Elaborated) -> Iterator[tuple[StepAssign, StepAssign]]:
    """Each assignment of a real state: with exact constants, and on raw values."""
    pairs = [*zip(e.made.flow, e.done.flow, strict=True), *zip(e.made.sample, e.done.sample, strict=True)]
    for j, done in zip(e.made.jumps, e.done.jumps, strict=True):
        pairs += zip(j.assigns, done.assigns, strict=True)
    yield from ((a, b) for a, b in pairs if a.expr.type == REAL)


def chosen(node: Node, e: Elaborated, raw: Raw) -> Node:
    """The branch that raw values take."""
    while isinstance(node, Op) and node.op == "select":
        node = node.args[1 if raw.of(e.expressions.plain(node.args[0])) else 2]
    return node


def test_what_is_stored_is_rounded_to_the_state_and_held() -> None:
    checked = held = 0
    for e, raw, _ in worlds(LAWS):
        for before, after in stores(e):
            places, low, high = e.expressions.leaves[(RefKind.STATE, before.state)]
            x = e.expressions.real(chosen(before.expr, e, raw))
            got = raw.of(after.expr)
            if after.clamp is not None:
                assert after.clamp == (low, high) and e.made.law.state(before.state).limit
                got = max(low, min(high, got))
            wanted = max(Fraction(low), min(Fraction(high), value(raw, x) * Fraction(2) ** places))
            assert low <= got <= high
            assert abs(got - wanted) <= 1 + Fraction(2) ** (places - x.places), (e.made.law.name, before.text)
            checked, held = checked + 1, held + (got in (low, high))
    assert checked > 1200 and held > 100


def test_ends_of_ranges_are_raw_values_inside_them_and_not_the_last() -> None:
    for e, _, _ in worlds(range(60)):
        law = e.made.law
        done = {u.name: (u.low, u.high) for u in e.done.inputs}
        done |= {p.name: (p.low or 0, p.high or 0) for p in e.done.parameters}
        ranges = {u.name: (RefKind.INPUT, u.low, u.high) for u in law.inputs if u.type == REAL}
        ranges |= {p.name: (RefKind.PARAMETER, p.low, p.high) for p in law.tunables if p.type == REAL}
        for name, (kind, low, high) in ranges.items():
            assert low is not None and high is not None
            unit = Fraction(2) ** e.done.places[(kind, name)]
            first, last = (int(v) for v in done[name])
            assert -(2**31) + 1 < first < last < 2**31 - 1
            assert low * unit <= first < low * unit + 1 and high * unit - 1 < last <= high * unit
