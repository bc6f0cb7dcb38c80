"""The elementary functions on normalised numbers: reduction of the argument and a polynomial, in words of one width.

Each function takes and gives numbers of Arithmetic; its error is a few units of the last bit of the word (tests/kernels measures
it), so that a result rounded to a float of 8 (11) bits less is within 0.51 to 0.56 units of its last place. Sources: M. H. Payne,
R. N. Hanek, Radian reduction for trigonometric functions, SIGNUM Newsletter 18 (1983) (the window into 2 / pi); W. J. Cody,
W. Waite, Software Manual for the Elementary Functions, 1980 (the other reductions); both from memory.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

from hybgen.kernels.arithmetic import Arithmetic, Number, Pair
from hybgen.kernels.coefficients import COEFFICIENTS
from hybgen.kernels.constants import HALF_PI, LN2, LOG2_E, LOG_OFFSET, SQRT2, TWO_OVER_PI
from hybgen.kernels.word import FALSE, Builder, Kernel, Word, choose, number

LOG_POINT = {32: 2, 64: 4}
"""The polynomial of log is in Q (width - LOG_POINT)."""


def fixed(value: int, places: int, wanted: int) -> int:
    """value * 2**-places as a fixed-point number of `wanted` places, cut."""
    return value >> (places - wanted)


def near(value: int, places: int, wanted: int) -> int:
    """value * 2**-places as a fixed-point number of `wanted` places, to the nearest."""
    return fixed(value + (1 << (places - wanted - 1)), places, wanted)


def coefficients(a: Arithmetic, name: str) -> list[Word]:
    """A polynomial's coefficients as constants."""
    return [a.word(c) for c in COEFFICIENTS[name][a.width]]


@dataclass(frozen=True, slots=True)
class Turn:
    """An angle as quadrant and rest: |angle| = (quadrant + ± rest) * pi / 2, modulo a turn."""

    quadrant: Word
    """u32, 0 … 3"""
    negative: Word
    """Is the rest below 0?"""
    rest: Pair
    """Q (2 * width - 2), at most 1/2."""


def quarters(a: Arithmetic, x: Number) -> Pair:
    """|x| * 2 / pi modulo 4, in Q (2 * width - 2). The exponent of x is at least 1 - width."""
    k, width = a.k, a.width
    at = k.let("at", (x.exponent + (width - 1)).to("u32"))
    word, shift = k.let("word", at >> (width.bit_length() - 1)), k.let("shift", at & (width - 1))
    far = k.let("back", number(width - 1, "u32") - shift)
    words = two_over_pi(width)
    row = [k.let("w", k.table("two_over_pi", a.type, words, word + i if i else word)) for i in range(4)]
    t2, t1, t0 = (k.let("t", (row[i] << shift) | ((row[i + 1] >> 1) >> far)) for i in range(3))
    middle = a.product(x.mantissa, t1)
    lower = k.let("lower", a.high(x.mantissa, t0))
    return a.add(Pair(middle.high + x.mantissa * t2, middle.low), Pair(a.word(0), lower))


def two_over_pi(width: int) -> tuple[int, ...]:
    """The bits of 2 / pi after two words of zeros: as many words as the largest exponent needs."""
    count = {32: 8, 64: 20}[width]
    bits = fixed(TWO_OVER_PI[0], TWO_OVER_PI[1], (count - 2) * width)
    return (0, 0, *((bits >> (width * i)) & ((1 << width) - 1) for i in reversed(range(count - 2))))


def turn(a: Arithmetic, x: Number) -> Turn:
    """The angle |x| in quadrants."""
    k, width = a.k, a.width
    part = quarters(a, x)
    quadrant = k.let("quadrant", (part.high + (1 << (width - 3))) >> (width - 2))
    high = k.let("high", part.high - (quadrant << (width - 2)))
    negative = k.let("below", high >= a.one)
    return Turn(quadrant.to("u32"), negative, a.negated(Pair(high, part.low), negative))


def radians(a: Arithmetic, rest: Pair) -> tuple[Word, Word]:
    """(mantissa that may have one leading zero, leading zeros n): rest * pi / 2 = mantissa * 2**(3 - n - width)."""
    first, count = a.normalised(rest)
    return a.k.let("angle", a.high(first, a.word(near(*HALF_PI, a.width - 1)))), count


