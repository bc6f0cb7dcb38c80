"""What the readers of the parts of a law share: findings, numbers, expressions."""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from fractions import Fraction

from hybgen.diag.finding import Findings
from hybgen.diag.span import Span
from hybgen.diag.suggest import nearest
from hybgen.expr import units
from hybgen.expr.constant import convert, value_in
from hybgen.expr.core import Node as Tree
from hybgen.expr.extent import DEEPEST_TEXT, Extent, too_deep
from hybgen.expr.parser import parse
from hybgen.expr.show import show
from hybgen.expr.tree import Cases, Expr, Number, Vector
from hybgen.expr.units import ONE, SECOND, BadUnit, Unit
from hybgen.law.document import Mapping, Node, Scalar, Sequence

MOST_COMPONENTS = 64
MOST_TEXT = 10000
"""Characters of one expression."""
MOST_LETTERS = 100000
"""Characters of all expressions and constants of a law together."""
MOST_WORK = 40000
"""Operations of all expressions of a law together, vectors and powers written out."""

_MEASURED = re.compile(
    r"\s*(-?)([0-9]{1,30}(?:\.[0-9]{0,30})?(?:[eE][+-]?[0-9]{1,3})?)\s*([A-Za-zµ%/].*?)\s*\Z", re.DOTALL
)


def _measured(node: Scalar) -> Number | None:
    """A number with all the rest as its unit: in a declaration `8 V*s/m` needs no parentheses."""
    found = _MEASURED.match(node.text) if len(node.text) <= MOST_TEXT else None
    if found is None or (found[3][0] == "/" and not node.text[: found.start(3)].endswith(" ")):
        return None
    try:
        unit = units.parse(found[3])
    except BadUnit:
        return None
    value = Fraction(found[2]) * (-1 if found[1] else 1)
    return Number(value, unit, node.text.strip(), node.span)


class Work:
    """Counts what a law costs to read, and stops where that is beyond any law."""

    def __init__(self, findings: Findings) -> None:
        self.findings = findings
        self.operations = MOST_WORK
        self.letters = MOST_LETTERS

    def spend(self, amount: int, span: Span) -> None:
        """Count operations; raises LawError with all findings so far when there are too many."""
        self.operations -= amount
        if self.operations < 0:
            message = f"written out, the expressions up to here have more than {MOST_WORK} operations"
            self.findings.error("HG139", span, message, hint="use fewer or smaller vectors and matrices")
            self.findings.stop()

    def read(self, letters: int, span: Span) -> None:
        """Count characters of expressions; raises LawError with all findings so far when there are too many."""
        self.letters -= letters
        if self.letters < 0:
            message = f"the expressions up to here have more than {MOST_LETTERS} characters: no law is that long"
            self.findings.error("HG139", span, message)
            self.findings.stop()


