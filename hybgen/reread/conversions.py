"""The functions between raw and physical numbers in a header, compared with the only text that is right."""

from __future__ import annotations

import re
from collections.abc import Iterator

from hybgen.expr.core import RefKind
from hybgen.reread.source import Source, function_of, same
from hybgen.step.model import StepLaw

_NEAREST = """static inline int32_t nearest(double physical, double factor) {
    double scaled; double rest; int32_t whole;
    if (!((physical >= -1.7976931348623157e308) && (physical <= 1.7976931348623157e308))) { return -2147483647 - 1; }
    scaled = physical * factor;
    if (scaled >= 2147483647.0) { return 2147483647; }
    if (scaled <= -2147483647.0) { return -2147483647; }
    whole = (int32_t)scaled;
    rest = scaled - (double)whole;
    if ((rest > 0.5) || ((rest >= 0.5) && ((whole % 2) != 0))) { return whole + 1; }
    if ((rest < -0.5) || ((rest <= -0.5) && ((whole % 2) != 0))) { return whole - 1; }
    return whole;
}"""


def wrong(made: StepLaw, source: Source) -> Iterator[str]:
    """Names of conversions that are not right; a header may be without any."""
    law = made.law.name
    kinds = (RefKind.INPUT, RefKind.PARAMETER, RefKind.OUTPUT)
    members = {name: places for (kind, name), places in made.places.items() if kind in kinds}
    shared = _only(source, f"{law}_nearest")
    if shared is None:
        return
    if not same(source.functions[shared], function_of(_NEAREST.replace("nearest", shared, 1))):
        yield shared
    for name, places in members.items():
        up, down = 2.0**places, 2.0**-places
        for word, text in (
            ("raw", f"static inline int32_t NAME(double physical) {{ return {shared}(physical, {_power(up)}); }}"),
            (
                "physical",
                f"static inline double NAME(int32_t raw) {{ return (double)raw {_scaled(places, up, down)}; }}",
            ),
        ):
            found = _only(source, f"{law}_{name}_{word}")
            if found is None or not same(source.functions[found], function_of(text.replace("NAME", found))):
                yield f"{law}_{name}_{word}"


def _only(source: Source, name: str) -> str | None:
    """The function of that name, with underscores after it where another one had it."""
    return next((n for n in source.functions if re.fullmatch(f"{name}_*", n) and _inline(source, n)), None)


def _inline(source: Source, name: str) -> bool:
    return "inline" in source.functions[name].decl.funcspec


def _power(value: float) -> str:
    return f"{value:.1f}" if value >= 1 else repr(value)


def _scaled(places: int, up: float, down: float) -> str:
    return f"/ {_power(up)}" if places >= 0 else f"* {_power(down)}"
