"""What each stage made of a law, as text."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from hybgen.law.model import Assign, Law


def stage_text(law: Law, stage: str, step: Fraction | None, number: str | None) -> str:
    """The text of `law`, `step`, `program` or `c`."""
    from hybgen.emit import emit
    from hybgen.ir.show import show as show_program
    from hybgen.lower import lower
    from hybgen.step import build
    from hybgen.step.show import show as show_step

    if stage == "law":
        return "\n".join(_law(law)) + "\n"
    made = build(law, step=step, number=number)
    match stage:
        case "step":
            return show_step(made)
        case "program":
            return show_program(lower(made))
        case "c":
            return "\n".join(emit(lower(made)).values())
        case _:
            raise AssertionError(stage)


def _law(law: Law) -> Iterator[str]:
    """The law as read: names with kinds, units, ranges, and the author's expressions."""
    yield f"law {law.name}: step {float(law.step):.9g} s, {law.number}, prefer {law.prefer}"
    for u in law.inputs:
        yield f"input {u.name}: {u.type.kind}{_size(u.size)}{_unit(u.unit)}{_range(u.low, u.high)}, bad samples: {u.invalid}"
    for p in law.parameters:
        values = ", ".join(f"{float(v):.9g}" for v in p.value)
        yield f"parameter {p.name}: {values}{_unit(p.unit)}{_range(p.low, p.high)}{', tunable' if p.tunable else ''}"
    for x in law.states:
        words = f" of {', '.join(map(str, x.values))}" if x.values else ""
        yield f"state {x.name}: {x.kind}{words}{_size(x.size)}{_unit(x.unit)}{_range(x.low, x.high)}"
    for t in law.terms:
        yield f"term {t.name}: {t.text}{_unit(t.unit)}"
    for j in law.jumps:
        yield f"jump {j.name}: {j.text}"
        yield from (f"    {line}" for line in _assigns(j.assigns, ":="))
        if j.keep:
            yield f"    keep {', '.join(j.keep)}"
    yield f"flow{f' where {law.flow.text}' if law.flow.text else ''}, method {law.flow.method}"
    yield from (f"    {line}" for line in _assigns(law.flow.rates, "' ="))
    yield from (f"sample {line}" for line in _assigns(law.sample, ":="))
    for o in law.outputs:
        yield f"output {o.name}: {o.text}{_unit(o.unit)}{_range(o.low, o.high)}{', limited' if o.limit else ''}"
    yield from (f"claim {c.name}: {c.kind} {c.text}" for c in law.claims)
    yield from (f"assume {a.text}" for a in law.assume)


def _assigns(assigns: tuple[Assign, ...], sign: str) -> list[str]:
    return list(dict.fromkeys(f"{a.state} {sign} {a.text}" for a in assigns))


def _size(size: int | None) -> str:
    return "" if size is None else f" vector of {size}"


def _unit(unit: object) -> str:
    text = str(unit)
    return "" if text == "1" else f" [{text}]"


def _range(low: Fraction | None, high: Fraction | None) -> str:
    return "" if low is None or high is None else f" in {float(low):.9g} .. {float(high):.9g}"
