"""Questions about a law, answered with findings."""

from __future__ import annotations

from hybgen.check import names, numeric, pending, reach, reset
from hybgen.check.report import Report
from hybgen.diag.finding import Finding, LawError
from hybgen.law.model import Law

__all__ = ["Report", "check"]


def check(law: Law) -> Report:
    """All properties that this version decides; the others are listed as open."""
    found: list[Finding] = [f for f in law.notes if isinstance(f, Finding)]
    found += numeric.fits(law)
    for question in (reach.questions, reset.questions, names.questions):
        found += question(law)
    try:
        found += numeric.questions(law)
    except LawError as error:
        found += error.findings
    found += pending.questions(law)
    return Report(law.name, tuple(found))
