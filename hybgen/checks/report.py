"""The answers for one law."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from hybgen.diag.finding import Finding, Severity, Verdict
from hybgen.diag.span import Span


@dataclass(frozen=True, slots=True)
class Report:
    """All findings about a law."""

    law: str
    findings: tuple[Finding, ...]

    @property
    def ok(self) -> bool:
        """No finding is an error."""
        return not self.failing("error")

    def failing(self, level: str) -> tuple[Finding, ...]:
        """The findings that fail at a level: `error`, `warning` (and errors), `open` (and both)."""
        severities = {Severity.ERROR} if level == "error" else {Severity.ERROR, Severity.WARNING}
        return tuple(
            f for f in self.findings if f.severity in severities or (level == "open" and f.verdict is Verdict.OPEN)
        )

    def to_json(self) -> dict[str, Any]:
        """JSON-ready data."""
        return {"law": self.law, "ok": self.ok, "findings": [f.to_json() for f in self.findings]}


def warning(code: str, prop: str, where: Span, subject: str, message: str, hint: str | None = None) -> Finding:
    """A refuted property that is a warning."""
    return Finding(code, prop, Verdict.REFUTED, Severity.WARNING, where, subject, message, hint=hint)


def error(code: str, prop: str, where: Span, subject: str, message: str, hint: str | None = None) -> Finding:
    """A refuted property that is an error."""
    return Finding(code, prop, Verdict.REFUTED, Severity.ERROR, where, subject, message, hint=hint)
