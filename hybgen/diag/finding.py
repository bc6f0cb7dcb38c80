"""Findings: what hybgen has to say about a law, as values."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from enum import StrEnum
from typing import Any

from hybgen.diag.codes import CODES
from hybgen.diag.span import Span


class Verdict(StrEnum):
    """The three answers to a question about a law."""

    PROVED = "proved"
    REFUTED = "refuted"
    OPEN = "open"


class Severity(StrEnum):
    """How much a finding matters."""

    ERROR = "error"
    WARNING = "warning"
    NOTE = "note"


@dataclass(frozen=True, slots=True)
class Finding:
    """One answer about one thing in a law."""

    code: str
    property: str
    verdict: Verdict
    severity: Severity
    where: Span
    subject: str
    message: str
    witness: Mapping[str, Any] | None = None
    value: Mapping[str, Any] | None = None
    hint: str | None = None
    related: tuple[tuple[Span, str], ...] = ()

    def to_json(self) -> dict[str, Any]:
        """The finding as JSON-ready data (README: JSON)."""
        return {
            "code": self.code,
            "property": self.property,
            "verdict": str(self.verdict),
            "severity": str(self.severity),
            "where": {"file": self.where.file, "line": self.where.line, "column": self.where.column},
            "subject": self.subject,
            "message": self.message,
            "witness": dict(self.witness) if self.witness is not None else None,
            "value": dict(self.value) if self.value is not None else None,
            "hint": self.hint,
        }


class LawError(Exception):
    """A law that can't be used; `findings` says why."""

    def __init__(self, findings: Iterable[Finding]) -> None:
        self.findings: tuple[Finding, ...] = tuple(findings)
        super().__init__("; ".join(f"{f.where.place}: {f.code}: {f.message}" for f in self.findings))


MOST = 100
"""So many findings of one stage are enough: more are a wrong file, not a wrong law."""


class Findings:
    """Collects the findings of one stage, so that a stage reports all it sees and then stops."""

    def __init__(self) -> None:
        self._found: list[Finding] = []

    def error(
        self,
        code: str,
        where: Span,
        message: str,
        *,
        subject: str = "",
        hint: str | None = None,
        related: tuple[tuple[Span, str], ...] = (),
    ) -> None:
        """Add a refuted finding of severity error; the property is that of the code's table row.

        Raises LawError when there are MOST of them.
        """
        self._found.append(
            Finding(
                code,
                CODES[code].property,
                Verdict.REFUTED,
                Severity.ERROR,
                where,
                subject,
                message,
                hint=hint,
                related=related,
            )
        )
        if len(self._found) >= MOST:
            self.stop()

    def add(self, finding: Finding) -> None:
        """Add a finding made elsewhere."""
        self._found.append(finding)

    def __len__(self) -> int:
        return len(self._found)

    def sorted(self) -> tuple[Finding, ...]:
        """The findings in the order of the file, each once."""
        unique = {(f.code, f.where, f.message): f for f in self._found}
        return tuple(sorted(unique.values(), key=lambda f: (f.where.file, f.where.line, f.where.column, f.code)))

    def stop(self) -> None:
        """Raise LawError if there is an error among the findings."""
        if any(f.severity is Severity.ERROR for f in self._found):
            raise LawError(self.sorted())
