"""What the step and the number format make of a law."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from fractions import Fraction

from hybgen.checks import coarse
from hybgen.checks.report import error
from hybgen.diag.finding import Finding, Severity, Verdict
from hybgen.expr.core import FALSE, Const, Node, Ref, RefKind, walk
from hybgen.expr.fold import decide
from hybgen.law.model import Law
from hybgen.step import StepLaw, build
from hybgen.step.build import conditions
from hybgen.step.chain import longest
from hybgen.step.model import ConditionBound


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
    return [*made.notes, *_defaults(made), *_moved(law, made), *_rounding(made), *coarse.questions(made), _chain(made)]


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


def _rounding(made: StepLaw) -> Iterator[Finding]:
    """What rounding does to the jump conditions."""
    for b in made.bounds:
        yield _bounded(b)
    if not made.bounds and made.law.thresholds == "safe":
        message = "no jump condition can be mistaken by rounding"
        span = made.law.flow.span
        yield Finding("HG430", "rounding", Verdict.PROVED, Severity.NOTE, span, made.law.name, message)


def _bounded(b: ConditionBound) -> Finding:
    code, verdict, severity, hint = "HG430", Verdict.PROVED, Severity.NOTE, None
    value = {"error": b.error, "margin": b.margin} if b.error is not None and b.margin is not None else None
    if value is None:
        code, verdict, severity = "HG431", Verdict.OPEN, Severity.WARNING
        message = f"rounding may cause '{b.jump}': there is no bound of the error here: {b.why}"
        hint = "declare ranges, keep divisors and arguments inside their domains"
    elif b.never:
        code, verdict, severity = "HG432", Verdict.REFUTED, Severity.WARNING
        message = f"'{b.jump}' can't happen: rounding delays it by {b.margin:.3g}, more than its condition can hold by"
        hint = "use float64, or another form of the condition"
    else:
        message = (
            f"rounding never causes '{b.jump}': its error here is at most {b.error:.3g}, "
            f"it is due {b.margin:.3g} beyond at the latest"
        )
    return Finding(code, "rounding", verdict, severity, b.span, b.jump, message, value=value, hint=hint)


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
