"""Does a document have the shape of a law file? All mistakes of the structure at once."""

from __future__ import annotations

import re
from typing import assert_never

from hybgen.diag.finding import Findings
from hybgen.diag.suggest import nearest
from hybgen.law import shape
from hybgen.law.document import Mapping, Node, Scalar, Sequence

_TORN = "inside { } put an expression with a comma or bracket in quotes"


def check(node: Node, kind: shape.Kind, what: str, findings: Findings) -> None:
    """Add a finding for each place where the node does not have the shape; `what` names it."""
    match kind:
        case shape.Record():
            _record(node, kind, what, findings)
        case shape.Either():
            check(node, kind.full if isinstance(node, Mapping) else kind.short, what, findings)
        case shape.Named():
            if isinstance(node, Mapping):
                for key, value in node.entries:
                    if not _torn(key, value, findings):
                        check(value, kind.item, f"'{key.text}'", findings)
            elif not (isinstance(node, Scalar) and not node.text):
                _wrong(node, what, "a group of keys", findings)
        case shape.Listed():
            if not isinstance(node, Sequence):
                _wrong(node, what, "a list", findings)
                return
            for item in node.items:
                check(item, kind.item, f"an entry of {what}", findings)
        case shape.Expression():
            _expression(node, what, findings)
        case shape.Later():
            findings.error("HG190", node.span, f"{what} is not available yet")
        case _:
            _leaf(node, kind, what, findings)


def _wrong(node: Node, what: str, wanted: str, findings: Findings, hint: str | None = None) -> None:
    found = {Scalar: "a single value", Sequence: "a list", Mapping: "a group of keys"}[type(node)]
    if isinstance(node, Scalar) and not node.text:
        found = "nothing"
    findings.error("HG122", node.span, f"{what} has to be {wanted}, this is {found}", hint=hint)


def _record(node: Node, kind: shape.Record, what: str, findings: Findings) -> None:
    if not isinstance(node, Mapping):
        _wrong(node, what, "a group of keys", findings)
        return
    present = {key.text for key, _ in node.entries}
    for key, value in node.entries:
        field = kind.fields.get(key.text)
        if field is None:
            _unknown(key, value, kind, findings)
            continue
        check(value, field.kind, f"'{key.text}'", findings)
        for other in field.excludes:
            if other in present:
                findings.error(
                    "HG124",
                    key.span,
                    f"'{key.text}' and '{other}' do not go together in {what}",
                    hint=f"take '{other}' out",
                )
        for other in field.needs:
            if other not in present:
                message = f"'{key.text}' has no meaning in {what} without '{other}'"
                findings.error("HG121", key.span, message, hint=f"give '{other}', or take '{key.text}' out")
    for name, field in kind.fields.items():
        if field.required and name not in present:
            findings.error("HG121", node.span, f"{what} needs '{name}': {field.about}")


def _torn(key: Scalar, value: Node, findings: Findings) -> bool:
    """Is this key the rest of an expression that YAML has cut at a comma?"""
    if isinstance(value, Scalar) and not value.text and re.search(shape.PIECE, key.text):
        findings.error("HG125", key.span, f"'{key.text[:40]}' looks like a piece of an expression", hint=_TORN)
        return True
    return False


def _unknown(key: Scalar, value: Node, kind: shape.Record, findings: Findings) -> None:
    if _torn(key, value, findings):
        return
    close = nearest(key.text, kind.fields)
    hint = f"did you mean '{close}'?" if close else f"known here: {', '.join(kind.fields)}"
    findings.error("HG120", key.span, f"unknown key '{key.text[:40]}'", hint=hint)


