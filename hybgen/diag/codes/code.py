"""One row of the table of codes."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Code:
    """What a finding's code means; `bad` and `good` are short examples of a law."""

    code: str
    property: str
    severity: str
    title: str
    meaning: str
    bad: str
    good: str
