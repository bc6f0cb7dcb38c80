"""Tables of C: numbers as compact as they can be held, one array for each member of a struct."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hybgen.emit.text import INDENT, WIDTH
from hybgen.ir.model import Member
from hybgen.lower.names import Namer

Array = NDArray[Any]
_SMALL = (np.uint8, np.int8, np.uint16, np.int16, np.int32, np.uint32)


def word(value: int, bits: int) -> str:
    """A pattern of bits as a literal."""
    return f"0x{value:08X}u" if bits == 32 else f"UINT64_C(0x{value:016X})"


def filled(pieces: Sequence[str], pad: str = INDENT) -> Iterator[str]:
    """Pieces with commas between, as many in a line as fit."""
    line = ""
    for i, piece in enumerate(pieces):
        text = piece + ("," if i + 1 < len(pieces) else "")
        if line and len(pad) + len(line) + 1 + len(text) > WIDTH:
            yield pad + line
            line = ""
        line = f"{line} {text}" if line else text
    yield pad + line


def table(type_: str, name: str, sizes: str, pieces: Sequence[str]) -> list[str]:
    """The lines of an array."""
    return [f"static const {type_} {name}{sizes} = {{", *filled(pieces), "};"]


def whole_literal(value: int) -> str:
    """A whole number of 32 bits."""
    if value < -(2**31) + 1:
        return "(-2147483647 - 1)"
    return str(value) if value <= 2**31 - 1 else f"{value}u"


@dataclass(slots=True)
class Columns:
    """Arrays of values, and the C that reads them; a column of one value needs no array."""

    stem: str
    names: Namer
    bits: str
    """The C function that takes a number apart."""
    real: str
    """The C function that makes a number of its bits."""
    lines: list[str] = field(default_factory=list)

    def column(self, word_: str, values: Array, index: str) -> str:
        """C that gives the value of a row: bits of floats (uint32_t, uint64_t), or int32_t, or uint32_t."""
        floating = values.dtype.kind == "f"
        size = 8 * values.dtype.itemsize
        pattern = values.view(np.dtype(f"u{values.dtype.itemsize}")) if floating else values
        numbers = [int(v) for v in pattern]
        literal = [word(v, size) if floating else whole_literal(v) for v in numbers]
        cast = "(uint32_t)" if values.dtype == np.uint32 else "(int32_t)"
        if len(set(numbers)) == 1:
            only = literal[0]
            return only if floating or cast == "(int32_t)" else f"{numbers[0]}u"
        name = self.names.unique(f"{self.stem}_{word_}")
        type_ = f"uint{size}_t" if floating else _smallest(numbers)
        self.lines += table(type_, name, f"[{len(numbers)}]", literal)
        return f"{name}[{index}]" if floating else f"{cast}{name}[{index}]"

    def differs(self, place: str, word_: str, values: Array, index: str) -> str:
        """The condition that a member is not what the row says."""
        given = self.column(word_, values, index)
        match values.dtype.kind:
            case "f":
                return f"{self.bits}({place}) != {given}"
            case "u":
                return f"{place} != {given}"
            case _:
                return f"(int32_t){place} != {given}"

    def stored(self, place: str, type_: str, word_: str, values: Array, index: str) -> str:
        """The statement that sets a member to what the row says."""
        given = self.column(word_, values, index)
        match type_:
            case "real" if values.dtype.kind == "f":
                return f"{place} = {self.real}({given});"
            case "real" | "int" | "word":
                return f"{place} = {given};"
            case "bool" if given in ("0", "1"):
                return f"{place} = {'true' if given == '1' else 'false'};"
            case "bool":
                return f"{place} = {given} != 0;"
            case _:
                return f"{place} = ({type_})({given});"


def _smallest(numbers: Sequence[int]) -> str:
    kind = next(k for k in _SMALL if np.iinfo(k).min <= min(numbers) and max(numbers) <= np.iinfo(k).max)
    return f"{np.dtype(kind).name}_t"


def members(rows: Sequence[Member], values: dict[str, Array]) -> Iterator[tuple[str, str, str, Array]]:
    """(member with index, name for a column, type, values of each row) of every component."""
    for m in rows:
        array = values[m.name]
        if m.size is None:
            yield m.name, m.name, m.type, np.ascontiguousarray(array)
        else:
            for i in range(m.size):
                yield f"{m.name}[{i}]", f"{m.name}_{i}", m.type, np.ascontiguousarray(array[:, i])
