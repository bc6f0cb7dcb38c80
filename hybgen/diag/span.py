"""Places in a file, as values."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Span:
    """A stretch of one line of a file; lines and columns count from 1, columns in characters."""

    file: str
    line: int
    column: int
    length: int = 1
    text: str = ""
    """The whole line, without its line end, for showing it with a caret."""

    @property
    def place(self) -> str:
        """`file:line:column`."""
        return f"{self.file}:{self.line}:{self.column}"


NOWHERE = Span("", 0, 0, 0, "")
