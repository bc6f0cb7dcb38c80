"""Suggestions for a mistyped word."""

from __future__ import annotations

import difflib
from collections.abc import Iterable


def nearest(word: str, known: Iterable[str]) -> str | None:
    """The known word most like `word`, or None if none is near."""
    found = difflib.get_close_matches(word[:64], sorted(set(known)), n=1, cutoff=0.6)
    return found[0] if found else None