def wave(a: Arithmetic, angle: Word, count: Word, odd: Word) -> Number:
    """cos (odd: u32 1) or sin (0) of an angle 0 … pi/4 as `radians` gives it; the sign is left open, the mantissa loose."""
    k, width = a.k, a.width
    small = k.let("small", a.right(angle, count - 3))
    square = k.let("square", a.high(small, small))
    terms = len(COEFFICIENTS["SIN"][width])
    words = (*COEFFICIENTS["SIN"][width], *COEFFICIENTS["COS"][width])
    row = k.let("row", choose(odd.equals(0), number(0, "u32"), terms))
    rows = [k.table("sine", a.type, words, row + i if i else row) for i in range(terms)]
    slope = a.alternating(square, rows)
    drop = k.let("drop", a.high(square, slope))
    base = k.let("base", choose(odd.equals(0), angle, a.one))
    exponent = choose(odd.equals(0), number(2, "i32") - count.to("i32"), 0)
    return Number(FALSE, k.let("wave", base - a.high(base, drop)), k.let("exponent", exponent))


def sine(a: Arithmetic, x: Number, shift: Word) -> Number:
    """sin (shift 0) or, of a positive number, cos (shift 1)."""
    k = a.k
    found = turn(a, x)
    quadrant = k.let("quadrant", found.quadrant + shift)
    angle, count = radians(a, found.rest)
    odd = k.let("odd", quadrant & 1)
    loose = wave(a, angle, count, odd)
    lower = (quadrant & 2).differs(0).differs(odd.equals(0) & found.negative)
    negative = k.let("sign", lower.differs(x.negative))
    return a.tidy(negative, loose.mantissa, loose.exponent)


def tangent(a: Arithmetic, x: Number) -> Number:
    """tan"""
    k = a.k
    found = turn(a, x)
    angle, count = radians(a, found.rest)
    odd = k.let("odd", found.quadrant & 1)
    above, below = (wave(a, angle, count, o) for o in (odd, k.let("even", odd ^ 1)))
    top, bottom = (a.tidy(n.negative, n.mantissa, n.exponent) for n in (above, below))
    ratio = a.quotient(top, bottom)
    negative = k.let("sign", odd.equals(1).differs(found.negative).differs(x.negative))
    return Number(negative, ratio.mantissa, ratio.exponent)


def wrapped(a: Arithmetic, x: Number) -> Number:
    """x less the nearest whole turns; in -pi … pi."""
    k = a.k
    part = quarters(a, x)
    below = k.let("below", part.high >= a.one)
    angle, count = radians(a, a.negated(part, below))
    return a.tidy(k.let("sign", below.differs(x.negative)), angle, number(2, "i32") - count.to("i32"))


def octaves(a: Arithmetic, x: Number) -> tuple[Pair, Pair]:
    """|x| * log2(e): (its leading bits P = value * 2**(2 * width - 2 - exponent), the value with `width` places after the point).

    The exponent is from 1 - width to width - 2."""
    upper = fixed(*LOG2_E, a.width - 1)
    lower = fixed(*LOG2_E, 2 * a.width - 1) & ((1 << a.width) - 1)
    more = a.k.let("more", a.high(x.mantissa, a.word(lower)))
    leading = a.add(a.product(x.mantissa, a.word(upper)), Pair(a.word(0), more))
    return leading, a.shifted(leading, a.k.let("count", (number(a.width - 2, "i32") - x.exponent).to("u32")))


def exponential(a: Arithmetic, x: Number) -> Number:
    """exp"""
    k = a.k
    _, power = octaves(a, x)
    part = k.let("part", choose(x.negative, negated_word(a, power.low), power.low))
    up = power.high.to("i32")
    down = number(0, "i32") - up - power.low.differs(0).to("i32")
    slope = a.rising(part, coefficients(a, "EXP"))
    mantissa = k.let("mantissa", a.high(part, slope) | a.one)
    return Number(FALSE, mantissa, k.let("exponent", choose(x.negative, down, up)))


def negated_word(a: Arithmetic, word: Word) -> Word:
    """-word modulo 2**width"""
    return a.word(0) - word


