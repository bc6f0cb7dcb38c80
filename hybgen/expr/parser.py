"""Tokens -> tree: a precedence parser that keeps the written order and exact places."""

from __future__ import annotations

from collections.abc import Callable

from hybgen.diag.finding import Findings
from hybgen.diag.span import Span
from hybgen.expr.tokens import Bad, Locate, Token, tokens
from hybgen.expr.tree import Binary, Call, Chain, Expr, Item, Logic, Name, Number, Truth, Unary, Vector

DEEPEST = 60
COMPARISONS = ("<=", ">=", "==", "!=", "<", ">")


def parse(text: str, locate: Locate, findings: Findings) -> Expr | None:
    """The tree of an expression, or None after adding findings."""
    try:
        parser = _Parser(text, tokens(text, locate, findings), locate, findings)
        return parser.whole()
    except Bad:
        return None


class _Parser:
    """A cursor over tokens; each method reads one level of precedence."""

    def __init__(self, text: str, made: list[Token], locate: Locate, findings: Findings) -> None:
        self.text = text
        self.tokens = made
        self.at = 0
        self.depth = 0
        self.locate = locate
        self.findings = findings

    @property
    def now(self) -> Token:
        return self.tokens[self.at]

    def take(self) -> Token:
        token = self.tokens[self.at]
        self.at += 1
        return token

    def sees(self, *texts: str) -> bool:
        return self.now.kind in ("sign", "keyword") and self.now.text in texts

    def span_from(self, start: int) -> Span:
        last = self.tokens[self.at - 1]
        return self.locate(start, last.offset + len(last.text) - start)

    def fail(self, code: str, token: Token, message: str, hint: str | None = None) -> Bad:
        self.findings.error(code, self.locate(token.offset, max(1, len(token.text))), message, hint=hint)
        return Bad()

    def whole(self) -> Expr:
        if self.now.kind == "end":
            raise self.fail("HG151", self.now, "an expression is missing here")
        tree = self.either()
        if self.now.kind != "end":
            raise self.surplus()
        return tree

    def surplus(self) -> Bad:
        token = self.now
        if token.text in (")", "]"):
            return self.fail("HG152", token, f"'{token.text}' closes nothing")
        hint = "an operator is missing" if token.kind in ("name", "number") else None
        if token.text == "," and self.depth == 0:
            hint = "inside { } put an expression with a comma in quotes"
        return self.fail("HG151", token, f"'{token.text}' does not belong here", hint)

    def either(self) -> Expr:
        self.depth += 1
        if self.depth > DEEPEST:
            raise self.fail(
                "HG153",
                self.now,
                f"this expression is nested deeper than {DEEPEST} levels",
                "name pieces of it under 'terms'",
            )
        tree = self.logic("or", lambda: self.logic("and", self.inverse))
        self.depth -= 1
        return tree

    def logic(self, word: str, level: Callable[[], Expr]) -> Expr:
        start = self.now.offset
        operands = [level()]
        while self.sees(word):
            self.take()
            operands.append(level())
        if len(operands) == 1:
            return operands[0]
        return Logic(word, tuple(operands), self.span_from(start))

    def inverse(self) -> Expr:
        starts = []
        while self.sees("not"):
            starts.append(self.take().offset)
            if len(starts) > DEEPEST:
                raise self.fail("HG153", self.now, f"more than {DEEPEST} 'not' in a row")
        tree = self.compare()
        for start in reversed(starts):
            tree = Unary("not", tree, self.span_from(start))
        return tree

    def compare(self) -> Expr:
        start = self.now.offset
        operands, ops = [self.sum()], []
        while self.sees(*COMPARISONS):
            ops.append(self.take().text)
            operands.append(self.sum())
        if not ops:
            return operands[0]
        return Chain(tuple(ops), tuple(operands), self.span_from(start))

    def sum(self) -> Expr:
        start = self.now.offset
        tree = self.product()
        while self.sees("+", "-"):
            sign = self.take().text
            tree = Binary(sign, tree, self.product(), self.span_from(start))
        return tree

    def product(self) -> Expr:
        start = self.now.offset
        tree = self.unary()
        while self.sees("*", "/", "@"):
            sign = self.take().text
            tree = Binary(sign, tree, self.unary(), self.span_from(start))
        return tree

    def unary(self) -> Expr:
        starts = []
        while self.sees("-"):
            starts.append(self.take().offset)
            if len(starts) > DEEPEST:
                raise self.fail("HG153", self.now, f"more than {DEEPEST} '-' in a row")
        tree = self.power()
        for start in reversed(starts):
            tree = Unary("-", tree, self.span_from(start))
        return tree

    def power(self) -> Expr:
        start = self.now.offset
        base = self.postfix()
        if not self.sees("**"):
            return base
        sign = self.take()
        inner = self.now.offset
        minus = self.sees("-")
        if minus:
            self.take()
        if self.now.kind != "number" or self.now.unit is not None:
            raise self.fail("HG212", sign, "the power after '**' has to be a whole number", "such as x**2 or x**-1")
        exponent: Expr = self.number()
        if minus:
            exponent = Unary("-", exponent, self.span_from(inner))
        if self.sees("**"):
            raise self.fail("HG212", self.now, "a power of a power needs parentheses")
        return Binary("**", base, exponent, self.span_from(start))

    def postfix(self) -> Expr:
        start = self.now.offset
        tree = self.atom()
        while self.sees("["):
            self.take()
            tree = Item(tree, self.list_until("]"), self.span_from(start))
        return tree

    def number(self) -> Number:
        token = self.take()
        assert token.value is not None
        return Number(token.value, token.unit, token.text, self.span_from(token.offset))

    def atom(self) -> Expr:
        token = self.now
        if token.kind == "number":
            return self.number()
        if token.kind == "name":
            self.take()
            if not self.sees("("):
                return Name(token.text, self.span_from(token.offset))
            self.take()
            return Call(token.text, self.list_until(")"), self.span_from(token.offset))
        if self.sees("true", "false"):
            self.take()
            return Truth(token.text == "true", self.span_from(token.offset))
        if self.sees("["):
            self.take()
            return Vector(self.list_until("]"), self.span_from(token.offset))
        if self.sees("("):
            self.take()
            tree = self.either()
            self.close(")", token)
            return tree
        if token.kind == "end":
            raise self.fail("HG151", token, "the expression ends too early")
        raise self.fail(
            "HG151",
            token,
            f"a value is expected here, not '{token.text}'",
            "put parentheses around it" if token.text == "not" else None,
        )

    def close(self, sign: str, opened: Token) -> None:
        if not self.sees(sign):
            if self.now.kind == "end":
                raise self.fail(
                    "HG152",
                    opened,
                    f"'{opened.text}' is never closed",
                    "inside { } put an expression with a comma or bracket in quotes",
                )
            raise self.surplus()
        self.take()

    def list_until(self, sign: str) -> tuple[Expr, ...]:
        opened = self.tokens[self.at - 1]
        items: list[Expr] = []
        if not self.sees(sign):
            items.append(self.either())
            while self.sees(","):
                self.take()
                items.append(self.either())
        self.close(sign, opened)
        return tuple(items)
