"""Inputs, parameters, states: nodes -> declared values."""

from __future__ import annotations

from fractions import Fraction

from hybgen.expr.core import BOOL, INT, REAL, Kind, Type
from hybgen.expr.units import KELVIN, ONE, SECOND, Unit
from hybgen.law.context import Context
from hybgen.law.document import Mapping, Node, Scalar, Sequence
from hybgen.law.model import Input, Parameter, State, StateKind, Value
from hybgen.law.naming import check_name, free_in_c

LARGEST = 2**31 - 1
MOST_ENTRIES = 4096
_TYPES = {"bool": BOOL, "integer": INT, "real": REAL}


def difference_unit(unit: Unit) -> Unit:
    """The unit of a difference: K for degC."""
    return KELVIN if unit.absolute else unit


def _type(group: Mapping) -> Type:
    node = group.get("type")
    return _TYPES[node.text] if isinstance(node, Scalar) else REAL


def _range(
    context: Context, key: Scalar, group: Mapping, type_: Type, unit: Unit, what: str
) -> tuple[Fraction, Fraction] | None:
    """The declared range of a number; a finding if it is missing."""
    node = group.get("range")
    if type_ == BOOL:
        if node is not None:
            context.error("HG124", node.span, f"{what} is true or false: it has no range", "take 'range' out")
        return None
    if node is None:
        context.error("HG132", key.span, f"{what} needs a range", "such as range: [0, 1]")
        return None
    found = context.pair(node, unit)
    if found is not None and type_ == INT and any(v.denominator != 1 or abs(v) > LARGEST for v in found):
        context.error("HG131", node.span, "the ends of a whole number's range are whole numbers of 32 bits")
        return None
    return found


def _inside(
    context: Context, node: Node | None, value: Fraction | None, ends: tuple[Fraction, Fraction] | None, what: str
) -> None:
    if node is not None and value is not None and ends is not None and not ends[0] <= value <= ends[1]:
        context.error("HG130", node.span, f"{what} is outside the range", "widen the range, or change the value")


def read_input(context: Context, key: Scalar, group: Mapping) -> Input | None:
    """One input."""
    check_name(key, "an input", context.findings)
    what = f"input '{key.text}'"
    type_, unit = _type(group), context.unit(group)
    ends = _range(context, key, group, type_, unit, what)
    if type_ == BOOL:
        for word in ("noise", "resolution", "rate", "invalid", "unit"):
            if (node := group.key(word)) is not None:
                context.error("HG124", node.span, f"{what} is true or false: it has no {word}", f"take '{word}' out")
    noise = context.positive(group.get("noise"), unit, "noise", zero=True) or Fraction(0)
    resolution = context.positive(group.get("resolution"), unit, "resolution", zero=True) or Fraction(0)
    rate = context.positive(group.get("rate"), difference_unit(unit) / SECOND, "rate", zero=True)
    policy, substitute = _policy(context, group, type_, unit, ends)
    initial = _first_sample(context, group, type_, unit, ends)
    if type_ != BOOL and ends is None:
        return None
    low, high = ends if ends is not None else (None, None)
    return Input(
        key.text,
        type_,
        context.size(group),
        unit,
        low,
        high,
        noise,
        resolution,
        rate,
        policy,
        substitute,
        initial,
        context.text(group, "about"),
        key.span,
    )


def _policy(
    context: Context, group: Mapping, type_: Type, unit: Unit, ends: tuple[Fraction, Fraction] | None
) -> tuple[str, Fraction | None]:
    node = group.get("invalid")
    if not isinstance(node, Scalar) or node.text in ("hold", "clamp"):
        return (node.text if isinstance(node, Scalar) else "hold"), None
    value = context.value(node, unit)
    _inside(context, node, value, ends, "the value for a bad sample")
    if value is not None and type_ == INT and value.denominator != 1:
        context.error("HG122", node.span, "the value for a bad sample has to be a whole number")
    return "value", value


