"""HG6xx: reference against C, and recorded logs."""

from hybgen.diag.codes.code import Code

EQUIVALENCE = (
    Code(
        "HG601",
        "equality",
        "error",
        "reference and C differ",
        "One bit of an output, a state or the status differs between the reference and the compiled C: a compiler flag, a compiler "
        "fault, or a fault in hybgen.",
        "-ffast-math",
        "-ffp-contract=off",
    ),
    Code(
        "HG602",
        "equality",
        "error",
        "the C can't be built",
        "No C compiler was found, or it refused the code; the message is its own.",
        "—",
        "pip install 'hybgen[cc]'",
    ),
    Code(
        "HG603",
        "coverage",
        "note",
        "a condition that was not seen both true and false",
        "The stimulus never made it true, or never false.",
        "—",
        "—",
    ),
    Code(
        "HG604",
        "equality",
        "error",
        "the self-test fails on the host",
        "NAME_selftest, compiled for this host, found an operation or a step of the law with another bit than the reference; the "
        "head of NAME_selftest.c says what its number means. A compiler flag, a compiler fault, or a fault in hybgen.",
        "CC='gcc -ffp-contract=fast'",
        "CC=gcc",
    ),
    Code(
        "HG610",
        "log",
        "error",
        "a log without rows",
        "A log is CSV: names in the first row, samples below.",
        "",
        "level,armed\\n0.2,1",
    ),
    Code(
        "HG611",
        "log",
        "error",
        "an unknown or doubled column",
        "Columns are named after inputs and tunable parameters; `t` is the time.",
        "levl",
        "level [mm]",
    ),
    Code("HG612", "log", "error", "a missing column", "Every input needs a column.", "level", "level,armed"),
    Code(
        "HG613",
        "log",
        "error",
        "a row that can't be read",
        "Cells are numbers, true or false; an empty cell of a number is no number.",
        "abc",
        "0.25",
    ),
    Code(
        "HG614",
        "log",
        "error",
        "times that do not rise",
        "The times of the rows have to be there and may not fall.",
        "0, 0.2, 0.1",
        "0, 0.1, 0.2",
    ),
)
