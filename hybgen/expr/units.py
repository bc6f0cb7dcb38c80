"""Units with scale: exact, compared strictly.

A unit is a product of powers of base units times an exact scale (a fraction times a power of pi, so that
degrees and radians are told apart exactly). The radian is dimensionless with scale one, as in the SI. The
degree Celsius is a unit of its own: it can only be shifted by kelvins; two of them differ by kelvins.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction

BASE = ("m", "kg", "s", "A", "K", "mol", "cd")
_ZERO = (0,) * len(BASE)


@dataclass(frozen=True, slots=True)
class Unit:
    """Powers of the SI base units, an exact scale, and how the author wrote it."""

    powers: tuple[int, ...] = _ZERO
    scale: Fraction = Fraction(1)
    pi: int = 0
    """The power of pi in the scale."""
    absolute: bool = False
    """A temperature in degC: a point, not a difference."""
    text: str = ""

    def same(self, other: Unit) -> bool:
        """Equal in dimension, scale and kind."""
        return self.alike(other) and self.scale == other.scale and self.pi == other.pi

    def alike(self, other: Unit) -> bool:
        """Equal in dimension and kind; the scale may differ."""
        return self.powers == other.powers and self.absolute == other.absolute

    @property
    def plain(self) -> bool:
        """Dimensionless with scale one."""
        return self.same(ONE)

    def __mul__(self, other: Unit) -> Unit:
        powers = tuple(a + b for a, b in zip(self.powers, other.powers, strict=True))
        return Unit(powers, self.scale * other.scale, self.pi + other.pi, False, _product(self.text, other.text, "*"))

    def __truediv__(self, other: Unit) -> Unit:
        powers = tuple(a - b for a, b in zip(self.powers, other.powers, strict=True))
        return Unit(powers, self.scale / other.scale, self.pi - other.pi, False, _product(self.text, other.text, "/"))

    def __pow__(self, n: int) -> Unit:
        powers = tuple(a * n for a in self.powers)
        if self.scale > 0 and abs(n) * (self.scale.numerator.bit_length() + self.scale.denominator.bit_length()) > 4096:
            raise OverflowError("unit scale too large")
        text = f"({self.text}){n}" if self.text and not self.text.isalpha() else f"{self.text}{n}" if self.text else ""
        return Unit(powers, self.scale**n, self.pi * n, False, text)

    def __str__(self) -> str:
        return self.text or self._spelled()

    def _spelled(self) -> str:
        """The unit spelled in base units, for units that come out of a product and have no spelling."""
        up = " ".join(f"{b}{p if p != 1 else ''}" for b, p in zip(BASE, self.powers, strict=True) if p > 0)
        down = " ".join(f"{b}{-p if p != -1 else ''}" for b, p in zip(BASE, self.powers, strict=True) if p < 0)
        name = (up or "1") + ("/" + down.replace(" ", "/") if down else "")
        factor = self.factor_text(ONE)
        return name if factor == "1" else f"{factor} {name}"

    def factor_text(self, other: Unit) -> str:
        """How many of `other` one of this unit is, as text (`1/1000`, `pi/180`)."""
        ratio, power = self.scale / other.scale, self.pi - other.pi
        if power == 0:
            return str(ratio)
        pi = "pi" if abs(power) == 1 else f"pi**{abs(power)}"
        if power > 0:
            head = pi if ratio.numerator == 1 else f"{ratio.numerator}*{pi}"
            return head if ratio.denominator == 1 else f"{head}/{ratio.denominator}"
        tail = pi if ratio.denominator == 1 else f"({ratio.denominator}*{pi})"
        return f"{ratio.numerator}/{tail}"


def _product(left: str, right: str, sign: str) -> str:
    if not right:
        return left
    if not left:
        return right if sign == "*" else f"1/{right}" if "/" not in right else ""
    if sign == "/" and ("/" in right or " " in right or "*" in right):
        return f"{left}/({right})"
    return f"{left}{sign}{right}"


def _si(**powers: int) -> tuple[int, ...]:
    return tuple(powers.get(b, 0) for b in BASE)


def _unit(scale: Fraction | int = 1, pi: int = 0, absolute: bool = False, **powers: int) -> Unit:
    return Unit(_si(**powers), Fraction(scale), pi, absolute)


ONE = Unit()
SECOND = Unit(_si(s=1), text="s")
KELVIN = Unit(_si(K=1), text="K")

_PREFIXES = {"p": -12, "n": -9, "u": -6, "µ": -6, "m": -3, "c": -2, "d": -1, "k": 3, "M": 6, "G": 9, "T": 12}
_PREFIXABLE: dict[str, Unit] = {
    "m": _unit(m=1),
    "g": _unit(Fraction(1, 1000), kg=1),
    "s": _unit(s=1),
    "A": _unit(A=1),
    "K": _unit(K=1),
    "mol": _unit(mol=1),
    "cd": _unit(cd=1),
    "rad": _unit(),
    "Hz": _unit(s=-1),
    "N": _unit(kg=1, m=1, s=-2),
    "Pa": _unit(kg=1, m=-1, s=-2),
    "J": _unit(kg=1, m=2, s=-2),
    "W": _unit(kg=1, m=2, s=-3),
    "C": _unit(A=1, s=1),
    "V": _unit(kg=1, m=2, s=-3, A=-1),
    "ohm": _unit(kg=1, m=2, s=-3, A=-2),
    "S": _unit(kg=-1, m=-2, s=3, A=2),
    "F": _unit(kg=-1, m=-2, s=4, A=2),
    "H": _unit(kg=1, m=2, s=-2, A=-2),
    "Wb": _unit(kg=1, m=2, s=-2, A=-1),
    "T": _unit(kg=1, s=-2, A=-1),
    "lm": _unit(cd=1),
    "lx": _unit(cd=1, m=-2),
    "L": _unit(Fraction(1, 1000), m=3),
    "l": _unit(Fraction(1, 1000), m=3),
    "bar": _unit(100000, kg=1, m=-1, s=-2),
    "Wh": _unit(3600, kg=1, m=2, s=-2),
    "Ah": _unit(3600, A=1, s=1),
    "eV": _unit(Fraction("1.602176634e-19"), kg=1, m=2, s=-2),
}
_PLAIN: dict[str, Unit] = {
    "min": _unit(60, s=1),
    "h": _unit(3600, s=1),
    "d": _unit(86400, s=1),
    "deg": _unit(Fraction(1, 180), pi=1),
    "rev": _unit(2, pi=1),
    "rpm": _unit(Fraction(2, 60), pi=1, s=-1),
    "%": _unit(Fraction(1, 100)),
    "ppm": _unit(Fraction(1, 1000000)),
    "degC": _unit(K=1, absolute=True),
    "t": _unit(1000, kg=1),
    "ha": _unit(10000, m=2),
    "atm": _unit(101325, kg=1, m=-1, s=-2),
    "kn": _unit(Fraction(1852, 3600), m=1, s=-1),
    "nmi": _unit(1852, m=1),
    "inch": _unit(Fraction("0.0254"), m=1),
    "ft": _unit(Fraction("0.3048"), m=1),
    "lb": _unit(Fraction("0.45359237"), kg=1),
    "gal": _unit(Fraction("0.003785411784"), m=3),
    "gpm": _unit(Fraction("0.003785411784") / 60, m=3, s=-1),
}


def atom(name: str) -> Unit | None:
    """The unit with this one name (`mm`, `degC`, `kPa`), or None."""
    if name in _PLAIN:
        found = _PLAIN[name]
    elif name in _PREFIXABLE:
        found = _PREFIXABLE[name]
    elif len(name) > 1 and name[0] in _PREFIXES and name[1:] in _PREFIXABLE:
        base = _PREFIXABLE[name[1:]]
        found = Unit(base.powers, base.scale * Fraction(10) ** _PREFIXES[name[0]], base.pi)
    else:
        return None
    return Unit(found.powers, found.scale, found.pi, found.absolute, name)


def known_names() -> Iterator[str]:
    """Names for suggestions: the units themselves and their usual multiples."""
    yield from _PLAIN
    yield from _PREFIXABLE
    yield from ("mm", "cm", "km", "kg", "ms", "us", "mA", "mV", "kV", "kW", "kPa", "mAh", "kHz", "MHz")


@dataclass(frozen=True, slots=True)
class BadUnit(Exception):
    """Text that is no unit; `offset` is where in the text."""

    message: str
    offset: int
    name: str = ""


_TOKEN = re.compile(
    r"\s*(?:(?P<name>%|[A-Za-zµ]+)(?P<power>-?\d{1,3})?|(?P<sign>\*\*|\^|[*/().])|(?P<one>1)|(?P<bad>\S))"
)


def parse(text: str) -> Unit:
    """The unit that a text says: `m/s2`, `V/K`, `1/s`, `/s`, `kg m2/s2`, `W/(m2 K)`.

    Raises BadUnit with the offset of the first mistake.
    """
    reader = _Reader(text)
    unit = reader.product()
    if reader.peek() is not None:
        raise BadUnit("this is no unit", reader.offset)
    return Unit(unit.powers, unit.scale, unit.pi, unit.absolute, " ".join(text.split()))


class _Reader:
    """A cursor over the text of a unit."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.at = 0
        self.depth = 0

    def peek(self) -> re.Match[str] | None:
        return _TOKEN.match(self.text, self.at)

    @property
    def offset(self) -> int:
        found = self.peek()
        return found.start(found.lastgroup or 0) if found else len(self.text)

    def product(self) -> Unit:
        """unit := ['/'] factor (('*' | '/' | blank) factor)*"""
        unit, divide = ONE, False
        first = True
        while True:
            found = self.peek()
            if found is None or found["sign"] == ")":
                if first or divide:
                    raise BadUnit("a unit is missing here", self.offset)
                return unit
            if found["sign"] in ("*", "/", "."):
                if divide or (first and found["sign"] != "/"):
                    raise BadUnit("this is no unit", self.offset)
                divide = found["sign"] == "/"
                self.at = found.end()
                if not divide:
                    unit = self._times(unit, self.factor(), False)
            else:
                unit = self._times(unit, self.factor(), divide)
                divide = False
            first = False

    def _times(self, left: Unit, right: Unit, divide: bool) -> Unit:
        if right.absolute or left.absolute:
            if left.plain and right.absolute and not divide:
                return right
            raise BadUnit("degC can't be part of a product: a difference of temperatures is in K", max(0, self.at - 4))
        try:
            product = left / right if divide else left * right
        except OverflowError:
            raise BadUnit("this unit is out of any reason", self.at) from None
        if any(abs(p) > 64 for p in product.powers):
            raise BadUnit("this unit is out of any reason", self.at)
        return product

    def factor(self) -> Unit:
        found = self.peek()
        if found is None:
            raise BadUnit("a unit is missing here", self.offset)
        if found["one"]:
            self.at = found.end()
            return ONE
        if found["sign"] == "(":
            self.at, self.depth = found.end(), self.depth + 1
            if self.depth > 8:
                raise BadUnit("this unit is out of any reason", self.at)
            unit = self.product()
            close = self.peek()
            if close is None or close["sign"] != ")":
                raise BadUnit("a ')' is missing", self.offset)
            self.at, self.depth = close.end(), self.depth - 1
            return self._power(unit, None)
        if not found["name"]:
            raise BadUnit("this is no unit", self.offset)
        unit_or_none = atom(found["name"])
        if unit_or_none is None:
            raise BadUnit(f"unknown unit '{found['name']}'", found.start("name"), found["name"])
        self.at = found.end()
        return self._power(unit_or_none, found["power"])

    def _power(self, unit: Unit, power: str | None) -> Unit:
        if power is None:
            mark = re.compile(r"(?:\*\*|\^)?(-?\d{1,3})").match(self.text, self.at)
            if mark:
                power, self.at = mark[1], mark.end()
        if power is None:
            return unit
        if unit.absolute or abs(int(power)) > 16:
            raise BadUnit("this power is out of any reason", self.at - len(power))
        return unit ** int(power)
