"""What rounding does to the jump conditions: bounds, delays, and where these are larger than what the law is about."""

from __future__ import annotations

from collections.abc import Iterator

from hybgen.diag.finding import Finding, Severity, Verdict
from hybgen.step.model import ConditionBound, StepLaw
from hybgen.step.quantity import upward


def findings(made: StepLaw) -> Iterator[Finding]:
    """One for each computed comparison of a jump condition; warnings where rounding outweighs noise or hysteresis."""
    pairs: set[frozenset[str]] = set()
    for b in made.bounds:
        yield _bounded(b)
        yield from _outweighed(b, pairs)
    if not made.bounds and made.law.thresholds == "safe":
        message = "no jump condition can be mistaken by rounding"
        span = made.law.flow.span
        yield Finding("HG430", "rounding", Verdict.PROVED, Severity.NOTE, span, made.law.name, message)


def _bounded(b: ConditionBound) -> Finding:
    code, verdict, severity, hint = "HG430", Verdict.PROVED, Severity.NOTE, None
    value = None
    if b.error is None:
        code, verdict, severity = "HG431", Verdict.OPEN, Severity.WARNING
        message = f"rounding may cause '{b.jump}': there is no bound of the error here: {b.why}"
        hint = "declare ranges, keep divisors and arguments inside their domains"
        return Finding(code, "rounding", verdict, severity, b.span, b.jump, message, hint=hint)
    value = {"margin": b.margin, "unit": b.unit, "error": b.error, "within": b.within or None}
    late = (
        "how late it may be has no bound"
        if b.margin is None
        else f"it is due {_amount(b.margin, b)} beyond at the latest"
    )
    message = (
        f"rounding never causes '{b.jump}': its error here is at most {_amount(b.error, b)}, "
        f"{late}{f'; {b.within}' if b.within else ''}"
    )
    if b.never:
        code, verdict, severity = "HG432", Verdict.REFUTED, Severity.WARNING
        message = f"'{b.jump}' can't happen: its rounding error of {_amount(b.error, b)} is more than its condition can hold by"
        hint = "use float64, or another form of the condition"
    return Finding(code, "rounding", verdict, severity, b.span, b.jump, message, value=value, hint=hint)


def _outweighed(b: ConditionBound, pairs: set[frozenset[str]]) -> Iterator[Finding]:
    """The margin against the noise of the samples, and against the distance to the opposite jump (once for a pair)."""
    if b.margin is None or b.never:
        return
    value: dict[str, object] = {"margin": b.margin, "unit": b.unit}
    hint = "use float64, or another form of the condition"
    if b.noise is not None and 0 < b.noise < b.margin:
        message = (
            f"rounding delays '{b.jump}' by up to {_amount(b.margin, b)}; noise and resolution of the samples make up "
            f"{_amount(b.noise, b)} at most"
        )
        yield _warning("HG433", b, message, value | {"noise": b.noise}, hint)
    pair = frozenset({b.jump, b.gap[0]}) if b.gap is not None else frozenset()
    if b.gap is not None and b.gap[1] < b.margin and pair not in pairs:
        pairs.add(pair)
        message = (
            f"rounding delays '{b.jump}' by up to {_amount(b.margin, b)}; between it and '{b.gap[0]}' are only "
            f"{b.gap[1]:.3g}{_unit(b)}"
        )
        yield _warning("HG434", b, message, value | {"gap": b.gap[1]}, hint)


def _warning(code: str, b: ConditionBound, message: str, value: dict[str, object], hint: str) -> Finding:
    return Finding(code, "rounding", Verdict.REFUTED, Severity.WARNING, b.span, b.jump, message, value=value, hint=hint)


def _amount(size: float, b: ConditionBound) -> str:
    return f"{upward(size, 3)}{_unit(b)}"


def _unit(b: ConditionBound) -> str:
    return f" {b.unit}" if b.unit and b.unit != "1" else ""
