"""Law -> C: the stages joined."""

from __future__ import annotations

from fractions import Fraction

from hybgen.emit import emit
from hybgen.law.model import Law
from hybgen.lower import lower
from hybgen.reread import reread
from hybgen.step import build


def generate(law: Law, *, step: Fraction | None = None, number: str | None = None) -> dict[str, str]:
    """NAME.h and NAME.c of a law, by file name; at its own step (seconds) and number format, or at others.

    The C is read back and has to be the step law, operation by operation; if it were not, that would be a fault in hybgen
    (AssertionError). What has too many cases to tell is let pass here; preflight reports it. Raises LawError where the law
    does not fit the format or the method.
    """
    made = build(law, step=step, number=number)
    files = emit(lower(made))
    wrong = [w for w in reread(made, files) if w.decided]
    assert not wrong, f"the C of {law.name} is not its step law: {'; '.join(f'{w.function}: {w.what}' for w in wrong)}"
    return files
