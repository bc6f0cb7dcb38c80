"""Law -> C: the stages joined."""

from __future__ import annotations

from fractions import Fraction

from hybgen.diag.finding import Findings
from hybgen.emit import emit
from hybgen.law.model import Law
from hybgen.lower import lower
from hybgen.reread import reread
from hybgen.step import build


def generate(
    law: Law, *, step: Fraction | None = None, number: str | None = None, conversions: bool = False
) -> dict[str, str]:
    """NAME.h and NAME.c of a law, by file name; at its own step (seconds) and number format, or at others.

    `conversions`: in fixed point, NAME.h also has functions between physical and raw values.

    The C is read back and has to be the step law, operation by operation; if it were not, that would be a fault in hybgen
    (AssertionError). Raises LawError where the law does not fit the format or the method, and where its conditions have too
    many cases for the proof (HG605): what is not proved is not given.
    """
    made = build(law, step=step, number=number)
    files = emit(lower(made), conversions)
    told = reread(made, files)
    wrong = [w for w in told if w.decided]
    if told and not wrong:
        findings = Findings()
        where = ", ".join(dict.fromkeys(w.function for w in told))
        message = f"the C of {law.name} could not be proved equal to its law: too many cases in {where}"
        findings.error(
            "HG605", law.flow.span, message, hint="use fewer conditions in one expression; name parts as terms"
        )
        findings.stop()
    assert not wrong, f"the C of {law.name} is not its step law: {'; '.join(f'{w.function}: {w.what}' for w in wrong)}"
    return files
