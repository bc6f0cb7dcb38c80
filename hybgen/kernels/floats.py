"""The elementary functions on floats: taken apart, computed in words, rounded once to the nearest, ties to even.

Special values as in IEEE 754-2019, section 9.2; every NaN that is returned is the one with the bits 0x7fc00000 (0x7ff8000000000000).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache

from hybgen.kernels import cores
from hybgen.kernels.arithmetic import Arithmetic, Number
from hybgen.kernels.constants import HALF_PI
from hybgen.kernels.word import FALSE, Builder, Kernel, Word, choose, number


@dataclass(frozen=True, slots=True)
class Layout:
    """A binary interchange format and the words that compute for it."""

    width: int
    precision: int

    @property
    def places(self) -> int:
        """Bits of the stored significand."""
        return self.precision - 1

    @property
    def bias(self) -> int:
        """The exponent's bias."""
        return (1 << (self.width - self.precision - 1)) - 1

    @property
    def infinity(self) -> int:
        """The bits of infinity."""
        return (2 * self.bias + 1) << self.places

    @property
    def nan(self) -> int:
        """The bits of the NaN."""
        return self.infinity | 1 << (self.places - 1)

    @property
    def sign(self) -> int:
        """The sign bit."""
        return 1 << (self.width - 1)

    @property
    def half_precision(self) -> int:
        """The bits of a number so small that its square is below half a unit of 1."""
        return (self.bias - self.precision // 2 - 1) << self.places

    def bits(self, value: float) -> int:
        """The bits of a positive number that the format holds."""
        mantissa, exponent = value.hex().removeprefix("0x1.").split("p")
        places = int(mantissa.ljust(13, "0"), 16) >> (52 - self.places)
        return (int(exponent) + self.bias) << self.places | places


LAYOUTS = {"float32": Layout(32, 24), "float64": Layout(64, 53)}


@dataclass(frozen=True, slots=True)
class Argument:
    """A float taken apart."""

    bits: Word
    size: Word
    """The bits without the sign."""
    sign: Word
    """The sign bit in its place."""


@dataclass(frozen=True, slots=True)
class Float:
    """A function of floats in the making."""

    k: Builder
    layout: Layout

    @property
    def a(self) -> Arithmetic:
        """Words of the format's width."""
        return Arithmetic(self.k, self.layout.width)

    def argument(self, name: str) -> Argument:
        """The next parameter."""
        x = self.k.parameter(name, "real")
        bits = self.k.let(f"{name}_bits", Word("bits", self.a.type, (x,)))
        size = self.k.let(f"{name}_size", bits & (self.layout.sign - 1))
        return Argument(bits, size, self.k.let(f"{name}_sign", bits & self.layout.sign))

    def number(self, x: Argument) -> Number:
        """A finite argument that is not 0, normalised."""
        k, layout = self.k, self.layout
        gap = layout.width - layout.precision
        tiny = k.let("tiny", x.size < (1 << layout.places))
        zeros = k.let("zeros", choose(tiny, self.a.zeros(x.size), number(0, "u32")))
        mantissa = choose(tiny, x.size << zeros, (x.size << gap) | layout.sign)
        stored = (x.size >> layout.places).to("u32").to("i32") - layout.bias
        exponent = choose(tiny, number(gap + 1 - layout.bias, "i32") - zeros.to("i32"), stored)
        return Number(k.let("below", x.sign.differs(0)), k.let("mantissa", mantissa), k.let("exponent", exponent))

    def exit(self, condition: Word, value: Word | int) -> None:
        """An early answer, as bits."""
        bits = self.a.word(value) if isinstance(value, int) else value
        self.k.exit(condition, Word("real", "real", (bits,)))

    def refuse(self, *arguments: Argument) -> None:
        """NaN for NaN."""
        for x in arguments:
            self.exit(x.size > self.layout.infinity, self.layout.nan)

    def packed(self, value: Number) -> Kernel:
        """The function that ends with this number, rounded."""
        return self.answer(self.k.call(pack(self.layout), *_parts(value)))

    def answer(self, bits: Word) -> Kernel:
        """The function that ends with these bits."""
        return self.k.made(Word("real", "real", (bits,)))


@cache
def pack(layout: Layout) -> Kernel:
    """A number as the bits of the nearest float; mantissa 0 gives 0."""
    width, gap = layout.width, layout.width - layout.precision
    k = Builder(f"pack{width}", "the nearest float, ties to even")
    negative, mantissa = k.parameter("negative", "bool"), k.parameter("mantissa", f"u{width}")
    exponent = k.parameter("exponent", "i32")
    a = Arithmetic(k, width)
    sign = k.let("sign", choose(negative, a.word(layout.sign), 0))
    k.exit(mantissa.equals(0), sign)
    k.exit(exponent > layout.bias, sign | layout.infinity)
    low = k.let("low", exponent < 1 - layout.bias)
    cut = k.let("cut", choose(low, (number(1 - layout.bias, "i32") - exponent).to("u32"), 0))
    k.exit(cut > layout.precision, sign)
    lost = choose((mantissa & ((a.word(1) << cut) - 1)).equals(0), a.word(0), 1)
    kept = k.let("kept", (mantissa >> cut) | lost)
    body = k.let("body", kept >> gap)
    half = (1 << (gap - 1)) - 1
    body = k.let("body", body + (((kept & ((1 << gap) - 1)) + (body & 1) + half) >> gap))
    lead = choose(low, 0, (exponent + (layout.bias - 1)).to(f"u{width}") << layout.places)
    return k.made(sign | (lead + body))


Maker = Callable[[Layout], Kernel]


def _parameter(k: Builder, name: str, width: int) -> Number:
    """A number as three parameters."""
    negative, mantissa = k.parameter(f"{name}_negative", "bool"), k.parameter(f"{name}_mantissa", f"u{width}")
    return Number(negative, mantissa, k.parameter(f"{name}_exponent", "i32"))


@cache
def _wave(layout: Layout) -> Kernel:
    """sin and cos, their common part."""
    k = Builder(f"wave{layout.width}", "sin (shift 0), cos (shift 1, x positive), as bits")
    x = _parameter(k, "x", layout.width)
    found = cores.sine(Arithmetic(k, layout.width), x, k.parameter("shift", "u32"))
    return k.made(k.call(pack(layout), *_parts(found)))


@cache
def _direction(layout: Layout) -> Kernel:
    """atan2, asin and acos, their common part."""
    k = Builder(f"angle{layout.width}", "the angle of a point (x, y) that is on no axis, as bits")
    y, x = _parameter(k, "y", layout.width), _parameter(k, "x", layout.width)
    found = cores.arctangent(Arithmetic(k, layout.width), y, x)
    return k.made(k.call(pack(layout), *_parts(found)))


def _parts(x: Number) -> tuple[Word, Word, Word]:
    return x.negative, x.mantissa, x.exponent


def _sine(name: str, about: str, cosine: bool) -> Maker:
    """sin, cos: a tiny argument is its own answer, or 1 is."""

    def made(layout: Layout) -> Kernel:
        f = Float(Builder(name, about), layout)
        x = f.argument("x")
        f.exit(x.size >= layout.infinity, layout.nan)
        f.exit(x.size < layout.half_precision, layout.bits(1.0) if cosine else x.bits)
        found = f.number(x)
        negative = FALSE if cosine else found.negative
        shift = number(int(cosine), "u32")
        return f.answer(f.k.call(_wave(layout), negative, found.mantissa, found.exponent, shift))

    return made


def _tan(layout: Layout) -> Kernel:
    f = Float(Builder("tan", "the tangent"), layout)
    x = f.argument("x")
    f.exit(x.size >= layout.infinity, layout.nan)
    f.exit(x.size < layout.half_precision, x.bits)
    return f.packed(cores.tangent(f.a, f.number(x)))


def _wrap(layout: Layout) -> Kernel:
    f = Float(Builder("wrap", "the angle less whole turns, in -pi ... pi"), layout)
    x = f.argument("x")
    f.exit(x.size >= layout.infinity, layout.nan)
    most = below_pi(layout)
    f.exit(x.size <= most, x.bits)
    found = cores.wrapped(f.a, f.number(x))
    bits = f.k.let("bits", f.k.call(pack(layout), *_parts(found)))
    size = f.k.let("size", bits & (layout.sign - 1))
    return f.answer(choose(size > most, (bits & layout.sign) | most, bits))


def below_pi(layout: Layout) -> int:
    """The bits of the largest float below pi."""
    top = cores.fixed(HALF_PI[0], HALF_PI[1], layout.places)
    return ((layout.bias + 1) << layout.places) + (top - (1 << layout.places))


def _exp(layout: Layout) -> Kernel:
    f = Float(Builder("exp", "e to the power x"), layout)
    x = f.argument("x")
    f.refuse(x)
    # beyond these ends the result overflows, or is below half of the smallest float
    high = layout.bits(128.0 if layout.width == 32 else 1024.0)
    f.exit(x.size >= high, choose(x.sign.differs(0), f.a.word(0), layout.infinity))
    f.exit(x.size < (layout.bias - layout.precision - 2) << layout.places, layout.bits(1.0))
    return f.packed(cores.exponential(f.a, f.number(x)))


def _log(layout: Layout) -> Kernel:
    f = Float(Builder("log", "the natural logarithm"), layout)
    x = f.argument("x")
    f.refuse(x)
    f.exit(x.size.equals(0), layout.sign | layout.infinity)
    f.exit(x.sign.differs(0), layout.nan)
    f.exit(x.size.equals(layout.infinity), layout.infinity)
    return f.packed(cores.logarithm(f.a, f.number(x)))


def _tanh(layout: Layout) -> Kernel:
    f = Float(Builder("tanh", "the hyperbolic tangent"), layout)
    x = f.argument("x")
    f.refuse(x)
    f.exit(x.size < layout.half_precision, x.bits)
    f.exit(x.size >= layout.bits(10.0 if layout.width == 32 else 20.0), x.sign | layout.bits(1.0))
    return f.packed(cores.hyperbolic(f.a, f.number(x)))


def _sqrt(layout: Layout) -> Kernel:
    f = Float(Builder("sqrt", "the square root, correctly rounded"), layout)
    x = f.argument("x")
    f.refuse(x)
    f.exit(x.size.equals(0), x.bits)
    f.exit(x.sign.differs(0), layout.nan)
    f.exit(x.size.equals(layout.infinity), layout.infinity)
    found, quarter = cores.root(f.a, f.number(x))
    # one bit more than the format has, from below, made exact with the remainder, then rounded: a root is never a tie
    wide = layout.precision + 1
    cut = f.k.let("cut", ((found.mantissa - 4) >> (layout.width - wide)) + 1)
    rest = (quarter.to("u64") << (2 * wide - layout.width)) - cut.to("u64") * cut.to("u64")
    cut = f.k.let("cut", cut - (rest >> 63).to(f.a.type))
    body = (cut >> 1) + (cut & 1)
    lead = (found.exponent + (layout.bias - 1)).to(f.a.type) << layout.places
    return f.answer(lead + body)


def _hypot(layout: Layout) -> Kernel:
    f = Float(Builder("hypot", "the square root of x^2 + y^2"), layout)
    x, y = f.argument("x"), f.argument("y")
    f.exit(x.size.equals(layout.infinity) | y.size.equals(layout.infinity), layout.infinity)
    f.refuse(x, y)
    f.exit(x.size.equals(0), y.size)
    f.exit(y.size.equals(0), x.size)
    return f.packed(cores.hypotenuse(f.a, f.number(x), f.number(y)))


def _atan2(layout: Layout) -> Kernel:
    f = Float(Builder("atan2", "the angle of the point (x, y)"), layout)
    y, x = f.argument("y"), f.argument("x")
    f.refuse(y, x)
    turn = f.a.word(0)
    pi, half, eighth, three = (nearest_pi(layout, n) for n in (8, 4, 2, 6))
    left = f.k.let("left", x.sign.differs(0))
    endless = x.size.equals(layout.infinity) & y.size.equals(layout.infinity)
    f.exit(endless, y.sign | choose(left, f.a.word(three), eighth))
    f.exit(y.size.equals(0) | x.size.equals(layout.infinity), y.sign | choose(left, f.a.word(pi), turn))
    f.exit(x.size.equals(0) | y.size.equals(layout.infinity), y.sign | half)
    return f.answer(f.k.call(_direction(layout), *_parts(f.number(y)), *_parts(f.number(x))))


def nearest_pi(layout: Layout, eighths: int) -> int:
    """The bits of the float next to eighths * pi / 8."""
    value = HALF_PI[0] * eighths // 4
    exponent = value.bit_length() - 1 - HALF_PI[1]
    body = cores.near(value, HALF_PI[1] + exponent, layout.places)
    return ((exponent + layout.bias - 1) << layout.places) + body


def _arc(name: str, about: str, cosine: bool) -> Maker:
    def made(layout: Layout) -> Kernel:
        f = Float(Builder(name, about), layout)
        x = f.argument("x")
        one = layout.bits(1.0)
        f.exit(x.size > one, layout.nan)
        if cosine:
            f.exit(x.size.equals(one), choose(x.sign.differs(0), f.a.word(nearest_pi(layout, 8)), 0))
            f.exit(x.size < (layout.bias - layout.precision - 2) << layout.places, nearest_pi(layout, 4))
        else:
            f.exit(x.size.equals(one), x.sign | nearest_pi(layout, 4))
            f.exit(x.size < layout.half_precision, x.bits)
        found = f.number(x)
        other = cores.cathetus(f.a, found)
        y, z = (other, found) if cosine else (found, other)
        return f.answer(f.k.call(_direction(layout), *_parts(y), *_parts(z)))

    return made


MAKERS: dict[str, Maker] = {
    "sqrt": _sqrt,
    "sin": _sine("sin", "the sine", False),
    "cos": _sine("cos", "the cosine", True),
    "tan": _tan,
    "asin": _arc("asin", "the angle whose sine is x", False),
    "acos": _arc("acos", "the angle whose cosine is x", True),
    "atan2": _atan2,
    "exp": _exp,
    "log": _log,
    "tanh": _tanh,
    "hypot": _hypot,
    "wrap": _wrap,
}


@cache
def kernel(name: str, format_: str) -> Kernel:
    """The function `name` (a key of MAKERS) for float32 or float64."""
    return MAKERS[name](LAYOUTS[format_])
