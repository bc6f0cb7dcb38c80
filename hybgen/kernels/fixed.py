"""The elementary functions in fixed point: raw = value * 2**places as int32_t in, the same with other places out.

Computed in words of 32 bits, rounded once to the nearest (ties to even), held at ± (2**31 - 1). Outside its domain a function
gives the nearest end (log of what is not positive: the lowest number; sqrt: 0; asin, acos: as at ± 1), so that every
argument has an answer; a step law in fixed point proves that its arguments are inside.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache

from hybgen.kernels import cores
from hybgen.kernels.arithmetic import Arithmetic, Number, zeros
from hybgen.kernels.constants import HALF_PI
from hybgen.kernels.integers import MOST
from hybgen.kernels.word import FALSE, Builder, Kernel, Word, choose, number


@cache
def place() -> Kernel:
    """A number as a raw value with the given places."""
    k = Builder("place", "a number in fixed point: nearest, ties to even, held at the ends")
    negative, mantissa = k.parameter("negative", "bool"), k.parameter("mantissa", "u32")
    exponent, places = k.parameter("exponent", "i32"), k.parameter("places", "i32")
    top = k.let("top", exponent + places)
    k.exit((top < -1) | mantissa.equals(0), number(0, "i32"))
    limit = choose(negative, number(-MOST, "i32"), MOST)
    k.exit(top > 30, limit)
    # the raw value is mantissa * 2**(top - 31): at least one bit is cut
    cut = k.let("cut", (number(31, "i32") - top).to("u32"))
    wide = k.let("wide", mantissa.to("u64"))
    kept = k.let("kept", (wide >> cut).to("u32"))
    lost = k.let("lost", wide & ((number(1, "u64") << cut) - 1))
    half = k.let("half", number(1, "u64") << (cut - 1))
    up = (lost > half) | (lost.equals(half) & (kept & 1).differs(0))
    size = k.let("size", kept + up.to("u32"))
    k.exit(size > MOST, limit)
    signed = size.to("i32")
    return k.made(choose(negative, number(0, "i32") - signed, signed))


@dataclass(frozen=True, slots=True)
class Raw:
    """A function of raw values in the making; `places` of its arguments and of its result come as parameters."""

    k: Builder

    @property
    def a(self) -> Arithmetic:
        """Words of 32 bits."""
        return Arithmetic(self.k, 32)

    def argument(self, name: str) -> tuple[Word, Word]:
        """(raw value, its magnitude)"""
        x = self.k.parameter(name, "i32")
        size = choose(x < 0, number(0, "u32") - x.to("u32"), x.to("u32"))
        return x, self.k.let(f"{name}_size", size)

    def number(self, x: Word, size: Word, places: Word) -> Number:
        """A raw value that is not 0 as a number."""
        k = self.k
        lead = k.let("lead", k.call(zeros(32), size))
        exponent = number(31, "i32") - lead.to("i32") - places
        return Number(k.let("below", x < 0), k.let("mantissa", size << lead), k.let("exponent", exponent))

    def placed(self, value: Number, places: Word) -> Word:
        """A number as a raw value."""
        return self.k.call(place(), value.negative, value.mantissa, value.exponent, places)

    def constant(self, value: int, exponent: int, places: Word, negative: Word = FALSE) -> Word:
        """value * 2**(exponent - 31), as a raw value."""
        return self.placed(Number(negative, number(value, "u32"), number(exponent, "i32")), places)


ONE = 1 << 31
QUARTER_TURN = cores.near(*HALF_PI, 31)
HALF_TURN = cores.near(HALF_PI[0] * 2, HALF_PI[1], 30)


def _one_argument(name: str, about: str, rest: Callable[[Raw, Word, Word, Word, Word], Word]) -> Kernel:
    raw = Raw(Builder(f"fixed_{name}", about))
    x, size = raw.argument("x")
    places, wanted = raw.k.parameter("places", "i32"), raw.k.parameter("wanted", "i32")
    return raw.k.made(rest(raw, x, size, places, wanted))


def _sine(raw: Raw, x: Word, size: Word, places: Word, wanted: Word, cosine: bool = False) -> Word:
    raw.k.exit(size.equals(0), raw.constant(ONE, 0, wanted) if cosine else number(0, "i32"))
    value = raw.number(x, size, places)
    raw.k.exit(value.exponent < -17, raw.constant(ONE, 0, wanted) if cosine else raw.placed(value, wanted))
    of = Number(FALSE if cosine else value.negative, value.mantissa, value.exponent)
    return raw.placed(cores.sine(raw.a, of, number(int(cosine), "u32")), wanted)


def _tangent(raw: Raw, x: Word, size: Word, places: Word, wanted: Word) -> Word:
    raw.k.exit(size.equals(0), number(0, "i32"))
    value = raw.number(x, size, places)
    raw.k.exit(value.exponent < -17, raw.placed(value, wanted))
    return raw.placed(cores.tangent(raw.a, value), wanted)


def _wrap(raw: Raw, x: Word, size: Word, places: Word, wanted: Word) -> Word:
    raw.k.exit(size.equals(0), number(0, "i32"))
    value = raw.number(x, size, places)
    low = (value.exponent < 1) | (value.exponent.equals(1) & (value.mantissa <= HALF_TURN))
    raw.k.exit(low, raw.placed(value, wanted))
    return raw.placed(cores.wrapped(raw.a, value), wanted)


def _exp(raw: Raw, x: Word, size: Word, places: Word, wanted: Word) -> Word:
    raw.k.exit(size.equals(0), raw.constant(ONE, 0, wanted))
    value = raw.number(x, size, places)
    raw.k.exit(value.exponent < -31, raw.constant(ONE, 0, wanted))
    # beyond exp(±128) every scale is at an end
    raw.k.exit(value.exponent > 6, choose(value.negative, number(0, "i32"), MOST))
    return raw.placed(cores.exponential(raw.a, value), wanted)


def _log(raw: Raw, x: Word, size: Word, places: Word, wanted: Word) -> Word:
    raw.k.exit(x <= 0, number(-MOST, "i32"))
    return raw.placed(cores.logarithm(raw.a, raw.number(x, size, places)), wanted)


def _sqrt(raw: Raw, x: Word, size: Word, places: Word, wanted: Word) -> Word:
    raw.k.exit(x <= 0, number(0, "i32"))
    return raw.placed(cores.root(raw.a, raw.number(x, size, places))[0], wanted)


def _tanh(raw: Raw, x: Word, size: Word, places: Word, wanted: Word) -> Word:
    raw.k.exit(size.equals(0), number(0, "i32"))
    value = raw.number(x, size, places)
    raw.k.exit(value.exponent < -17, raw.placed(value, wanted))
    raw.k.exit(value.exponent > 3, raw.constant(ONE, 0, wanted, value.negative))
    return raw.placed(cores.hyperbolic(raw.a, value), wanted)


def _arc(raw: Raw, x: Word, size: Word, places: Word, wanted: Word, cosine: bool = False) -> Word:
    raw.k.exit(size.equals(0), raw.constant(QUARTER_TURN, 0, wanted) if cosine else number(0, "i32"))
    value = raw.number(x, size, places)
    if cosine:
        ends = choose(value.negative, raw.constant(HALF_TURN, 1, wanted), 0)
        tiny = raw.constant(QUARTER_TURN, 0, wanted)
    else:
        ends, tiny = raw.constant(QUARTER_TURN, 0, wanted, value.negative), raw.placed(value, wanted)
    raw.k.exit(value.exponent >= 0, ends)
    raw.k.exit(value.exponent < -31 if cosine else value.exponent < -17, tiny)
    other = cores.cathetus(raw.a, value)
    y, z = (other, value) if cosine else (value, other)
    return raw.placed(cores.arctangent(raw.a, y, z), wanted)


def _two_arguments(name: str, about: str) -> tuple[Raw, list[tuple[Word, Word, Word]], Word]:
    raw = Raw(Builder(f"fixed_{name}", about))
    first, second = raw.argument("y"), raw.argument("x")
    places = raw.k.parameter("y_places", "i32"), raw.k.parameter("x_places", "i32")
    return raw, [(*first, places[0]), (*second, places[1])], raw.k.parameter("wanted", "i32")


def _atan2() -> Kernel:
    raw, (y, x), wanted = _two_arguments("atan2", "the angle of the point (x, y)")
    k = raw.k
    left = k.let("left", x[0] < 0)
    k.exit(y[1].equals(0), choose(left, raw.constant(HALF_TURN, 1, wanted), 0))
    k.exit(x[1].equals(0), raw.constant(QUARTER_TURN, 0, wanted, k.let("down", y[0] < 0)))
    return k.made(raw.placed(cores.arctangent(raw.a, raw.number(*y), raw.number(*x)), wanted))


def _hypot() -> Kernel:
    raw, (y, x), wanted = _two_arguments("hypot", "the square root of x^2 + y^2")
    k = raw.k
    up, along = (Number(FALSE, n.mantissa, n.exponent) for n in (raw.number(*y), raw.number(*x)))
    k.exit(y[1].equals(0), raw.placed(along, wanted))
    k.exit(x[1].equals(0), raw.placed(up, wanted))
    return k.made(raw.placed(cores.hypotenuse(raw.a, up, along), wanted))


_RESTS: dict[str, tuple[str, Callable[..., Word]]] = {
    "sqrt": ("the square root", _sqrt),
    "sin": ("the sine", _sine),
    "cos": ("the cosine", lambda raw, x, size, p, w: _sine(raw, x, size, p, w, True)),
    "tan": ("the tangent", _tangent),
    "asin": ("the angle whose sine is x", _arc),
    "acos": ("the angle whose cosine is x", lambda raw, x, size, p, w: _arc(raw, x, size, p, w, True)),
    "exp": ("e to the power x", _exp),
    "log": ("the natural logarithm", _log),
    "tanh": ("the hyperbolic tangent", _tanh),
    "wrap": ("the angle less whole turns, in -pi ... pi", _wrap),
}
_PAIRS = {"atan2": _atan2, "hypot": _hypot}


@cache
def kernel(name: str) -> Kernel:
    """The function `name` on raw values: parameters are the arguments, then the places of each, then those of the result."""
    return _PAIRS[name]() if name in _PAIRS else _one_argument(name, *_RESTS[name])
