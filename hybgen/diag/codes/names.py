"""HG5xx: names, in the law and in C."""

from hybgen.diag.codes.code import Code

NAMES = (
    Code(
        "HG501",
        "names",
        "error",
        "no C identifier",
        "Names become C names: letters a-z, A-Z, digits and '_', starting with a letter.",
        "bilge-pump: …",
        "bilge_pump: …",
    ),
    Code(
        "HG502",
        "names",
        "error",
        "a reserved name",
        "C, C++ or the generated code already uses it.",
        "register: …",
        "shift_register: …",
    ),
    Code(
        "HG503",
        "names",
        "error",
        "a name used twice",
        "Inputs, parameters, states, terms, tables and outputs share one set of names.",
        "inputs: {level: …}\\nstates: {level: …}",
        "states: {held: …}",
    ),
    Code(
        "HG504",
        "names",
        "error",
        "a name that is too long",
        "At most 40 characters, so that every compiler tells them apart.",
        "a_name_of_more_than_forty_characters_is_too_long",
        "short_name",
    ),
    Code(
        "HG505",
        "names",
        "error",
        "a name that means something else in expressions",
        "Words and functions of the language can't be names.",
        "min: …",
        "lowest: …",
    ),
)
