"""Arithmetic of kernels in words of 32 or 64 bits: products, pairs of words, normalised numbers, quotients, polynomials.

A word w is read as the fraction w * 2**-width ("Q width") unless said otherwise.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

from hybgen.kernels.word import Builder, Kernel, Word, choose, number


@dataclass(frozen=True, slots=True)
class Number:
    """± mantissa * 2**(exponent - (width - 1)); the top bit of the mantissa is set (unless a function says otherwise)."""

    negative: Word
    """bool"""
    mantissa: Word
    exponent: Word
    """i32"""


@dataclass(frozen=True, slots=True)
class Pair:
    """An unsigned number of two words, high * 2**width + low, modulo 2**(2 * width)."""

    high: Word
    low: Word


@dataclass(frozen=True, slots=True)
class Arithmetic:
    """Operations on words of one width, put down in a builder."""

    k: Builder
    width: int

    @property
    def type(self) -> str:
        """The unsigned type of the width."""
        return f"u{self.width}"

    @property
    def one(self) -> int:
        """The word with the top bit set: 1 in Q (width - 1)."""
        return 1 << (self.width - 1)

    def word(self, value: int) -> Word:
        """A constant."""
        return number(value, self.type)

    def high(self, a: Word, b: Word) -> Word:
        """The high word of a product."""
        if self.width == 32:
            return ((a.to("u64") * b.to("u64")) >> 32).to("u32")
        return self.k.call(high64(), a, b)

    def product(self, a: Word, b: Word) -> Pair:
        """The whole product."""
        if self.width == 32:
            whole = self.k.let("product", a.to("u64") * b.to("u64"))
            return Pair(self.k.let("high", (whole >> 32).to("u32")), self.k.let("low", whole.to("u32")))
        return Pair(self.k.let("high", self.high(a, b)), self.k.let("low", a * b))

    def zeros(self, a: Word) -> Word:
        """Leading zeros (u32); width - 1 for 0."""
        return self.k.call(zeros(self.width), a)

    def add(self, a: Pair, b: Pair) -> Pair:
        """The sum of two pairs."""
        low = self.k.let("low", a.low + b.low)
        return Pair(self.k.let("high", a.high + b.high + (low < a.low).to(self.type)), low)

    def negated(self, a: Pair, when: Word) -> Pair:
        """The pair, negated (two's complement) where the condition holds."""
        low = self.k.let("low", choose(when, 0, a.low) - choose(when, a.low, 0))
        borrow = choose(a.low.differs(0), self.word(1), 0)
        high = self.k.let("high", choose(when, self.word(0) - a.high - borrow, a.high))
        return Pair(high, low)

    def right(self, a: Word, count: Word) -> Word:
        """a >> count for any count (u32)."""
        return choose(count > self.width - 1, 0, a >> self._inside(count))

    def _inside(self, count: Word) -> Word:
        return count & (self.width - 1)

    def shifted(self, a: Pair, count: Word) -> Pair:
        """A pair shifted right by 0 … 2 * width - 1."""
        far = self.k.let("beyond", count > self.width - 1)
        near = self.k.let("within", self._inside(count))
        over = self.k.let("over", (a.high << 1) << (number(self.width - 1, "u32") - near))
        low = choose(far, a.high >> near, (a.low >> near) | over)
        return Pair(self.k.let("high", choose(far, 0, a.high >> near)), self.k.let("low", low))

    def normalised(self, a: Pair) -> tuple[Word, Word]:
        """(mantissa with its top bit set, leading zeros as u32): the first `width` bits of a pair that is not 0."""
        far = self.k.let("beyond", a.high.equals(0))
        first = self.k.let("first", choose(far, a.low, a.high))
        second = choose(far, 0, a.low)
        near = self.k.let("within", self.zeros(first))
        over = (second >> 1) >> (number(self.width - 1, "u32") - near)
        count = self.k.let("count", choose(far, near + self.width, near))
        return self.k.let("first", (first << near) | over), count

    def tidy(self, negative: Word, mantissa: Word, exponent: Word) -> Number:
        """A number from a mantissa that may have leading zeros."""
        mantissa = self.k.let("loose", mantissa)
        near = self.k.let("within", self.zeros(mantissa))
        return Number(
            negative, self.k.let("mantissa", mantissa << near), self.k.let("exponent", exponent - near.to("i32"))
        )

    def quotient(self, a: Number, b: Number) -> Number:
        """a / b; the last bit is cut."""
        less = self.k.let("less", a.mantissa < b.mantissa)
        rest = self.k.let("rest", choose(less, a.mantissa, a.mantissa - b.mantissa))
        if self.width == 32:
            ratio = ((rest.to("u64") << 32) // b.mantissa.to("u64")).to("u32")
        else:
            ratio = self.k.call(ratio64(), rest, b.mantissa)
        ratio = self.k.let("ratio", ratio)
        mantissa = self.k.let("quotient", choose(less, ratio | self.one, (ratio >> 1) | self.one))
        exponent = a.exponent - b.exponent - less.to("i32")
        return Number(self.k.let("sign", a.negative.differs(b.negative)), mantissa, self.k.let("exponent", exponent))

    def alternating(self, x: Word, coefficients: list[Word]) -> Word:
        """c0 - x (c1 - x (c2 - …)) by Horner's rule."""
        value = coefficients[-1]
        for c in reversed(coefficients[:-1]):
            value = self.k.let("p", c - self.high(x, value))
        return value

    def rising(self, x: Word, coefficients: list[Word]) -> Word:
        """c0 + x (c1 + x (c2 + …)) by Horner's rule."""
        value = coefficients[-1]
        for c in reversed(coefficients[:-1]):
            value = self.k.let("p", c + self.high(x, value))
        return value


@cache
def zeros(width: int) -> Kernel:
    """Leading zeros of a word: bisection."""
    k = Builder(f"zeros{width}", "leading zeros of a word; one less than its bits for 0")
    a = k.parameter("a", f"u{width}")
    if width == 64:
        upper = k.let("upper", (a >> 32).to("u32"))
        empty = k.let("empty", upper.equals(0))
        count = k.call(zeros(32), choose(empty, a.to("u32"), upper))
        return k.made(choose(empty, number(32, "u32"), 0) + count)
    count = number(0, "u32")
    for step in (16, 8, 4, 2, 1):
        move = k.let("move", choose(a < (1 << (32 - step)), number(step, "u32"), 0))
        count = move if count.op == "const" else count + move
        if step > 1:
            a = k.let("rest", a << move)
    return k.made(count)


@cache
def high64() -> Kernel:
    """The high 64 bits of a product of 64-bit words, by 32-bit digits."""
    k = Builder("high64", "the high half of a 64-bit product")
    a, b = k.parameter("a", "u64"), k.parameter("b", "u64")
    a0, a1 = k.let("a0", a & 0xFFFFFFFF), k.let("a1", a >> 32)
    b0, b1 = k.let("b0", b & 0xFFFFFFFF), k.let("b1", b >> 32)
    first = k.let("first", a1 * b0 + ((a0 * b0) >> 32))
    second = k.let("second", a0 * b1 + (first & 0xFFFFFFFF))
    return k.made(a1 * b1 + (first >> 32) + (second >> 32))


@cache
def ratio64() -> Kernel:
    """floor(a * 2**64 / b) for a < b and b >= 2**63, digit by digit.

    Source: D. E. Knuth, The Art of Computer Programming 2, algorithm 4.3.1 D (from memory).
    """
    k = Builder("ratio64", "a * 2^64 / b for a < b, top bit of b set")
    a, b = k.parameter("a", "u64"), k.parameter("b", "u64")
    b0, b1 = k.let("b0", b & 0xFFFFFFFF), k.let("b1", b >> 32)
    digits = []
    for _ in range(2):
        guess = k.let("guess", choose((a >> 32) >= b1, number(0xFFFFFFFF, "u64"), a // b1))
        left = k.let("left", a - guess * b1)
        # the guess is at most 2 too large
        first = k.let("first", (left < (1 << 32)) & (guess * b0 > (left << 32)))
        guess = k.let("guess", choose(first, guess - 1, guess))
        left = k.let("left", choose(first, left + b1, left))
        second = k.let("second", (left < (1 << 32)) & (guess * b0 > (left << 32)))
        guess = k.let("guess", choose(second, guess - 1, guess))
        digits.append(guess)
        a = k.let("a", (a << 32) - guess * b)
    return k.made((digits[0] << 32) | digits[1])