def _leaf(node: Node, kind: shape.Kind, what: str, findings: Findings) -> None:
    match kind:
        case shape.Pair():
            good = isinstance(node, Sequence) and len(node.items) == 2 and all(_filled(i) for i in node.items)
            if not good:
                _wrong(node, what, "[low, high]", findings)
        case shape.Words():
            if not (isinstance(node, Sequence) and all(_filled(i) for i in node.items)):
                _wrong(node, what, "a list of words", findings, hint="write it as [a, b]")
        case shape.Value(deep=True):
            if not _numbers(node, 3):
                _wrong(node, what, "a value, a list of values or a list of such lists", findings)
        case shape.Text() | shape.Word() | shape.Flag() | shape.Whole() | shape.Value():
            if not isinstance(node, Scalar) or (not node.text and not isinstance(kind, shape.Text)):
                _wrong(
                    node, what, "a single value", findings, hint=_TORN if isinstance(node, Sequence | Mapping) else None
                )
            else:
                _word(node, kind, what, findings)
        case _:
            raise AssertionError(kind)


def _filled(node: Node) -> bool:
    return isinstance(node, Scalar) and bool(node.text)


def _numbers(node: Node, depth: int) -> bool:
    if isinstance(node, Sequence):
        return depth > 1 and bool(node.items) and all(_numbers(i, depth - 1) for i in node.items)
    return _filled(node)


def _word(
    node: Scalar, kind: shape.Text | shape.Word | shape.Flag | shape.Whole | shape.Value, what: str, findings: Findings
) -> None:
    match kind:
        case shape.Word() if node.text in kind.later:
            findings.error(
                "HG190", node.span, f"{what}: '{node.text}' is not available yet", hint=f"use {' or '.join(kind.words)}"
            )
        case shape.Word() if node.text not in kind.words:
            close = nearest(node.text, kind.words)
            hint = f"did you mean '{close}'?" if close else f"known: {', '.join(kind.words)}"
            findings.error("HG123", node.span, f"{what} can't be '{node.text[:40]}'", hint=hint)
        case shape.Flag() if node.text not in ("true", "false"):
            findings.error(
                "HG123",
                node.span,
                f"{what} is true or false, not '{node.text[:40]}'",
                hint="only 'true' and 'false' are booleans (YAML 1.2)",
            )
        case shape.Whole() if not (node.text.isascii() and node.text.isdigit() and 0 < int(node.text[:12]) < 10**9):
            findings.error("HG122", node.span, f"{what} has to be a whole number above 0, not '{node.text[:40]}'")
        case shape.Text() | shape.Word() | shape.Flag() | shape.Whole() | shape.Value():
            pass
        case _:
            assert_never(kind)


def _expression(node: Node, what: str, findings: Findings) -> None:
    if isinstance(node, Mapping):
        _wrong(
            node,
            what,
            "an expression, a list of cases or a vector",
            findings,
            hint="cases are a list: - when: … / is: …",
        )
    elif isinstance(node, Sequence):
        if any(isinstance(i, Mapping) for i in node.items):
            _cases(node, what, findings)
        else:
            for item in node.items:
                _expression(item, f"a component of {what}", findings)


def _cases(node: Sequence, what: str, findings: Findings) -> None:
    """- when: condition / is: value, ... and last - otherwise: value"""
    for number, item in enumerate(node.items):
        last = number == len(node.items) - 1
        if not isinstance(item, Mapping):
            _wrong(item, f"a case of {what}", "when / is, or otherwise", findings)
            continue
        keys = [k.text for k, _ in item.entries]
        wanted = ["otherwise"] if last else ["when", "is"]
        for key, value in item.entries:
            if key.text in ("when", "is", "otherwise"):
                _expression(value, f"'{key.text}'", findings)
        if sorted(keys) != sorted(wanted):
            hint = "the last case is 'otherwise'" if last else "each case but the last has 'when' and 'is'"
            findings.error(
                "HG121" if set(keys) < {"when", "is"} or last else "HG120",
                item.span,
                f"this case of {what} has {', '.join(keys)[:60]}, not {' and '.join(wanted)}",
                hint=hint,
            )
