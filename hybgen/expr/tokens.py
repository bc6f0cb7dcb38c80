"""Text of an expression -> tokens with exact offsets.

A unit belongs to the number before it: `0.02 m`, `0.5 V/s`, `3 N m`, `2 /s`. A `/` continues a unit only
without blanks around it and only before a known unit; `*` never does.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction

from hybgen.diag.finding import Findings
from hybgen.diag.span import Span
from hybgen.diag.suggest import nearest
from hybgen.expr import units

Locate = Callable[[int, int], Span]
"""Place of a piece (offset, length) of the text in its file."""

KEYWORDS = frozenset({"and", "or", "not", "true", "false"})
MOST_TOKENS = 5000
MOST_DIGITS = 60
MOST_EXPONENT = 330


@dataclass(frozen=True, slots=True)
class Token:
    """kind: number, name, keyword, sign, end."""

    kind: str
    text: str
    offset: int
    value: Fraction | None = None
    unit: units.Unit | None = None


_NUMBER = re.compile(r"(?P<whole>[0-9]+)(?:\.(?P<part>[0-9]*))?(?:[eE](?P<exponent>[+-]?[0-9]+))?")
_WORD = re.compile(r"[^\W\d]\w*")
_SIGN = re.compile(r"\*\*|<=|>=|==|!=|[-+*/@<>()\[\],]")
_BLANK = re.compile(r"\s*")
_UNIT_START = re.compile(r"\s*(?P<slash>(?<=\s)/)?(?P<name>%|[A-Za-zµ]+)(?P<power>(?:\*\*|\^)?-?[0-9]+)?(?![\w(\[])")
_UNIT_NEXT = re.compile(r"(?P<join>/| +)(?P<name>[A-Za-zµ]+)(?P<power>(?:\*\*|\^)?-?[0-9]+)?(?![\w(\[])")
_UNIT_GROUP = re.compile(r"/\([A-Za-zµ0-9 /*^-]+\)")
_FOREIGN = {
    "&&": "write 'and'",
    "||": "write 'or'",
    "!": "write 'not'",
    "=": "write '==' to compare",
    "?": "write choose(condition, a, b)",
    "^": "write '**' for a power",
    "&": "write 'and'",
    "|": "write 'or'",
    ";": "an expression is one line without ';'",
    ":": "write choose(condition, a, b), or cases with when / is",
    "{": "write choose(condition, a, b), or cases with when / is",
    "'": "a name stands without quotes",
    '"': "a name stands without quotes",
}


class Bad(Exception):
    """Internal: tokenizing or parsing stops; the finding has been added."""


def tokens(text: str, locate: Locate, findings: Findings) -> list[Token]:
    """The tokens of a text, the last of kind `end`. Raises Bad after adding a finding."""
    made: list[Token] = []
    at = _BLANK.match(text).end()  # type: ignore[union-attr]
    while at < len(text):
        token, at = _one(text, at, locate, findings)
        made.append(token)
        at = _BLANK.match(text, at).end()  # type: ignore[union-attr]
        if len(made) > MOST_TOKENS:
            findings.error(
                "HG153",
                locate(token.offset, 1),
                f"this expression has more than {MOST_TOKENS} parts",
                hint="name pieces of it under 'terms'",
            )
            raise Bad
    made.append(Token("end", "", len(text)))
    return made


def _one(text: str, at: int, locate: Locate, findings: Findings) -> tuple[Token, int]:
    if found := _NUMBER.match(text, at):
        return _number(text, found, locate, findings)
    if found := _WORD.match(text, at):
        word = found[0]
        if not word.isascii():
            findings.error(
                "HG150",
                locate(at, len(word)),
                f"'{word}' has letters beyond ASCII",
                hint="names in a law are C identifiers: letters a-z, A-Z, digits, '_'",
            )
            raise Bad
        return Token("keyword" if word in KEYWORDS else "name", word, at), found.end()
    if found := _SIGN.match(text, at):
        return Token("sign", found[0], at), found.end()
    two = text[at : at + 2]
    sign = two if two in _FOREIGN else text[at]
    findings.error(
        "HG150", locate(at, len(sign)), f"{_quoted(sign)} is no part of an expression", hint=_FOREIGN.get(sign)
    )
    raise Bad


def _quoted(sign: str) -> str:
    return f"'{sign}'" if sign.isprintable() else f"the character U+{ord(sign):04X}"


def _number(text: str, found: re.Match[str], locate: Locate, findings: Findings) -> tuple[Token, int]:
    end = found.end()
    digits = len(found["whole"]) + len(found["part"] or "")
    exponent = found["exponent"] or "0"
    if digits > MOST_DIGITS or len(exponent) > 5 or abs(int(exponent)) > MOST_EXPONENT:
        findings.error(
            "HG154",
            locate(found.start(), end - found.start()),
            "this number has too many digits",
            hint=f"at most {MOST_DIGITS} digits and an exponent up to {MOST_EXPONENT}",
        )
        raise Bad
    follow = text[end : end + 1]
    if follow == "." or follow == "_" or (found[0] == "0" and follow in ("x", "X", "b", "o")):
        findings.error(
            "HG154",
            locate(found.start(), end - found.start() + 1),
            f"'{found[0]}{follow}' is no number",
            hint="write decimal numbers: 12, 0.5, 1e-3",
        )
        raise Bad
    value = Fraction(f"{found['whole']}.{found['part'] or '0'}e{exponent}")
    unit, stop = _unit(text, end, locate, findings)
    return Token("number", text[found.start() : stop], found.start(), value, unit), stop


def _unit(text: str, at: int, locate: Locate, findings: Findings) -> tuple[units.Unit | None, int]:
    """The unit written after a number that ends at `at`, and where it ends."""
    start = _UNIT_START.match(text, at)
    if start is None or start["name"] in KEYWORDS:
        return None, at
    if start["slash"] and units.atom(start["name"]) is None:
        return None, at
    end = start.end()
    while True:
        if group := _UNIT_GROUP.match(text, end):
            try:
                units.parse(group[0])
            except units.BadUnit:
                break
            end = group.end()
            continue
        more = _UNIT_NEXT.match(text, end)
        if more is None or more["name"] in KEYWORDS or units.atom(more["name"]) is None:
            break
        end = more.end()
    return _made(text, at, end, locate, findings)


def _made(text: str, at: int, end: int, locate: Locate, findings: Findings) -> tuple[units.Unit, int]:
    written = text[at:end]
    try:
        return units.parse(written), end
    except units.BadUnit as bad:
        close = nearest(bad.name, units.known_names()) if bad.name else None
        hint = (
            f"did you mean '{close}'?"
            if close
            else "an operator between the number and the name is missing, or the unit"
        )
        findings.error("HG214", locate(at + bad.offset, max(1, len(bad.name))), bad.message, hint=hint)
        raise Bad from None
