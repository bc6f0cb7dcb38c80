"""Findings as text for people: place, what is wrong, the line with a caret, a hint."""

from __future__ import annotations

from collections.abc import Sequence

from hybgen.diag.finding import Finding, Severity, Verdict
from hybgen.diag.span import Span

WIDTH = 110
_COLOURS = {Severity.ERROR: "31;1", Severity.WARNING: "33;1", Severity.NOTE: "36"}


def render(finding: Finding, colour: bool = False) -> str:
    """One finding, several lines."""
    severity = _painted(str(finding.severity), _COLOURS[finding.severity], colour)
    place = finding.where.place if finding.where.line else finding.where.file
    lines = [f"{place}: {severity} {finding.code}: {finding.message}{_verdict(finding)}"]
    lines += _shown(finding.where, colour)
    if finding.witness:
        lines.append("    for " + ", ".join(f"{k} = {v}" for k, v in finding.witness.items()))
    if finding.hint:
        lines.append(f"    hint: {finding.hint}")
    for span, text in finding.related:
        lines.append(f"    {text}: {span.place}")
    return "\n".join(lines)


def _verdict(finding: Finding) -> str:
    return "" if finding.verdict is Verdict.REFUTED else f" [{finding.verdict}]"


def _painted(text: str, code: str, colour: bool) -> str:
    return f"\x1b[{code}m{text}\x1b[0m" if colour else text


def _shown(where: Span, colour: bool) -> list[str]:
    """The line and a caret below; a long line is cut around the caret."""
    if not where.text.strip():
        return []
    text = where.text.replace("\t", " ")
    first = max(0, min(where.column - 1 - WIDTH // 2, len(text) - WIDTH)) if len(text) > WIDTH else 0
    cut = text[first : first + WIDTH]
    head = f"{where.line:5} | " + ("…" if first else "")
    at = where.column - 1 - first
    marks = "^" * max(1, min(where.length, WIDTH - at))
    return [f"{head}{cut}", " " * 5 + " | " + " " * (at + (1 if first else 0)) + _painted(marks, "32;1", colour)]


def summary(findings: Sequence[Finding]) -> str:
    """One line: how many of each."""
    counts = [(sum(1 for f in findings if f.severity is s), str(s)) for s in (Severity.ERROR, Severity.WARNING)]
    words = [f"{n} {word}{'s' if n != 1 else ''}" for n, word in counts]
    open_ = sum(1 for f in findings if f.verdict is Verdict.OPEN)
    return ", ".join([*words, f"{open_} open"])
