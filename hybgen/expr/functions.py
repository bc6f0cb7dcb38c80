"""The functions of the language on checked values."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from fractions import Fraction

from hybgen.diag.finding import Findings
from hybgen.diag.span import Span
from hybgen.expr.algebra import bounds_of, numeric, stop, sum_products
from hybgen.expr.constant import PI
from hybgen.expr.core import INT, REAL, Const, Kind, op
from hybgen.expr.quantity import Typed, describe, fit_unit, shape_words, to_integers, to_reals
from hybgen.expr.scope import Lookup
from hybgen.expr.units import ONE, Unit

Apply = Callable[[list[Typed], Span, Findings], Typed]


@dataclass(frozen=True, slots=True)
class Function:
    """A function: how many arguments, and what it makes of them."""

    least: int
    most: int
    apply: Apply


def pi(span: Span) -> Typed:
    """The constant pi."""
    return Typed((Const(PI, REAL, span),), REAL, const=(PI,), span=span)


def unify(values: list[Typed], span: Span, findings: Findings) -> list[Typed]:
    """Values that may stand for each other: one kind, shape and unit."""
    kinds = {v.type.kind for v in values}
    if kinds <= {Kind.REAL, Kind.INT}:
        return _unify_numbers(values, span, findings)
    first = values[0]
    for other in values[1:]:
        if other.type.kind is not first.type.kind or other.type.values != first.type.values:
            raise stop(findings, "HG204", other.span, f"this is {describe(other)}, the first one is {describe(first)}")
    return values


def _unify_numbers(values: list[Typed], span: Span, findings: Findings) -> list[Typed]:
    if any(v.type == INT for v in values) and all(v.type == INT or v.whole for v in values):
        return [to_integers(v) for v in values]
    values = [to_reals(v) for v in values]
    first = next((v for v in values if not v.zero), values[0])
    values = [fit_unit(v, first.unit, "the other one", findings) for v in values]
    for other in values:
        if other.shape != first.shape:
            raise stop(
                findings, "HG208", span, f"{shape_words(first.shape)} and {shape_words(other.shape)} don't go together"
            )
    return values


def gathered(values: list[Typed], span: Span) -> Typed:
    """A value without trees that uses what the values use."""
    first = values[0]
    return Typed(
        (),
        first.type,
        first.shape,
        first.unit,
        names=frozenset[str]().union(*(v.names for v in values)),
        uses_jumped=any(v.uses_jumped for v in values),
        span=span,
    )


def scalars(values: list[Typed], what: str, findings: Findings) -> list[Typed]:
    """The values, known to be single numbers; `what` takes them."""
    for value in values:
        numeric(value, f"{what} takes numbers", findings)
        if value.shape:
            raise stop(findings, "HG208", value.span, f"{what} takes single values, this is {shape_words(value.shape)}")
    return values


def _extreme(name: str) -> Apply:
    def apply(values: list[Typed], span: Span, findings: Findings) -> Typed:
        values = unify(scalars(values, f"{name}()", findings), span, findings)
        whole = values[0].type == INT
        node = values[0].nodes[0]
        for value in values[1:]:
            node = op(f"i{name}" if whole else name, node, value.nodes[0], span=span)
        bounds = None
        if whole:
            pick = min if name == "min" else max
            ends = [bounds_of(v) for v in values]
            bounds = pick(e[0] for e in ends), pick(e[1] for e in ends)
        const = None
        if all(v.const is not None for v in values):
            const = ((min if name == "min" else max)(v.const[0] for v in values if v.const is not None),)
        return replace(gathered(values, span), nodes=(node,), bounds=bounds, const=const if not whole else None)

    return apply


def _clamp(values: list[Typed], span: Span, findings: Findings) -> Typed:
    value, low, high = unify(scalars(values, "clamp()", findings), span, findings)
    if low.const is not None and high.const is not None and low.const[0] > high.const[0]:
        raise stop(findings, "HG216", span, "clamp(x, low, high): low is above high")
    whole = value.type == INT
    node = op("iclamp" if whole else "clamp", value.nodes[0], low.nodes[0], high.nodes[0], span=span)
    bounds = None
    if whole:
        (a, b), (c, d), (e, f) = bounds_of(value), bounds_of(low), bounds_of(high)
        bounds = min(max(a, c), f, max(c, e)), max(min(b, f), d)
    const = None
    if value.const is not None and low.const is not None and high.const is not None:
        const = (min(max(value.const[0], low.const[0]), high.const[0]),)
    return replace(gathered([value, low, high], span), nodes=(node,), bounds=bounds, const=None if whole else const)


def _abs(values: list[Typed], span: Span, findings: Findings) -> Typed:
    (value,) = scalars(values, "abs()", findings)
    if value.unit.absolute:
        raise stop(findings, "HG213", span, "a temperature in degC has no magnitude", "subtract a reference first")
    whole = value.type == INT
    bounds = None
    if whole:
        low, high = bounds_of(value)
        bounds = max(low, -high, Fraction(0)), max(-low, high)
    const = (abs(value.const[0]),) if value.const else None
    return replace(
        value,
        nodes=(op("iabs" if whole else "abs", value.nodes[0], span=span),),
        bounds=bounds,
        const=const,
        timer=False,
        span=span,
    )


def _sign(values: list[Typed], span: Span, findings: Findings) -> Typed:
    (value,) = scalars(values, "sign()", findings)
    if value.unit.absolute:
        raise stop(findings, "HG213", span, "a temperature in degC has no sign", "subtract a reference first")
    if value.type == INT:
        return replace(
            value, nodes=(op("isign", value.nodes[0], span=span),), bounds=(Fraction(-1), Fraction(1)), span=span
        )
    const = (Fraction((value.const[0] > 0) - (value.const[0] < 0)),) if value.const else None
    return replace(
        value, nodes=(op("sign", value.nodes[0], span=span),), unit=ONE, const=const, zero=False, timer=False, span=span
    )


def _floor(values: list[Typed], span: Span, findings: Findings) -> Typed:
    (value,) = scalars(values, "floor()", findings)
    if value.type == INT:
        return value
    value = fit_unit(value, ONE, "the argument of floor()", findings)
    return replace(
        value, nodes=(op("floor", value.nodes[0], span=span),), const=None, zero=False, timer=False, span=span
    )


def _dot(values: list[Typed], span: Span, findings: Findings) -> Typed:
    a, b = (to_reals(numeric(v, "vectors have numbers", findings)) for v in values)
    if len(a.shape) != 1 or a.shape != b.shape:
        raise stop(
            findings,
            "HG208",
            span,
            f"dot() takes two vectors of one length, not {shape_words(a.shape)} and {shape_words(b.shape)}",
        )
    node = sum_products(list(zip(a.nodes, b.nodes, strict=True)), span)
    return replace(gathered([a, b], span), nodes=(node,), shape=(), unit=_times(a, b, span, findings))


def _cross(values: list[Typed], span: Span, findings: Findings) -> Typed:
    a, b = (to_reals(numeric(v, "vectors have numbers", findings)) for v in values)
    if a.shape != (3,) or b.shape != (3,):
        raise stop(
            findings,
            "HG208",
            span,
            f"cross() takes two vectors of 3, not {shape_words(a.shape)} and {shape_words(b.shape)}",
        )
    nodes = tuple(
        op("sub", op("mul", a.nodes[i], b.nodes[j], span=span), op("mul", a.nodes[j], b.nodes[i], span=span), span=span)
        for i, j in ((1, 2), (2, 0), (0, 1))
    )
    return replace(gathered([a, b], span), nodes=nodes, unit=_times(a, b, span, findings))


def _times(a: Typed, b: Typed, span: Span, findings: Findings) -> Unit:
    if a.unit.absolute or b.unit.absolute:
        raise stop(findings, "HG213", span, "temperatures in degC can't be multiplied", "subtract a reference first")
    return a.unit * b.unit


def lookup(table: Lookup, values: list[Typed], span: Span, findings: Findings) -> Typed:
    """curve(u), or map(u, v): as many values as the table has inputs."""
    words = ["the input"] if len(table.takes) == 1 else ["the first input", "the second input"]
    values = [
        fit_unit(to_reals(value), unit, f"{word} of {table.name}()", findings)
        for value, unit, word in zip(scalars(values, f"{table.name}()", findings), table.takes, words, strict=True)
    ]
    node = op("lookup" if len(values) == 1 else "lookup2", *(v.nodes[0] for v in values), span=span, table=table.name)
    merged = gathered(values, span)
    return replace(merged, nodes=(node,), type=REAL, unit=table.gives, names=merged.names | {table.name})


def stack(items: list[Typed], span: Span, findings: Findings) -> Typed:
    """[a, b, c]: numbers of one unit (or vectors, as the rows of a matrix)."""
    for item in items:
        numeric(item, "a vector has numbers", findings)
    items = [to_reals(i) for i in unify(items, span, findings)]
    if len(items[0].shape) > 1:
        raise stop(findings, "HG208", span, "there are vectors and matrices, nothing beyond")
    const = None
    if all(i.const is not None for i in items):
        const = tuple(c for i in items for c in (i.const or ()))
    nodes = tuple(n for i in items for n in i.nodes)
    return replace(gathered(items, span), nodes=nodes, shape=(len(items), *items[0].shape), const=const)


def component(base: Typed, indexes: list[int], span: Span, findings: Findings) -> Typed:
    """base[i] or base[i, j]; a row of a matrix is a vector."""
    if not base.shape or len(indexes) > len(base.shape):
        asked = ", ".join(map(str, indexes))
        raise stop(findings, "HG208", span, f"this is {describe(base)}: it has no component [{asked}]")
    flat, rest = 0, base.shape[len(indexes) :]
    for n, index in zip(base.shape, indexes, strict=False):
        if index >= n:
            raise stop(findings, "HG209", span, f"index {index} is beyond the end: the last one is {n - 1}")
        flat = flat * n + index
    width = 1
    for n in rest:
        flat, width = flat * n, width * n
    part = slice(flat, flat + width)
    const = base.const[part] if base.const else None
    return replace(base, nodes=base.nodes[part], shape=rest, const=const, span=span)


FUNCTIONS: dict[str, Function] = {
    "abs": Function(1, 1, _abs),
    "min": Function(2, 64, _extreme("min")),
    "max": Function(2, 64, _extreme("max")),
    "clamp": Function(3, 3, _clamp),
    "sign": Function(1, 1, _sign),
    "floor": Function(1, 1, _floor),
    "dot": Function(2, 2, _dot),
    "cross": Function(2, 2, _cross),
}