def hyperbolic(a: Arithmetic, x: Number) -> Number:
    """tanh |x| = (exp(2 |x|) - 1) / (exp(2 |x|) + 1), with the sign of x. |x| is below width / 2."""
    k = a.k
    leading, power = octaves(a, Number(x.negative, x.mantissa, k.let("twice", x.exponent + 1)))
    slope = a.rising(power.low, coefficients(a, "EXP"))
    first, count = a.normalised(leading)
    # below one octave: g = exp(2x) - 1 with all its leading bits; g / (2 + g)
    growth = k.let("growth", a.high(first, slope))
    places = k.let("places", (count.to("i32") - x.exponent - 2).to("u32"))
    small = Pair(growth, a.word(a.one) + a.right(growth, places))
    # else m = exp(2x) / 2**n: (m - 2**-n) / (m + 2**-n)
    whole = k.let("whole", a.high(power.low, slope) | a.one)
    unit = k.let("unit", a.right(a.word(a.one), power.high.to("u32")))
    large = Pair(whole - unit, (whole >> 1) + (unit >> 1))
    one = k.let("one", power.high.equals(0))
    top = choose(one, x.exponent + 3 - count.to("i32"), 0)
    above = a.tidy(x.negative, choose(one, small.high, large.high), top)
    positive = FALSE
    below = a.tidy(positive, choose(one, small.low, large.low), number(1, "i32"))
    return a.quotient(above, below)


def logarithm(a: Arithmetic, x: Number) -> Number:
    """log of a positive x; 0 has the mantissa 0."""
    k, width = a.k, a.width
    point, places = LOG_POINT[width], 2 * width - 12
    upper = k.let("upper", x.mantissa > fixed(*SQRT2, width - 1))
    doubled = k.let("doubled", choose(upper, x.mantissa, x.mantissa << 1))
    size = k.let("size", choose(upper, negated_word(a, doubled), doubled))
    octave = k.let("octave", x.exponent + upper.to("i32"))
    slope = a.alternating(k.let("g", doubled + fixed(*LOG_OFFSET, width)), coefficients(a, "LOG"))
    part = a.product(size, slope)
    less = k.let("less", octave < 0)
    count = k.let("count", choose(less, number(0, "i32") - octave, octave).to(a.type))
    ln2 = fixed(*LN2, places)
    whole = a.product(count, a.word(ln2 & ((1 << width) - 1)))
    whole = Pair(k.let("high", whole.high + count * a.word(ln2 >> width)), whole.low)
    finer = Pair(part.high >> (12 - point), (part.low >> (12 - point)) | (part.high << (width - 12 + point)))
    finer = Pair(k.let("high", finer.high), k.let("low", finer.low))
    total = a.add(a.negated(whole, less), a.negated(finer, upper))
    negative = k.let("sign", total.high >= a.one)
    total = a.negated(total, negative)
    flat = k.let("flat", octave.equals(0))
    high, low = (k.let("v", choose(flat, p, t)) for p, t in ((part.high, total.high), (part.low, total.low)))
    mantissa, zeros = a.normalised(Pair(high, low))
    exponent = choose(flat, number(point - 1, "i32"), 11) - zeros.to("i32")
    return Number(k.let("sign", choose(flat, upper, negative)), mantissa, k.let("exponent", exponent))


def arctangent(a: Arithmetic, y: Number, x: Number) -> Number:
    """atan2 of two numbers that are not 0."""
    k, width = a.k, a.width
    steep = (y.exponent > x.exponent) | (y.exponent.equals(x.exponent) & (y.mantissa > x.mantissa))
    steep = k.let("steep", steep)
    top, bottom = (
        Number(
            x.negative,
            k.let(n, choose(steep, p.mantissa, q.mantissa)),
            k.let(f"{n}_exponent", choose(steep, p.exponent, q.exponent)),
        )
        for n, p, q in (("top", x, y), ("bottom", y, x))
    )
    ratio = a.quotient(top, bottom)
    back = k.let("back", (number(1, "i32") - ratio.exponent).to("u32"))
    small = choose(ratio.exponent.equals(0), (1 << width) - 1, a.right(ratio.mantissa, back - 2))
    small = k.let("small", small)
    square = k.let("square", a.high(small, small))
    slope = a.alternating(square, coefficients(a, "ATAN"))
    angle = k.let("angle", ratio.mantissa - a.high(ratio.mantissa, a.high(square, slope)))
    flat = k.let("flat", ~steep & ~x.negative)
    part = k.let("part", a.right(angle, back))
    quarter, half = near(*HALF_PI, width - 2), near(HALF_PI[0] * 2, HALF_PI[1], width - 2)
    added = k.let("added", steep & x.negative)
    base = choose(steep, a.word(quarter), half)
    around = k.let("around", choose(added, base + part, base - part))
    exponent = choose(flat, ratio.exponent, 1)
    return a.tidy(y.negative, choose(flat, angle, around), exponent)


