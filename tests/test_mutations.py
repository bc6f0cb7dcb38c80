"""Mutated law files never break hybgen: findings or a law, in bounded time and memory.

The default run takes 4,000 mutants; `pytest -m campaign tests/test_mutations.py` takes 100,000.
"""

from __future__ import annotations

import random
import resource
import time

import pytest

from hybgen.checks import check
from hybgen.diag.finding import LawError
from hybgen.diag.render import render
from hybgen.law import read
from tests.conftest import ROOT, SPECS
from tests.strategies import law_text

SEEDS = [p.read_text(encoding="utf-8") for p in SPECS]
SEEDS += [p.read_text(encoding="utf-8") for p in sorted((ROOT / "tests" / "bad").glob("*.yaml"))]
PIECES = [
    "{",
    "}",
    "[",
    "]",
    ",",
    ":",
    ": ",
    "- ",
    "\n",
    "  ",
    "\t",
    '"',
    "'",
    "#",
    "&a ",
    "*a",
    "!!x ",
    "|",
    ">",
    "%",
    "@",
    "`",
    "(",
    ")",
    "**",
    "<=",
    "==",
    " and ",
    " or ",
    "not ",
    "0",
    "1e308",
    "1e-400",
    "nan",
    ".inf",
    "999999999999999999999",
    " m",
    " s",
    "/s",
    "degC",
    "true",
    "on",
    "pi",
    "é",
    "\x00",
    "valid(",
    "jumped(",
    "choose(",
    "timer: 1 s",
    "logic: [a]",
    "count: 3",
    "vector: 3",
    "range: [0, 1]",
    "limit: true",
    "is:",
    "when:",
    "otherwise:",
]


def mutant(dice: random.Random) -> bytes:
    """A law file with a few random changes of characters, words, lines."""
    text = dice.choice(SEEDS) if dice.random() < 0.8 else law_text(dice)
    for _ in range(dice.choice([1, 1, 2, 3, 8])):
        at = dice.randrange(len(text) + 1)
        match dice.randrange(7):
            case 0:
                text = text[:at] + dice.choice(PIECES) + text[at:]
            case 1:
                text = text[:at] + text[at + dice.choice([1, 1, 3, 20]) :]
            case 2:
                lines = text.split("\n")
                lines.insert(dice.randrange(len(lines)), dice.choice(lines))
                text = "\n".join(lines)
            case 3:
                lines = text.split("\n")
                del lines[dice.randrange(len(lines))]
                text = "\n".join(lines) or "x"
            case 4:
                words = text.split(" ")
                i, j = dice.randrange(len(words)), dice.randrange(len(words))
                words[i], words[j] = words[j], words[i]
                text = " ".join(words)
            case 5:
                other = dice.choice(SEEDS)
                cut = dice.randrange(len(other))
                text = text[:at] + other[cut : cut + 40] + text[at:]
            case _:
                text = text[:at] + dice.choice(PIECES) * dice.choice([2, 30, 400]) + text[at:]
    data = text.encode("utf-8", "surrogatepass")
    if dice.random() < 0.03:
        at = dice.randrange(len(data) + 1)
        data = data[:at] + bytes([dice.randrange(256)]) + data[at:]
    return data


def survive(seeds: range) -> tuple[float, int]:
    """Reads and checks each mutant; the longest time and how many were still laws."""
    longest, good = 0.0, 0
    for seed in seeds:
        data = mutant(random.Random(seed))
        start = time.process_time()
        try:
            report = check(read(data, "mutant.yaml"))
            good += 1
            findings = report.findings
        except LawError as error:
            findings = error.findings
            assert findings, seed
        for finding in findings:
            assert finding.where.line >= 1 and render(finding), seed
        longest = max(longest, time.process_time() - start)
    return longest, good


@pytest.mark.parametrize("part", range(4))
def test_mutants_give_findings_or_a_law(part: int) -> None:
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    longest, good = survive(range(part * 1000, (part + 1) * 1000))
    assert longest < 2.0
    assert good > 5
    assert resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before < 200 * 1024


@pytest.mark.campaign
def test_a_hundred_thousand_mutants() -> None:
    longest, good = survive(range(100_000, 200_000))
    print(
        f"100000 mutants, {good} still laws, longest {longest:.2f} s, {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss // 1024} MB"
    )
    assert longest < 2.0
