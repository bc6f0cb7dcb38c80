"""Law -> C: the stages joined."""

from __future__ import annotations

from fractions import Fraction

from hybgen.emit import emit
from hybgen.law.model import Law
from hybgen.lower import lower
from hybgen.step import build


def generate(law: Law, *, step: Fraction | None = None, number: str | None = None) -> dict[str, str]:
    """NAME.h and NAME.c of a law, by file name; at its own step (seconds) and number format, or at others.

    Raises LawError where the law does not fit the format or the method.
    """
    return emit(lower(build(law, step=step, number=number)))
