"""Suggestions for a mistyped word."""

from __future__ import annotations

import difflib
from collections.abc import Iterable

LONGEST = 64
MOST = 40


def nearest(word: str, known: Iterable[str]) -> str | None:
    """The known word most like `word`, or None if none is near.

    Among many known words only those that share the most pairs of letters are compared closely.
    """
    word = word[:LONGEST]
    pairs = _pairs(word)
    candidates = sorted(set(known), key=lambda k: (-len(pairs & _pairs(k[:LONGEST])), k))[:MOST]
    found = difflib.get_close_matches(word, sorted(candidates), n=1, cutoff=0.6)
    return found[0] if found else None


def _pairs(word: str) -> set[str]:
    return {word[i : i + 2] for i in range(len(word) - 1)}
