"""Number formats: what can be represented and how an exact number is rounded to it.

Source: IEEE 754-2019, binary32 and binary64.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from fractions import Fraction
from typing import Any

import numpy as np


class Rounding(StrEnum):
    """How an exact constant becomes a number of the format."""

    NEAREST = "nearest"
    UP = "up"
    DOWN = "down"


@dataclass(frozen=True, slots=True)
class Format:
    """A binary floating-point format."""

    name: str
    precision: int
    """Bits of the significand, the hidden one included."""
    least: int
    """Exponent of the smallest subnormal: 2**least."""
    top: int
    """Largest finite numbers are below 2**top."""

    @property
    def dtype(self) -> np.dtype[Any]:
        """The numpy type."""
        return np.dtype(self.name)

    @property
    def max(self) -> Fraction:
        """The largest finite number."""
        return (1 - Fraction(1, 2**self.precision)) * Fraction(2) ** self.top

    @property
    def whole(self) -> int:
        """From this magnitude on every number of the format is a whole number."""
        return 1 << (self.precision - 1)

    def round(self, value: Fraction, how: Rounding = Rounding.NEAREST) -> Fraction:
        """The number of the format next to `value`; ties to even.

        Raises OverflowError if there is no finite one.
        """
        if value == 0:
            return Fraction(0)
        quantum = Fraction(2) ** max(_exponent(abs(value)) - self.precision + 1, self.least)
        steps = value / quantum
        match how:
            case Rounding.NEAREST:
                whole = round(steps)
            case Rounding.UP:
                whole = -((-steps.numerator) // steps.denominator)
            case Rounding.DOWN:
                whole = steps.numerator // steps.denominator
        rounded = whole * quantum
        if abs(rounded) > self.max:
            raise OverflowError(
                f"{float(value) if abs(value) < Fraction(10) ** 300 else '1e300 or more'} "
                f"is beyond the range of {self.name}"
            )
        return rounded

    def holds(self, value: Fraction) -> bool:
        """Is `value` exactly representable?"""
        return abs(value) <= self.max and self.round(value) == value


def _exponent(value: Fraction) -> int:
    """floor(log2(value)) for a positive fraction, exactly."""
    guess = value.numerator.bit_length() - value.denominator.bit_length()
    return guess if Fraction(2) ** guess <= value else guess - 1


@dataclass(frozen=True, slots=True)
class Exact(Format):
    """No rounding at all: what a law is before it is put into fixed point."""

    @property
    def dtype(self) -> np.dtype[Any]:
        """Raw values."""
        return np.dtype(np.int32)

    @property
    def max(self) -> Fraction:
        """Nothing is too large here."""
        return Fraction(2) ** 1000

    def round(self, value: Fraction, how: Rounding = Rounding.NEAREST) -> Fraction:
        """The value itself."""
        return value


FLOAT32 = Format("float32", 24, -149, 128)
FLOAT64 = Format("float64", 53, -1074, 1024)
FIXED32 = Exact("fixed32", 31, 0, 31)
FORMATS: dict[str, Format] = {f.name: f for f in (FLOAT32, FLOAT64)}
"""The floating-point formats."""
NUMBERS: dict[str, Format] = FORMATS | {FIXED32.name: FIXED32}
"""Every number format."""

LARGEST_COUNT = 2**31 - 1
"""Counters, timers and integers are 32-bit two's complement in C."""
