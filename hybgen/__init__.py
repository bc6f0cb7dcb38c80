"""Hybrid feedback laws: from a law file to C that equals its reference in every bit.

`load`, `check`, `generate`, `Reference`, `compile` are the whole job in Python; they are imported when first used.
"""

from __future__ import annotations

from hybgen.version import VERSION as __version__

TYPE_CHECKING = False
"""For type checkers, which take it as true; importing it would double the time that `hybgen --help` takes."""

if TYPE_CHECKING:
    from typing import Any

    from hybgen.checks import Report, check
    from hybgen.diag.finding import Finding, LawError
    from hybgen.law import Law, load
    from hybgen.pipeline import generate
    from hybgen.reference import Reference
    from hybgen.selftests import selftest
    from hybgen.sil import Chip, compile

_HOMES = {
    "Chip": "hybgen.sil",
    "Finding": "hybgen.diag.finding",
    "Law": "hybgen.law",
    "LawError": "hybgen.diag.finding",
    "Reference": "hybgen.reference",
    "Report": "hybgen.checks",
    "check": "hybgen.checks",
    "compile": "hybgen.sil",
    "generate": "hybgen.pipeline",
    "load": "hybgen.law",
    "selftest": "hybgen.selftests",
}

__all__ = [
    "Chip",
    "Finding",
    "Law",
    "LawError",
    "Reference",
    "Report",
    "__version__",
    "check",
    "compile",
    "generate",
    "load",
    "selftest",
]


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'hybgen' has no attribute '{name}'")
    from importlib import import_module

    found = getattr(import_module(_HOMES[name]), name)
    globals()[name] = found
    return found
