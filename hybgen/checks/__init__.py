"""Questions about a law, answered with findings."""

from __future__ import annotations

from fractions import Fraction

from hybgen.checks import names, numeric, pending, reach, reset
from hybgen.checks.report import Report
from hybgen.diag.finding import Finding, LawError
from hybgen.law.model import Law

__all__ = ["Report", "check"]


def check(law: Law, *, step: Fraction | None = None, number: str | None = None) -> Report:
    """All properties that this version decides; the others are listed as open.

    `step` (seconds) and `number` override those of the law, for what-if runs.
    """
    found: list[Finding] = [f for f in law.notes if isinstance(f, Finding)]
    found += numeric.fits(law)
    for question in (reach.questions, reset.questions, names.questions):
        found += question(law)
    try:
        found += numeric.questions(law, step, number)
    except LawError as error:
        found += error.findings
    found += pending.questions(law)
    return Report(law.name, tuple(found))
