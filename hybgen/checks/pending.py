"""Properties that this version does not decide: listed as open, never as proved."""

from __future__ import annotations

from hybgen.diag.finding import Finding, Severity, Verdict
from hybgen.law.model import Law

PROPERTIES = ("cover", "overlap", "hysteresis", "dwell", "missed", "range", "bump", "method")


def questions(law: Law) -> list[Finding]:
    """One open note for each such property, and for each claim."""
    found = [
        Finding(
            "HG390",
            name,
            Verdict.OPEN,
            Severity.NOTE,
            law.flow.span,
            law.name,
            f"'{name}' is not decided by this version",
        )
        for name in PROPERTIES
    ]
    found += [
        Finding(
            "HG390",
            "claims",
            Verdict.OPEN,
            Severity.NOTE,
            c.span,
            c.name,
            f"claim '{c.name}' is not decided by this version",
        )
        for c in law.claims
    ]
    return found
