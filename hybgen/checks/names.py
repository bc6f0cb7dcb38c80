"""Names that nothing uses."""

from __future__ import annotations

import re
from collections.abc import Iterator

from hybgen.checks.report import warning
from hybgen.checks.view import read_names
from hybgen.diag.finding import Finding
from hybgen.diag.span import Span
from hybgen.expr.core import Node
from hybgen.law.model import Law


def questions(law: Law) -> list[Finding]:
    """A warning for each declared name that nothing reads."""
    used = _constants_written(law)
    used |= {name for reader, node in _expressions(law) for name in read_names(law, node) if name != reader}
    return [
        warning("HG305", "names", span, name, f"{what} '{name}' is never used", "use it, or take it out")
        for what, name, span in _declared(law)
        if name not in used
    ]


def _constants_written(law: Law) -> set[str]:
    """Constants that stand in an expression's text: folded into whole numbers they leave no trace in its tree."""
    texts = [law.flow.text]
    for items in (law.jumps, law.flow.rates, law.sample, law.terms, law.outputs, law.claims, law.assume):
        texts += [item.text for item in items]
    texts += [a.text for j in law.jumps for a in j.assigns]
    return {p.name for p in law.parameters if not p.tunable} & set(re.findall(r"\w+", " ".join(texts)))


def _declared(law: Law) -> Iterator[tuple[str, str, Span]]:
    for what, items in (
        ("input", law.inputs),
        ("parameter", law.parameters),
        ("state", law.states),
        ("term", law.terms),
        ("table", law.tables),
    ):
        for item in items:
            yield what, item.name, item.span


def _expressions(law: Law) -> Iterator[tuple[str, Node]]:
    """Every expression outside of terms, with the state it is for (its own new value is no use of a state)."""
    for jump in law.jumps:
        yield "", jump.condition
        yield from ((a.state, a.expr) for a in jump.assigns)
    if law.flow.condition is not None:
        yield "", law.flow.condition
    yield from ((a.state, a.expr) for a in (*law.flow.rates, *law.sample))
    yield from (("", node) for output in law.outputs for node in output.exprs)
    yield from (("", node) for claim in law.claims for node in (claim.expr, claim.exception) if node is not None)
    yield from (("", a.condition) for a in law.assume)