def start32(a: Arithmetic, quarter: Word) -> Word:
    """1 / sqrt(q) in Q31 for q >= 1/4 in Q32, to about 26 bits: a polynomial and two of Newton's steps."""
    k = a.k
    rows = [number(c, "u32") for c in COEFFICIENTS["RSQRT"][32]]
    guess = k.let("guess", a.alternating(k.let("over", quarter - (1 << 30)), rows) << 2)
    for _ in range(2):
        square = k.let("square", a.high(guess, guess))
        guess = k.let("guess", a.high(guess, number(3 << 30, "u32") - a.high(quarter, square)) << 1)
    return guess


@cache
def root_word(width: int) -> Kernel:
    """sqrt(q) for a fraction q from 1/4 to 1, to 3 units: Newton's iteration for 1 / sqrt(q), then Heron's step."""
    k = Builder(f"root{width}", "the square root of a fraction q from 1/4 to 1")
    a = Arithmetic(k, width)
    quarter = k.parameter("q", a.type)
    if width == 32:
        guess = start32(a, quarter)
    else:
        rough = start32(Arithmetic(k, 32), k.let("rough", (quarter >> 32).to("u32")))
        guess = k.let("guess", rough.to("u64") << 32)
        square = k.let("square", a.high(guess, guess))
        guess = k.let("guess", a.high(guess, a.word(3 << 62) - a.high(quarter, square)) << 1)
    guess = k.let("guess", guess - 8)
    side = k.let("side", a.high(quarter, guess) << 1)
    lack = k.let("lack", quarter - a.high(side, side))
    side = k.let("side", side + a.high(lack, guess))
    return k.made(choose(side < a.one, a.one, side))


def root(a: Arithmetic, x: Number) -> tuple[Number, Word]:
    """(sqrt of a positive x to 3 units of the word; the fraction q from 1/4 to 1 whose root the mantissa is)."""
    k = a.k
    biased = k.let("biased", (x.exponent + 4096).to("u32"))
    quarter = k.let("q", choose((biased & 1).differs(0), x.mantissa, x.mantissa >> 1))
    mantissa = k.let("root", k.call(root_word(a.width), quarter))
    return Number(x.negative, mantissa, k.let("exponent", (biased >> 1).to("i32") - 2048)), quarter


def hypotenuse(a: Arithmetic, x: Number, y: Number) -> Number:
    """sqrt(x**2 + y**2) of two numbers that are not 0."""
    k = a.k
    first = k.let("first", x.exponent >= y.exponent)
    high = k.let("high", choose(first, x.mantissa, y.mantissa))
    low = k.let("low", choose(first, y.mantissa, x.mantissa))
    top = k.let("top", choose(first, x.exponent, y.exponent))
    apart = k.let("apart", (top - choose(first, y.exponent, x.exponent)).to("u32"))
    low = k.let("low", a.right(low, apart))
    total = (a.high(high, high) >> 1) + (a.high(low, low) >> 1)
    positive = FALSE
    return root(a, a.tidy(positive, total, top + top + 2))[0]


def cathetus(a: Arithmetic, x: Number) -> Number:
    """sqrt((1 - |x|) (1 + |x|)) of x below 1 in magnitude: asin is the angle of (this, x), acos of (x, this)."""
    k = a.k
    part = k.let("fraction", a.right(x.mantissa, (number(-1, "i32") - x.exponent).to("u32")))
    more = k.let("more", a.word(a.one) + (part >> 1))
    # for a fraction cut to 0, 1 - |x| is 1: all bits set stand for it
    less = choose(part.equals(0), (1 << a.width) - 1, negated_word(a, part))
    left = a.tidy(FALSE, less, number(-1, "i32"))
    squared = a.tidy(FALSE, a.high(left.mantissa, more), left.exponent + 1)
    return root(a, squared)[0]
