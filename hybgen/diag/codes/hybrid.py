"""HG3xx: properties of the hybrid law."""

from hybgen.diag.codes.code import Code

HYBRID = (
    Code(
        "HG301",
        "reach",
        "error",
        "a jump that can never happen",
        "Its condition is false for every value of the logic variables: the constants contradict each other.",
        "set: mode == idle and mode == run",
        "set: mode == idle and start",
    ),
    Code(
        "HG302",
        "reach",
        "error",
        "a condition that always holds",
        "A jump condition that is true whatever the law does is a mistake: often 'x == a or x != b'.",
        "set: mode == idle or mode != run or true",
        "set: mode == idle",
    ),
    Code(
        "HG303",
        "reach",
        "warning",
        "a logic value that is never entered",
        "No jump sets it and it is not the initial one.",
        "mode: {logic: [idle, run, fault]}    # nothing sets fault",
        "failed: {set: …, map: {mode: fault}}",
    ),
    Code(
        "HG304",
        "reach",
        "warning",
        "a logic value that is never left",
        "It is entered, and no jump that can happen there changes it.",
        "fault: {set: mode == run and hot, map: {mode: fault}}    # no way out",
        "clear: {set: mode == fault and reset, map: {mode: idle}}",
    ),
    Code(
        "HG305",
        "names",
        "warning",
        "a name that nothing uses",
        "An input, parameter, term, table or state that no condition, map, rate or output reads.",
        "gap: 20 mm    # nothing reads gap",
        "low_mark: {value: high - gap}",
    ),
    Code(
        "HG310",
        "reset",
        "warning",
        "memory that a jump neither sets nor keeps",
        "After this jump a timer, count or integrator is read that still holds what it had before: set it in 'map' or list it "
        "under 'keep' to say that this is meant.",
        "start: {set: …, map: {mode: run}}    # timer 'since' is read in run",
        "start: {set: …, map: {mode: run, since: 0 s}}",
    ),
    Code(
        "HG320",
        "repeat",
        "note",
        "the longest chain of jumps in one step",
        "How many jumps can follow each other at once, as far as constants show. Where that does not bound it, as many jumps as the law "
        "has are allowed in one step.",
        "—",
        "jumps_per_step: 2",
    ),
    Code(
        "HG390",
        "claims",
        "note",
        "not decided by this version",
        "The property needs proofs over the whole domain, which this version does not make. It is listed as open, never as proved.",
        "—",
        "—",
    ),
)
