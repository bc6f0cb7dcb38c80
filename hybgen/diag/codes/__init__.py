"""Every code that hybgen can report; a code is never reused."""

from __future__ import annotations

from hybgen.diag.codes.code import Code
from hybgen.diag.codes.equivalence import EQUIVALENCE
from hybgen.diag.codes.faults import FAULTS
from hybgen.diag.codes.hybrid import HYBRID
from hybgen.diag.codes.names import NAMES
from hybgen.diag.codes.numbers import NUMBERS
from hybgen.diag.codes.reading import READING
from hybgen.diag.codes.syntax import SYNTAX
from hybgen.diag.codes.types import TYPES

CODES: dict[str, Code] = {
    c.code: c for c in (*READING, *SYNTAX, *TYPES, *HYBRID, *NUMBERS, *NAMES, *EQUIVALENCE, *FAULTS)
}

__all__ = ["CODES", "Code"]
