"""HG100-HG149, HG190: the file and its structure."""

from hybgen.diag.codes.code import Code


def _row(code: str, title: str, meaning: str, bad: str, good: str) -> Code:
    return Code(code, "language", "error", title, meaning, bad, good)


READING = (
    _row(
        "HG101",
        "a file that can't be opened",
        "It does not exist, or may not be read.",
        "hybgen check lost.yaml",
        "hybgen check here.yaml",
    ),
    _row(
        "HG102",
        "a folder instead of a file",
        "A law is one YAML file.",
        "hybgen check specs/",
        "hybgen check specs/bilge_pump.yaml",
    ),
    _row("HG103", "an empty file", "There is nothing to read.", "", "law: bilge_pump …"),
    _row(
        "HG104",
        "a file that is too large",
        "A law has at most 1 MiB; this is probably another file.",
        "a 10 MB log",
        "law: …",
    ),
    _row("HG105", "a tab", "YAML is indented with blanks.", "states:\\n\\tpump: …", "states:\\n  pump: …"),
    _row("HG106", "a file that is no UTF-8", "Text is UTF-8.", "…", "…"),
    _row("HG107", "a control character", "Control characters and special line ends have no place in a law.", "…", "…"),
    _row(
        "HG108",
        "no YAML",
        "The text breaks YAML's own rules; often an expression in { } that needs quotes.",
        "map: {x: a[0]}",
        'map: {x: "a[0]"}',
    ),
    _row(
        "HG109", "tags or several documents", "A law is plain data in one document.", "step: !!float 0.1", "step: 0.1 s"
    ),
    _row(
        "HG110",
        "too many entries",
        "Aliases are followed, counted as if written out; a law has at most 20000 entries.",
        "…",
        "…",
    ),
    _row("HG111", "nested too deep", "No part of a law is nested that deep.", "[[[[…]]]]", "[…]"),
    _row(
        "HG112", "a key given twice", "The second would silently hide the first.", "high: 1 m\\nhigh: 2 m", "high: 1 m"
    ),
    _row("HG113", "a key that is no plain word", "Keys are names.", "[a, b]: 1", "a: 1"),
    _row("HG114", "no keys at the top", "A law starts with law:, step:, …", "- law", "law: bilge_pump"),
    _row(
        "HG120",
        "an unknown key",
        "The key has no meaning here; often a slip of the pen.",
        "inputs: {u: {rnage: [0, 1]}}",
        "inputs: {u: {range: [0, 1]}}",
    ),
    _row(
        "HG121",
        "a missing key",
        "Without it the law is not complete.",
        "jumps: {start: {map: …}}",
        "jumps: {start: {set: …, map: …}}",
    ),
    _row(
        "HG122",
        "a value of the wrong kind",
        "A list, a group of keys or a single value was expected.",
        "inputs: level",
        "inputs: {level: {…}}",
    ),
    _row("HG123", "an unknown word", "Only the listed words are known here.", "number: float", "number: float32"),
    _row(
        "HG124",
        "keys that do not go together",
        "One of them has no meaning beside the other.",
        "idle: {timer: 60 s, range: [0 s, 60 s]}",
        "idle: {timer: 60 s}",
    ),
    _row(
        "HG125",
        "an expression torn apart by YAML",
        "Inside { } commas and brackets belong to YAML: put the expression in quotes.",
        "map: {x: min(a, b)}",
        'map: {x: "min(a, b)"}',
    ),
    _row(
        "HG130",
        "a value outside its range",
        "Initial, default and substitute values lie in the declared range.",
        "{range: [0, 1], initial: 2}",
        "{range: [0, 1], initial: 1}",
    ),
    _row(
        "HG131",
        "a range that is reversed or empty",
        "A range is [low, high] with low below high.",
        "range: [1, 0]",
        "range: [0, 1]",
    ),
    _row(
        "HG132",
        "a missing range",
        "Every number that is measured, kept or tunable needs a range: the proofs and checks stand on it.",
        "level: {unit: m}",
        "level: {unit: m, range: [0, 0.6]}",
    ),
    _row(
        "HG133",
        "points and values of a table that do not fit",
        "x rises from point to point, and there are as many y as x, two at least. With z, x and y both rise, and z has a "
        "row for each x with a value for each y.",
        "{x: [0, 0], y: [1, 2]}",
        "{x: [0, 1], y: [1, 2]}",
    ),
    _row(
        "HG134",
        "definitions in a circle",
        "Terms are computed one after the other: none may need itself.",
        "a: b + 1\\nb: a + 1",
        "a: x + 1\\nb: a + 1",
    ),
    _row(
        "HG135",
        "a state that does not flow or is not sampled",
        "Only real states have a rate; a state is either flowing or sampled.",
        "flow: {map: {pump: 1}}",
        "flow: {map: {depth: rate}}",
    ),
    _row(
        "HG136",
        "map and keep in conflict",
        "A state is set, or kept on purpose, not both; and each only once.",
        "{map: {idle: 0 s}, keep: [idle]}",
        "{map: {idle: 0 s}}",
    ),
    _row(
        "HG137",
        "a logic variable whose values are wrong",
        "Its values are different names, or different whole numbers.",
        "logic: [off, off]",
        "logic: [off, on]",
    ),
    _row(
        "HG138",
        "a value that may be no member of a logic variable",
        "Every value that a jump may give it has to be one of the listed ones.",
        "q: q + 1    # logic [-1, 1]",
        "q: -q",
    ),
    _row(
        "HG139",
        "too many or too large",
        "A law has at most 1000 names, vectors of 64, matrices of 4096 entries; all its expressions together have at most "
        "100000 characters and, written out for each component, 40000 operations.",
        "vector: 100000",
        "vector: 3",
    ),
    _row(
        "HG140", "a value that is not positive", "Steps, times and counts are above zero.", "step: 0 ms", "step: 10 ms"
    ),
    _row(
        "HG190",
        "not available yet",
        "The language has it, this version does not: it says so instead of guessing.",
        "number: fixed32",
        "number: float32",
    ),
)
