"""What the step and the number format make of a law."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from fractions import Fraction

from hybgen.checks import coarse, rounding
from hybgen.checks.report import error
from hybgen.diag.finding import Finding, Severity, Verdict
from hybgen.expr.core import FALSE, Const, Node, Ref, RefKind, walk
from hybgen.expr.fold import decide
from hybgen.law.model import Law
from hybgen.step import StepLaw, build
from hybgen.step.build import conditions
from hybgen.step.chain import longest


def fits(law: Law) -> list[Finding]:
    """Types and units: a law that could be read has passed."""
    span = law.flow.span
    return [
        Finding(
            "HG200", "units", Verdict.PROVED, Severity.NOTE, span, law.name, "types and units fit in every expression"
        )
    ]


def questions(law: Law, step: Fraction | None, number: str | None) -> list[Finding]:
    """Findings of the step law; raises LawError where there is none."""
    made = build(law, step=step, number=number)
    return [
        *made.notes,
        *_defaults(made),
        *_moved(law, made),
        *rounding.findings(made),
        *coarse.questions(made),
        _chain(made),
    ]


def _defaults(made: StepLaw) -> Iterator[Finding]:
    """Do the default parameters pass their own rules, in the number format?"""
    known: dict[Node, Const] = {}
    for p in made.parameters:
        for i, value in enumerate(p.default):
            known[Ref(RefKind.PARAMETER, p.name, p.type, i if p.size is not None else None)] = Const(value, p.type)
    for rule in made.rules:
        if decide(rule.condition, known) == FALSE:
            yield error(
                "HG406",
                "range",
                rule.span,
                "parameters",
                f"the default values break '{rule.text}'",
                "change a value, or the rule",
            )


def _moved(law: Law, made: StepLaw) -> Iterator[Finding]:
    """What `thresholds: nearest` costs: constants that rounding moves to the side where the law does not jump."""
    if law.thresholds != "nearest":
        return
    laws = (law, replace(law, thresholds="safe"))
    nearest, safe = (conditions(one, step=made.step, number=made.format.name) for one in laws)
    for jump, condition, other in zip(made.jumps, nearest, safe, strict=True):
        for near, far in zip(walk(condition), walk(other), strict=True):
            if isinstance(near, Const) and isinstance(far, Const) and near != far:
                least, most = (made.format.dtype.type(float(c.value)) for c in (near, far))
                message = (
                    f"'{jump.name}' compares with {least} in C, where the law needs {most}: rounding can cause a jump"
                )
                yield Finding(
                    "HG411",
                    "rounding",
                    Verdict.REFUTED,
                    Severity.NOTE,
                    jump.span,
                    jump.name,
                    message,
                    hint="leave out thresholds: nearest",
                )


def _chain(made: StepLaw) -> Finding:
    most = longest(made.jumps, made.definitions)
    span = made.law.flow.span
    if most is None:
        message = (
            f"chains of jumps are not bounded by constants: up to {made.jumps_per_step} jumps are taken in one step"
        )
        return Finding(
            "HG320",
            "repeat",
            Verdict.OPEN,
            Severity.NOTE,
            span,
            made.law.name,
            message,
            hint="give jumps_per_step if you know the number",
        )
    return Finding(
        "HG320",
        "repeat",
        Verdict.PROVED,
        Severity.NOTE,
        span,
        made.law.name,
        f"at most {most} jump{'s' if most != 1 else ''} can follow each other in one step",
        value={"chain": most},
    )