def _first_sample(
    context: Context, group: Mapping, type_: Type, unit: Unit, ends: tuple[Fraction, Fraction] | None
) -> Value:
    node = group.get("initial")
    if type_ == BOOL:
        if isinstance(node, Scalar) and node.text not in ("true", "false"):
            context.error("HG122", node.span, "initial has to be true or false")
        return isinstance(node, Scalar) and node.text == "true"
    value = context.value(node, unit) if node is not None else None
    _inside(context, node, value, ends, "initial")
    if value is None:
        value = sum(ends) / 2 if ends is not None else Fraction(0)  # type: ignore[assignment]
        assert value is not None
        value = Fraction(value.numerator // value.denominator) if type_ == INT else value
    if type_ == INT and value.denominator != 1 and node is not None:
        context.error("HG122", node.span, "initial has to be a whole number")
    return int(value) if type_ == INT else value


def read_parameter(context: Context, key: Scalar, node: Node) -> Parameter | None:
    """One parameter, in the short form or the full one."""
    check_name(key, "a parameter", context.findings)
    group = node if isinstance(node, Mapping) else Mapping((), node.span)
    value_node = node.get("value") if isinstance(node, Mapping) else node
    if value_node is None:
        return None
    declared = context.unit(group) if group.get("unit") is not None else None
    if (isinstance(value_node, Scalar) and value_node.text in ("true", "false")) or _type(group) == BOOL:
        return _bool_parameter(context, key, group, value_node)
    found = entries(context, value_node, declared)
    if found is None:
        return None
    values, shape, unit = found
    type_ = _type(group)
    if type_ == INT and (shape or any(v.denominator != 1 or abs(v) > LARGEST for v in values)):
        context.error("HG122", value_node.span, f"parameter '{key.text}' has to be a whole number of 32 bits")
        return None
    tunable = context.flag(group, "tunable")
    ends = None
    if tunable or group.get("range") is not None:
        ends = _range(context, key, group, type_, unit, f"tunable parameter '{key.text}'")
        if ends is None:
            return None
        for value in values:
            _inside(context, value_node, value, ends, f"the value of '{key.text}'")
    low, high = ends if ends is not None else (None, None)
    exact: tuple[Value, ...] = tuple(int(v) for v in values) if type_ == INT else values
    return Parameter(key.text, type_, shape, unit, exact, low, high, tunable, context.text(group, "about"), key.span)


def _bool_parameter(context: Context, key: Scalar, group: Mapping, node: Node) -> Parameter | None:
    if not isinstance(node, Scalar) or node.text not in ("true", "false"):
        context.error("HG122", node.span, f"parameter '{key.text}' has to be true or false")
        return None
    for word in ("range", "unit"):
        if (extra := group.key(word)) is not None:
            context.error(
                "HG124", extra.span, f"parameter '{key.text}' is true or false: it has no {word}", f"take '{word}' out"
            )
    return Parameter(
        key.text,
        BOOL,
        (),
        ONE,
        (node.text == "true",),
        None,
        None,
        context.flag(group, "tunable"),
        context.text(group, "about"),
        key.span,
    )


def entries(
    context: Context, node: Node, unit: Unit | None
) -> tuple[tuple[Fraction, ...], tuple[int, ...], Unit] | None:
    """Numbers in one unit: a single one, a list, or a list of lists (row-major)."""
    rows = [node] if isinstance(node, Scalar) else list(node.items) if isinstance(node, Sequence) else []
    shape: tuple[int, ...] = () if isinstance(node, Scalar) else (len(rows),)
    if any(isinstance(r, Sequence) for r in rows):
        widths = {len(r.items) if isinstance(r, Sequence) else -1 for r in rows}
        if len(widths) != 1:
            context.error("HG122", node.span, "its rows have to be of one length")
            return None
        shape = (len(rows), widths.pop())
        rows = [i for r in rows if isinstance(r, Sequence) for i in r.items]
    if len(rows) > MOST_ENTRIES or any(n > 64 for n in shape):
        context.error("HG139", node.span, "vectors have at most 64 components, matrices 64 rows and columns")
        return None
    values: list[Fraction] = []
    for row in rows:
        found = context.number(row, unit)
        if found is None:
            return None
        if unit is None and not (found[0] == 0 and found[1].plain and len(rows) > 1):
            unit = found[1]
        values.append(found[0])
    return tuple(values), shape, unit or ONE


def read_state(context: Context, key: Scalar, group: Mapping) -> State | None:
    """One state."""
    check_name(key, "a state", context.findings)
    about = context.text(group, "about")
    if (node := group.get("logic")) is not None:
        return _logic(context, key, group, node, about)
    if (node := group.get("timer")) is not None:
        return _timer(context, key, group, node, about)
    if (node := group.get("count")) is not None:
        return _count(context, key, group, node, about)
    if _type(group) == BOOL:
        for word in ("range", "limit", "unit", "vector"):
            if (extra := group.key(word)) is not None:
                context.error(
                    "HG124", extra.span, f"state '{key.text}' is true or false: it has no {word}", f"take '{word}' out"
                )
        initial = group.get("initial")
        if initial is not None and not (isinstance(initial, Scalar) and initial.text in ("true", "false")):
            context.error("HG122", initial.span, "initial has to be true or false")
        on = isinstance(initial, Scalar) and initial.text == "true"
        return State(key.text, StateKind.BOOL, BOOL, None, ONE, (), (on,), None, None, False, None, about, key.span)
    return _real(context, key, group, about)


def _logic(context: Context, key: Scalar, group: Mapping, node: Node, about: str) -> State | None:
    assert isinstance(node, Sequence)
    words = [i for i in node.items if isinstance(i, Scalar)]
    whole = [_as_whole(w.text) for w in words]
    values: tuple[str, ...] | tuple[int, ...]
    if words and all(n is not None for n in whole):
        values, type_ = tuple(n for n in whole if n is not None), INT
    else:
        good = not [w for w in words if not _value_name(context, w)]  # every mistake is reported
        if not good:
            return None
        values = tuple(w.text for w in words)
        type_ = Type(Kind.ENUM, values, key.text)
    if len(set(values)) != len(values) or not 1 <= len(values) <= 64:
        context.error("HG137", node.span, "the values of a logic variable have to be different, 1 to 64 of them")
        return None
    initial: Value = 0 if type_ is not INT else int(values[0])
    first = group.get("initial")
    if first is not None:
        text = first.text if isinstance(first, Scalar) else ""
        names = [str(v) for v in values]
        if text not in names:
            context.error(
                "HG130",
                first.span,
                f"initial '{text[:40]}' is no value of {key.text}",
                f"its values are {', '.join(names)}",
            )
            return None
        position = names.index(text)
        initial = position if type_ is not INT else int(values[position])
    return State(
        key.text, StateKind.LOGIC, type_, None, ONE, values, (initial,), None, None, False, None, about, key.span
    )


def _value_name(context: Context, word: Scalar) -> bool:
    if word.text in ("true", "false"):
        return _no_bool(context, word)
    what = "a logic value"
    return check_name(word, what, context.findings, word=True) and free_in_c(word, what, context.findings)


def _no_bool(context: Context, word: Scalar) -> bool:
    context.error(
        "HG137",
        word.span,
        f"'{word.text}' is a boolean, not a logic value",
        "use type: bool for a state that is true or false",
    )
    return False


def _as_whole(text: str) -> int | None:
    digits = text.removeprefix("-")
    return int(text) if digits.isascii() and digits.isdigit() and len(digits) <= 9 else None


def _timer(context: Context, key: Scalar, group: Mapping, node: Node, about: str) -> State | None:
    found = context.number(node, None)
    if found is None:
        return None
    top, unit = found
    if not unit.alike(SECOND):
        context.error(
            "HG202",
            node.span,
            f"a timer holds at a time, this is {'dimensionless' if unit.plain else f'in {unit}'}",
            "such as timer: 60 s",
        )
        return None
    if top <= 0:
        context.error("HG140", node.span, "a timer holds at a time above zero")
        return None
    initial = Fraction(0)
    if (first := group.get("initial")) is not None:
        initial = context.value(first, unit) or Fraction(0)
        _inside(context, first, initial, (Fraction(0), top), "initial")
    return State(
        key.text, StateKind.TIMER, REAL, None, unit, (), (initial,), Fraction(0), top, False, top, about, key.span
    )


def _count(context: Context, key: Scalar, group: Mapping, node: Node, about: str) -> State | None:
    top = context.value(node, ONE)
    if top is None:
        return None
    if top.denominator != 1 or not 0 < top <= LARGEST:
        context.error("HG140", node.span, f"a count holds at a whole number from 1 to {LARGEST}")
        return None
    initial = Fraction(0)
    if (first := group.get("initial")) is not None:
        initial = context.value(first, ONE) or Fraction(0)
        _inside(context, first, initial, (Fraction(0), top), "initial")
        if initial.denominator != 1:
            context.error("HG122", first.span, "initial has to be a whole number")
    return State(
        key.text, StateKind.COUNT, INT, None, ONE, (), (int(initial),), Fraction(0), top, False, top, about, key.span
    )


def _real(context: Context, key: Scalar, group: Mapping, about: str) -> State | None:
    unit, size = context.unit(group), context.size(group)
    ends = _range(context, key, group, REAL, unit, f"state '{key.text}'")
    if ends is None:
        return None
    first = group.get("initial")
    values: tuple[Fraction, ...] = (Fraction(0),) * (size or 1)
    if first is not None:
        found = entries(context, first, unit)
        if found is None:
            return None
        values = found[0] * (size or 1) if found[1] == () else found[0]
        if len(values) != (size or 1) or len(found[1]) > 1 or (found[1] and size is None):
            context.error(
                "HG208", first.span, f"initial of '{key.text}' has {len(found[0])} components, not {size or 1}"
            )
            return None
    elif not ends[0] <= 0 <= ends[1]:
        context.error(
            "HG130", key.span, f"state '{key.text}' starts at 0, which is outside its range", "give 'initial'"
        )
    for value in values:
        _inside(context, first, value, ends, "initial")
    return State(
        key.text,
        StateKind.REAL,
        REAL,
        size,
        unit,
        (),
        values,
        *ends,
        context.flag(group, "limit"),
        None,
        about,
        key.span,
    )
