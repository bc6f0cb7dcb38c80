"""Fixed-point arithmetic on raw values (int32_t): every result exact, then rounded once to the nearest, ties to even, and held at
± (2**31 - 1). -2**31 is never a result: it stands for "no number".
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

from hybgen.kernels.word import Builder, Kernel, Word, choose, number

MOST = 2**31 - 1
NO_NUMBER = -(2**31)
"""Outside every range; what is below -MOST is no number."""


def _power(k: Builder, name: str, count: Word) -> Word:
    """2**count as i64, for a count (i32) from 0 to 62."""
    return k.let(name, (number(1, "u64") << count.to("u32")).to("i64"))


def _size(k: Builder, name: str, value: Word) -> Word:
    """The magnitude of a signed value, as u64."""
    wide = value.to("i64")
    return k.let(name, choose(value < 0, (number(0, "i64") - wide).to("u64"), wide.to("u64")))


def _signed(k: Builder, negative: Word, size: Word) -> Word:
    """± a magnitude (u64), held."""
    held = k.let("held", choose(size > MOST, number(MOST, "i32"), size.to("i32")))
    return choose(negative, number(0, "i32") - held, held)


@cache
def fit() -> Kernel:
    """value / 2**cut, for a value below 2**63 in magnitude and a cut from 0 to 62."""
    k = Builder("fixed_fit", "value / 2^cut: nearest, ties to even, held at the ends")
    value, cut = k.parameter("value", "i64"), k.parameter("cut", "u32")
    size = _size(k, "size", value)
    unit = k.let("unit", number(1, "u64") << cut)
    kept = k.let("kept", size >> cut)
    twice = k.let("twice", (size & (unit - 1)) << 1)
    up = (twice > unit) | (twice.equals(unit) & (kept & 1).differs(0))
    return k.made(_signed(k, value < 0, k.let("rounded", kept + up.to("u64"))))


def _add(k: Builder, a: Word, b: Word, left_a: Word, left_b: Word, right: Word) -> Word:
    first, second = _power(k, "first", left_a), _power(k, "second", left_b)
    return k.call(fit(), a.to("i64") * first + b.to("i64") * second, right.to("u32"))


def _mul(k: Builder, a: Word, b: Word, right: Word) -> Word:
    return k.call(fit(), a.to("i64") * b.to("i64"), right.to("u32"))


def _div(k: Builder, a: Word, b: Word, left: Word) -> Word:
    up = k.let("up", choose(left > 0, left, number(0, "i32")).to("u32"))
    down = k.let("down", choose(left < 0, number(0, "i32") - left, number(0, "i32")).to("u32"))
    top, bottom = k.let("top", _size(k, "a_size", a) << up), k.let("bottom", _size(k, "b_size", b) << down)
    negative = k.let("negative", (a < 0).differs(b < 0))
    k.exit(b.equals(0), choose(a.equals(0), number(0, "i32"), choose(a < 0, number(-MOST, "i32"), MOST)))
    kept = k.let("kept", top // bottom)
    twice = k.let("twice", (top - kept * bottom) << 1)
    more = (twice > bottom) | (twice.equals(bottom) & (kept & 1).differs(0))
    return _signed(k, negative, k.let("rounded", kept + more.to("u64")))


def _scale(k: Builder, a: Word, left: Word) -> Word:
    up = choose(left > 0, left, number(0, "i32"))
    down = choose(left < 0, number(0, "i32") - left, number(0, "i32"))
    return k.call(fit(), a.to("i64") * _power(k, "factor", up), down.to("u32"))


def _order(k: Builder, a: Word, b: Word, left_a: Word, left_b: Word) -> Word:
    first = k.let("left", a.to("i64") * _power(k, "first", left_a))
    second = k.let("right", b.to("i64") * _power(k, "second", left_b))
    return choose(first < second, number(-1, "i32"), choose(first > second, number(1, "i32"), 0))


def _floor(k: Builder, a: Word, right: Word) -> Word:
    unit = k.let("unit", number(1, "u64") << right.to("u32"))
    size = _size(k, "size", a)
    whole = k.let("whole", choose(a < 0, size + (unit - 1), size) >> right.to("u32"))
    return _signed(k, a < 0, whole)


def _steps(k: Builder, a: Word, right: Word) -> Word:
    """2**-27 of the value, and two units, but no more than a quarter of a step, above a whole number are that number."""
    k.exit(a <= 0, number(0, "i32"))
    size = k.let("size", a.to("u32").to("u64"))
    unit = k.let("unit", number(1, "u64") << right.to("u32"))
    most, slack = k.let("most", unit >> 2), k.let("slack", (size >> 27) + 2)
    held = k.let("held", choose(slack < most, slack, most))
    less = k.let("less", choose(size > held, size - held, number(1, "u64")))
    return k.let("steps", ((less + (unit - 1)) >> right.to("u32")).to("i32"))


def _line(k: Builder, y: Word, slope: Word, x: Word, start: Word, left: Word, right: Word) -> Word:
    run = k.let("run", x.to("i64") - start.to("i64"))
    return k.call(fit(), y.to("i64") * _power(k, "factor", left) + slope.to("i64") * run, right.to("u32"))


ARITHMETIC: dict[str, tuple[str, str, Callable[..., Word]]] = {
    "fixed_add": ("a b left_a left_b right", "(a * 2^left_a + b * 2^left_b) / 2^right", _add),
    "fixed_mul": ("a b right", "a * b / 2^right", _mul),
    "fixed_div": ("a b left", "a * 2^left / b", _div),
    "fixed_scale": ("a left", "a * 2^left", _scale),
    "fixed_order": ("a b left_a left_b", "the sign of a * 2^left_a - b * 2^left_b", _order),
    "fixed_floor": ("a right", "a / 2^right, rounded down", _floor),
    "fixed_steps": ("a right", "a / 2^right in whole steps, rounded up", _steps),
    "fixed_line": ("y slope x start left right", "(y * 2^left + slope * (x - start)) / 2^right", _line),
}
"""name -> parameters (i32 each), meaning, body. Shifts of sums and products are 0 … 31 up and 0 … 62 down."""


@cache
def arithmetic(name: str) -> Kernel:
    """The operation `name` (a key of ARITHMETIC) on raw values."""
    words, about, body = ARITHMETIC[name]
    k = Builder(name, about)
    return k.made(body(k, *(k.parameter(w, "i32") for w in words.split())))
