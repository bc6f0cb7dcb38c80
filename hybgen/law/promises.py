"""Claims and assumptions."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from hybgen.diag.suggest import nearest
from hybgen.expr.core import REAL, Kind, RefKind
from hybgen.expr.core import Node as Tree
from hybgen.law.behaviour import Behaviour
from hybgen.law.declarations import difference_unit
from hybgen.law.document import Mapping, Node, Scalar, Sequence
from hybgen.law.model import Assumption, Claim, ClaimKind, Output
from hybgen.law.naming import check_name

_SIDE = {ClaimKind.BETWEEN: "at_least", ClaimKind.LEAVES: "within", ClaimKind.BUMP: "at_most"}
_ANY = frozenset(RefKind) - {RefKind.LOCAL}


def read_claim(
    behaviour: Behaviour, key: Scalar, group: Mapping, outputs: tuple[Output, ...], jumps: tuple[str, ...]
) -> Claim | None:
    """One claim."""
    context = behaviour.context
    check_name(key, "a claim", context.findings, word=True)
    kind = next((k for k in ClaimKind if group.get(k) is not None), None)
    if kind is None:
        context.error("HG121", group.span, f"claim '{key.text}' needs one of {', '.join(ClaimKind)}")
        return None
    node = group.get(kind)
    assert node is not None
    if not _sides_fit(behaviour, key, group, kind):
        return None
    names: tuple[str, ...] = ()
    expr, bound, text = None, None, ""
    match kind:
        case ClaimKind.BETWEEN:
            names = _jumps(behaviour, node, jumps)
            bound = context.time(group.get("at_least"), "'at_least'")
            text = f"between {' and '.join(names)}"
        case ClaimKind.BUMP:
            names, bound, text = _bump(behaviour, node, group, outputs)
        case _:
            expr, text = _expression(behaviour, kind, node, outputs)
            if kind is ClaimKind.LEAVES:
                bound = context.time(group.get("within"), "'within'")
    exception = None
    if kind is ClaimKind.FALLS and (extra_node := group.get("except")) is not None:
        found = behaviour.condition(extra_node, "in a claim", _ANY)
        exception = found[0] if found else None
    return Claim(key.text, kind, expr, exception, names, bound, node.span, text)


def _sides_fit(behaviour: Behaviour, key: Scalar, group: Mapping, kind: ClaimKind) -> bool:
    """Is there the key that the claim needs, and none that it can't have?"""
    side = _SIDE.get(kind)
    allowed = {side, "except"} if kind is ClaimKind.FALLS else {side}
    for word in ("at_least", "within", "at_most", "except"):
        if (extra := group.key(word)) is not None and word not in allowed:
            message = f"'{word}' does not go with '{kind}'"
            behaviour.context.error("HG124", extra.span, message, f"take '{word}' out")
    if side is not None and group.get(side) is None:
        behaviour.context.error("HG121", group.span, f"claim '{key.text}' needs '{side}'")
        return False
    return True


def _expression(
    behaviour: Behaviour, kind: ClaimKind, node: Node, outputs: tuple[Output, ...]
) -> tuple[Tree | None, str]:
    if kind is ClaimKind.FALLS:
        found = behaviour.typed(node, None, _ANY, "in a claim")
        if found is None:
            return None, ""
        if found[0].type.kind not in (Kind.REAL, Kind.INT) or found[0].shape:
            behaviour.context.error("HG204", node.span, "what falls has to be a number")
            return None, ""
        return found[0].nodes[0], found[1]
    condition = behaviour.condition(node, "in a claim", _ANY)
    return condition if condition is not None else (None, "")


def _jumps(behaviour: Behaviour, node: Node, jumps: tuple[str, ...]) -> tuple[str, ...]:
    words = [w for w in node.items if isinstance(w, Scalar)] if isinstance(node, Sequence) else []
    if len(words) != 2:
        behaviour.context.error("HG122", node.span, "between: takes two jumps", "such as between: [start, stop]")
    for word in words:
        if word.text not in jumps:
            close = nearest(word.text, jumps)
            behaviour.context.error(
                "HG201", word.span, f"'{word.text[:40]}' is no jump", f"did you mean '{close}'?" if close else None
            )
    return tuple(w.text for w in words)


def _bump(
    behaviour: Behaviour, node: Node, group: Mapping, outputs: tuple[Output, ...]
) -> tuple[tuple[str, ...], Fraction | None, str]:
    name = node.text if isinstance(node, Scalar) else ""
    output = next((o for o in outputs if o.name == name), None)
    if output is None or output.type != REAL:
        close = nearest(name, [o.name for o in outputs])
        behaviour.context.error(
            "HG201",
            node.span,
            f"'{name[:40]}' is no output that is a number",
            f"did you mean '{close}'?" if close else None,
        )
        return (), None, ""
    bound = behaviour.context.positive(group.get("at_most"), difference_unit(output.unit), "the size", zero=True)
    return (name,), bound, f"bump of {name}"


def read_assumptions(behaviour: Behaviour, node: Sequence) -> Iterator[Assumption]:
    """The conditions that proofs may use."""
    allow = frozenset({RefKind.INPUT, RefKind.PARAMETER})
    for item in node.items:
        found = behaviour.condition(item, "in an assumption: it may speak of inputs and parameters only", allow)
        if found is not None:
            yield Assumption(found[0], item.span, found[1])
