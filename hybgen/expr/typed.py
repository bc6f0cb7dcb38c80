"""Surface trees -> typed scalar trees: names resolved, types and units checked, vectors taken apart.

Rules: sums and comparisons need the same unit including its scale; products multiply units; 0 fits any unit;
constants compared with or assigned to a timer are converted. Integers stay integers through + - * and the
whole-number functions as long as 32 bits are shown to hold the result; they become reals beside a real.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from fractions import Fraction
from typing import assert_never

from hybgen.diag.finding import Findings
from hybgen.diag.span import NOWHERE, Span
from hybgen.diag.suggest import nearest
from hybgen.expr import algebra, functions, relations
from hybgen.expr.core import BOOL, REAL, Const, Kind, Ref, RefKind, op, truth
from hybgen.expr.elementary import ELEMENTARY
from hybgen.expr.extent import DEEPEST, LARGEST, Extent
from hybgen.expr.quantity import Stop, Typed, Want, coerce, enum_value
from hybgen.expr.scope import Scope, Symbol
from hybgen.expr.tree import Binary, Call, Cases, Chain, Expr, Item, Logic, Name, Number, Truth, Unary, Vector
from hybgen.expr.units import ONE

__all__ = ["Typed", "Want", "typed"]


def typed(expr: Expr, scope: Scope, want: Want | None, findings: Findings) -> Typed | None:
    """The typed trees of an expression, one for each component (row-major).

    With `want`, the result is made to fit it (or findings say why not). None after adding findings.
    """
    checker = _Checker(scope, findings)
    try:
        found = checker.check(expr, want)
        return coerce(found, want, findings) if want is not None else checker.known(found)
    except Stop:
        return None


_NOT_YET = frozenset({"qmul", "qconj", "qrotate"})
_FUNCTIONS = functions.FUNCTIONS | ELEMENTARY
_QUESTIONS = frozenset({"valid", "jumped", "choose"})


def function_names() -> frozenset[str]:
    """Every function name of the language, those that come later included."""
    return _NOT_YET | _QUESTIONS | frozenset(_FUNCTIONS)


_KIND_WORDS = {
    RefKind.INPUT: "an input",
    RefKind.VALID: "valid()",
    RefKind.PARAMETER: "a parameter",
    RefKind.STATE: "a state",
    RefKind.TERM: "a term",
    RefKind.JUMPED: "jumped()",
    RefKind.OUTPUT: "an output",
    RefKind.LOCAL: "a local",
}


@dataclass(frozen=True, slots=True)
class _Checker:
    """Checks one expression; raises Stop after adding a finding that leaves nothing to go on with."""

    scope: Scope
    findings: Findings
    extent: Extent = field(default_factory=Extent)

    def stop(self, code: str, span: Span, message: str, hint: str | None = None) -> Stop:
        self.findings.error(code, span, message, hint=hint)
        return Stop()

    def known(self, found: Typed) -> Typed:
        """A value without expectation has to have a type of its own."""
        if found.bare is not None:
            raise self.unknown(found.bare, found.span)
        return found

    def check(self, expr: Expr, want: Want | None = None) -> Typed:
        """The checked value of a piece, which may not grow beyond all reason when vectors and powers are written out."""
        found = self.checked(expr, want)
        if not self.extent.fits(found.nodes):
            raise self.stop(
                "HG153",
                expr.span,
                f"written out, this has more than {LARGEST} operations, or {DEEPEST} above one another",
                "name pieces of it under 'terms', or use fewer components",
            )
        return found

    def checked(self, expr: Expr, want: Want | None) -> Typed:
        match expr:
            case Number():
                return self.number(expr)
            case Truth():
                return Typed((truth(expr.value, expr.span),), BOOL, span=expr.span)
            case Name():
                return self.name(expr, want)
            case Unary(op="-", operand=Number() as number):
                return self.number(Number(-number.value, number.unit, f"-{number.text}", expr.span))
            case Unary(op="-"):
                return algebra.negate(self.value(expr.operand), expr.span, self.findings)
            case Unary():
                return relations.inverse(self.value(expr.operand), expr.span, self.findings)
            case Binary(op="**"):
                return algebra.power(self.value(expr.left), self.exponent(expr.right), expr.span, self.findings)
            case Binary():
                left, right = self.both(expr.left, expr.right)
                return algebra.binary(expr.op, left, right, expr.span, self.findings)
            case Chain():
                return self.chain(expr)
            case Logic():
                return relations.logic(expr.op, self.all(expr.operands), expr.span, self.findings)
            case Item():
                return self.item(expr)
            case Call():
                return self.call(expr, want)
            case Vector():
                return self.vector(expr, want)
            case Cases():
                return self.cases(expr, want)
            case _:
                assert_never(expr)

    def value(self, expr: Expr) -> Typed:
        return self.known(self.check(expr))

    def all(self, exprs: tuple[Expr, ...]) -> list[Typed]:
        """Every operand checked, so that all mistakes are reported, before the first one stops."""
        found: list[Typed | None] = []
        for expr in exprs:
            try:
                found.append(self.value(expr))
            except Stop:
                found.append(None)
        if any(f is None for f in found):
            raise Stop
        return [f for f in found if f is not None]

    def both(self, left: Expr, right: Expr) -> tuple[Typed, Typed]:
        first, second = self.all((left, right))
        return first, second

    def number(self, expr: Number) -> Typed:
        unit = expr.unit or ONE
        return Typed(
            (Const(expr.value, REAL, expr.span),),
            REAL,
            unit=unit,
            const=(expr.value,),
            zero=expr.value == 0 and expr.unit is None,
            span=expr.span,
        )

    def exponent(self, expr: Expr) -> int:
        sign = 1
        while isinstance(expr, Unary):
            sign, expr = -sign, expr.operand
        assert isinstance(expr, Number)
        if expr.value.denominator != 1 or expr.value > 16:
            raise self.stop(
                "HG212", expr.span, "a power has to be a whole number from -16 to 16", "write a product for others"
            )
        return sign * int(expr.value)

    def name(self, expr: Name, want: Want | None) -> Typed:
        if want is not None and want.type.kind is Kind.ENUM and expr.name in want.type.values:
            return enum_value(expr.name, want.type, expr.span)
        symbol = self.scope.symbols.get(expr.name)
        if symbol is not None:
            return self.symbol(symbol, expr.span)
        if expr.name == "pi":
            return functions.pi(expr.span)
        return Typed((), REAL, bare=expr.name, span=expr.span)

    def symbol(self, symbol: Symbol, span: Span) -> Typed:
        if symbol.kind not in self.scope.allow:
            raise self.stop(
                "HG210", span, f"{_KIND_WORDS[symbol.kind]} ('{symbol.name}') can't be used {self.scope.place}"
            )
        if symbol.jumped and RefKind.JUMPED not in self.scope.allow:
            raise self.stop(
                "HG210",
                span,
                f"'{symbol.name}' asks jumped(), which can't be used {self.scope.place}",
                "jumped() is known after the jumps: in outputs, sample and flow",
            )
        count = 1
        for n in symbol.shape:
            count *= n
        nodes = tuple(
            Ref(symbol.kind, symbol.name, symbol.type, i if symbol.shape else None, span) for i in range(count)
        )
        const = None
        if symbol.constant is not None and symbol.type.kind in (Kind.REAL, Kind.INT):
            const = tuple(Fraction(c) for c in symbol.constant)
        return Typed(
            nodes,
            symbol.type,
            symbol.shape,
            symbol.unit,
            const=const,
            timer=symbol.timer,
            bounds=symbol.bounds,
            names=frozenset({symbol.name}),
            uses_jumped=symbol.jumped,
            span=span,
        )

    def unknown(self, name: str, span: Span) -> Stop:
        owners = [s.name for s in self.scope.symbols.values() if s.type.kind is Kind.ENUM and name in s.type.values]
        if owners:
            return self.stop(
                "HG201",
                span,
                f"'{name}' is a value of {owners[0]}, not a quantity",
                f"compare it: {owners[0]} == {name}",
            )
        if name in self.scope.tables:
            return self.stop("HG201", span, f"'{name}' is a table", f"write {name}(...) with what it takes")
        close = nearest(name, self.scope.symbols)
        return self.stop("HG201", span, f"unknown name '{name}'", f"did you mean '{close}'?" if close else None)

    def chain(self, expr: Chain) -> Typed:
        operands: list[Typed | None] = []
        for operand in expr.operands:
            try:
                operands.append(self.check(operand))
            except Stop:
                operands.append(None)
        if any(o is None for o in operands):
            raise Stop
        known = self.resolved([o for o in operands if o is not None], expr.operands)
        links = [
            relations.compare(sign, a, b, expr.span if len(expr.ops) == 1 else _join(a.span, b.span), self.findings)
            for sign, a, b in zip(expr.ops, known, known[1:], strict=False)
        ]
        return links[0] if len(links) == 1 else relations.logic("and", links, expr.span, self.findings)

    def resolved(self, operands: list[Typed], exprs: tuple[Expr, ...]) -> list[Typed]:
        """Names that mean a logic value, found from the other side of a comparison."""
        owner = next((o.type for o in operands if o.bare is None and o.type.kind is Kind.ENUM), None)
        found = []
        for operand, expr in zip(operands, exprs, strict=True):
            named = expr.name if isinstance(expr, Name) else operand.bare
            if owner is not None and named in owner.values and operand.type is not owner:
                operand = enum_value(named, owner, operand.span)
            elif operand.bare is not None:
                if owner is not None:
                    close = nearest(operand.bare, owner.values)
                    raise self.stop(
                        "HG201",
                        operand.span,
                        f"'{operand.bare}' is no value of {owner.owner}",
                        f"did you mean '{close}'?" if close else f"its values are {', '.join(owner.values)}",
                    )
                raise self.unknown(operand.bare, operand.span)
            found.append(operand)
        return found

    def item(self, expr: Item) -> Typed:
        base = self.value(expr.base)
        indexes = []
        for index in expr.indexes:
            if not isinstance(index, Number) or index.value.denominator != 1 or index.unit is not None:
                raise self.stop("HG209", index.span, "an index has to be a whole number, counted from 0")
            indexes.append(int(index.value))
        return functions.component(base, indexes, expr.span, self.findings)

    def call(self, expr: Call, want: Want | None) -> Typed:
        name = expr.function
        if name in _NOT_YET:
            raise self.stop("HG190", expr.span, f"{name}() is not available yet")
        match name:
            case "valid" | "jumped":
                return self.question(expr)
            case "choose":
                self.arity(expr, 3, 3)
                return self.cases(Cases(((expr.args[0], expr.args[1]),), expr.args[2], expr.span), want)
        if name in self.scope.tables:
            table = self.scope.tables[name]
            self.arity(expr, len(table.takes), len(table.takes))
            return functions.lookup(table, self.all(expr.args), expr.span, self.findings)
        row = _FUNCTIONS.get(name)
        if row is None:
            close = nearest(name, function_names() | set(self.scope.tables))
            hint = f"did you mean '{close}'?" if close else None
            if name in self.scope.symbols:
                hint = "an operator before the parenthesis is missing"
            raise self.stop("HG206", expr.span, f"unknown function '{name}'", hint)
        self.arity(expr, row.least, row.most)
        return row.apply(self.all(expr.args), expr.span, self.findings)

    def arity(self, expr: Call, least: int, most: int) -> None:
        if not least <= len(expr.args) <= most:
            wanted = str(least) if least == most else f"{least} or more"
            raise self.stop(
                "HG207",
                expr.span,
                f"{expr.function}() takes {wanted} argument{'s' if wanted != '1' else ''}, not {len(expr.args)}",
            )

    def question(self, expr: Call) -> Typed:
        self.arity(expr, 1, 1)
        kind = RefKind(expr.function)
        if kind not in self.scope.allow:
            raise self.stop("HG210", expr.span, f"{kind}() can't be used {self.scope.place}")
        asked = expr.args[0]
        known = (
            self.scope.jumps
            if kind is RefKind.JUMPED
            else tuple(
                s.name for s in self.scope.symbols.values() if s.kind is RefKind.INPUT and s.type.kind is not Kind.BOOL
            )
        )
        if not isinstance(asked, Name) or asked.name not in known:
            what = "the name of a jump" if kind is RefKind.JUMPED else "the name of an input that is a number"
            close = nearest(asked.name, known) if isinstance(asked, Name) else None
            raise self.stop(
                "HG215", asked.span, f"{kind}() takes {what}", f"did you mean '{close}'?" if close else None
            )
        names = frozenset({asked.name}) if kind is RefKind.VALID else frozenset[str]()
        return Typed(
            (Ref(kind, asked.name, BOOL, None, expr.span),),
            BOOL,
            names=names,
            span=expr.span,
            uses_jumped=kind is RefKind.JUMPED,
        )

    def vector(self, expr: Vector, want: Want | None) -> Typed:
        if not expr.items:
            raise self.stop("HG208", expr.span, "a vector has at least one component")
        inner = replace(want, shape=want.shape[1:]) if want is not None and want.shape else None
        items = []
        for item in expr.items:
            found = self.check(item, inner)
            items.append(coerce(found, inner, self.findings) if inner is not None else self.known(found))
        return functions.stack(items, expr.span, self.findings)

    def cases(self, expr: Cases, want: Want | None) -> Typed:
        conditions = [relations.condition(self.value(c), self.findings) for c, _ in expr.branches]
        exprs = [v for _, v in expr.branches] + [expr.otherwise]
        if want is not None:
            values = [coerce(self.check(v, want), want, self.findings) for v in exprs]
        else:
            values = self.resolved([self.check(v) for v in exprs], tuple(exprs))
            values = functions.unify(values, expr.span, self.findings)
        result = values[-1]
        for asked, value in zip(reversed(conditions), reversed(values[:-1]), strict=True):
            nodes = tuple(
                op("select", asked.nodes[0], a, b, span=expr.span)
                for a, b in zip(value.nodes, result.nodes, strict=True)
            )
            result = replace(_merged(asked, value, result), nodes=nodes, span=expr.span)
        return result


def _merged(asked: Typed, value: Typed, rest: Typed) -> Typed:
    bounds = None
    if value.bounds and rest.bounds:
        bounds = min(value.bounds[0], rest.bounds[0]), max(value.bounds[1], rest.bounds[1])
    return Typed(
        value.nodes,
        value.type,
        value.shape,
        value.unit,
        bounds=bounds,
        names=asked.names | value.names | rest.names,
        uses_jumped=asked.uses_jumped or value.uses_jumped or rest.uses_jumped,
    )


def _join(first: Span, last: Span) -> Span:
    if first.line != last.line or last.column < first.column or first is NOWHERE:
        return first
    return Span(first.file, first.line, first.column, last.column + last.length - first.column, first.text)