@dataclass(frozen=True, slots=True)
class Context:
    """Reads pieces of a document, adding findings."""

    findings: Findings
    work: Work = field(init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "work", Work(self.findings))

    def spend(self, nodes: tuple[Tree, ...], span: Span) -> None:
        """Count the operations of trees."""
        extent = Extent()
        self.work.spend(sum(extent.of(n)[0] for n in nodes), span)

    def error(self, code: str, span: Span, message: str, hint: str | None = None) -> None:
        """Add an error."""
        self.findings.error(code, span, message, hint=hint)

    def unit(self, group: Mapping, key: str = "unit") -> Unit:
        """The unit under a key; dimensionless if there is none."""
        node = group.get(key)
        if not isinstance(node, Scalar) or node.text in ("", "1"):
            return ONE
        try:
            return units.parse(node.text)
        except BadUnit as bad:
            close = nearest(bad.name, units.known_names()) if bad.name else None
            self.error(
                "HG214",
                node.locate(bad.offset, max(1, len(bad.name))),
                bad.message,
                f"did you mean '{close}'?" if close else None,
            )
            return ONE

    def text(self, group: Mapping, key: str) -> str:
        """The text under a key, on one line."""
        node = group.get(key)
        return " ".join(node.text.split()) if isinstance(node, Scalar) else ""

    def flag(self, group: Mapping, key: str) -> bool:
        """true or false under a key; false if there is none."""
        node = group.get(key)
        return isinstance(node, Scalar) and node.text == "true"

    def whole(self, group: Mapping, key: str) -> int | None:
        """A whole number under a key."""
        node = group.get(key)
        return int(node.text) if isinstance(node, Scalar) else None

    def size(self, group: Mapping) -> int | None:
        """The number of components under `vector`."""
        n = self.whole(group, "vector")
        if n is not None and n > MOST_COMPONENTS:
            node = group.get("vector")
            assert node is not None
            self.error("HG139", node.span, f"a vector has at most {MOST_COMPONENTS} components, not {n}")
            return MOST_COMPONENTS
        return n

    def expression(self, node: Node) -> Expr | None:
        """The tree of an expression: text, cases, or a vector; None after adding findings."""
        expr = self._expression(node)
        if expr is not None and (part := too_deep(expr)) is not None:
            message = f"this expression is nested deeper than {DEEPEST_TEXT} operations"
            self.error("HG153", part.span, message, "name pieces of it under 'terms'")
            return None
        return expr

    def parsed(self, node: Scalar) -> Expr | None:
        """The tree of a text."""
        if len(node.text) > MOST_TEXT:
            message = f"this expression has more than {MOST_TEXT} characters"
            self.error("HG153", node.span, message, "name pieces of it under 'terms'")
            return None
        self.work.read(len(node.text), node.span)
        return parse(node.text, node.locator(), self.findings)

    def _expression(self, node: Node) -> Expr | None:
        if isinstance(node, Scalar):
            return self.parsed(node)
        assert isinstance(node, Sequence)
        if not any(isinstance(i, Mapping) for i in node.items):
            items = [self._expression(i) for i in node.items]
            return (
                None if any(i is None for i in items) else Vector(tuple(i for i in items if i is not None), node.span)
            )
        branches: list[tuple[Expr, Expr]] = []
        good, otherwise = True, None
        for item in node.items:
            assert isinstance(item, Mapping)
            parts = {k.text: self._expression(v) for k, v in item.entries}
            good = good and all(v is not None for v in parts.values())
            when, value = parts.get("when"), parts.get("is")
            if when is not None and value is not None:
                branches.append((when, value))
            otherwise = parts.get("otherwise", otherwise)
        return Cases(tuple(branches), otherwise, node.span) if good and otherwise is not None else None

    def written(self, node: Node, expr: Expr) -> str:
        """What the author wrote, on one line."""
        return " ".join(node.text.split()) if isinstance(node, Scalar) else show(expr)

    def number(self, node: Node | None, unit: Unit | None, difference: bool = False) -> tuple[Fraction, Unit] | None:
        """The exact value of a constant, in a unit (None: the written one)."""
        if not isinstance(node, Scalar):
            return None
        self.work.read(len(node.text), node.span)
        expr = _measured(node) or self.parsed(node)
        if expr is not None and too_deep(expr) is not None:
            self.error("HG153", node.span, "this constant is nested too deep")
            return None
        return None if expr is None else value_in(expr, unit, self.findings, difference)

    def value(self, node: Node | None, unit: Unit, difference: bool = False) -> Fraction | None:
        """The exact value of a constant, in a unit."""
        found = self.number(node, unit, difference)
        return None if found is None else found[0]

    def positive(
        self, node: Node | None, unit: Unit, what: str, zero: bool = False, difference: bool = True
    ) -> Fraction | None:
        """A value above zero (or zero too)."""
        found = self.value(node, unit, difference)
        if found is not None and node is not None and (found < 0 or (found == 0 and not zero)):
            self.error("HG140", node.span, f"{what} has to be {'zero or more' if zero else 'above zero'}")
            return None
        return found

    def time(self, node: Node | None, what: str) -> Fraction | None:
        """A time above zero in seconds; a bare number is none."""
        found = self.number(node, None)
        if found is None or node is None:
            return None
        value, unit = found
        if not unit.alike(SECOND):
            written = "a bare number" if unit.plain else f"in {unit}"
            self.error("HG202", node.span, f"{what} is a time, this is {written}", "give its unit, such as 100 ms")
            return None
        if value <= 0:
            self.error("HG140", node.span, f"{what} has to be above zero")
            return None
        return convert(value, unit, SECOND)

    def pair(self, node: Node | None, unit: Unit) -> tuple[Fraction, Fraction] | None:
        """A range."""
        if not isinstance(node, Sequence):
            return None
        low, high = (self.value(i, unit) for i in node.items)
        if low is None or high is None:
            return None
        if low >= high:
            self.error(
                "HG131",
                node.span,
                "a range is [low, high] with low below high",
                "exchange the two" if low > high else None,
            )
            return None
        return low, high
