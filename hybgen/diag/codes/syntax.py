"""HG150-HG169: the text of an expression."""

from hybgen.diag.codes.code import Code

SYNTAX = (
    Code(
        "HG150",
        "language",
        "error",
        "a character that is no part of an expression",
        "Expressions are made of names, numbers with units, + - * / ** @, comparisons, and / or / not, parentheses and brackets.",
        "set: level >= high && armed",
        "set: level >= high and armed",
    ),
    Code(
        "HG151",
        "language",
        "error",
        "something is missing or does not belong here",
        "The text before this place is fine; here an operator, a value or the end was expected.",
        "value: full + ",
        "value: full + margin",
    ),
    Code(
        "HG152",
        "language",
        "error",
        "a parenthesis or bracket is not paired",
        "Each ( [ needs its ) ]. Inside { } of YAML, an expression with commas or brackets has to be put in quotes.",
        "map: {x: min(a, b)}",
        'map: {x: "min(a, b)"}',
    ),
    Code(
        "HG153",
        "language",
        "error",
        "an expression is too long or nested too deep",
        "Long expressions are hard to review. One has at most 10000 characters, 100 operators inside one another and, "
        "with vectors and powers written out, 20000 operations. Name the pieces under 'terms'.",
        "value: ((((((((((…))))))))))",
        "terms: {error: …}",
    ),
    Code(
        "HG154",
        "language",
        "error",
        "a number that can't be read",
        "Numbers are decimal: 12, 0.5, 1e-3, at most 60 digits.",
        "high: 0x1F",
        "high: 31",
    ),
)
