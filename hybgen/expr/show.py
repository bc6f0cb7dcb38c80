"""Tree -> text, with no more parentheses than needed; parse(show(e)) == e."""

from __future__ import annotations

from typing import assert_never

from hybgen.expr.tree import Binary, Call, Cases, Chain, Expr, Item, Logic, Name, Number, Truth, Unary, Vector

_OR, _AND, _NOT, _COMPARE, _SUM, _PRODUCT, _MINUS, _POWER, _ATOM = range(9)
_BINARY = {"+": _SUM, "-": _SUM, "*": _PRODUCT, "/": _PRODUCT, "@": _PRODUCT, "**": _POWER}


def show(tree: Expr) -> str:
    """The expression as text. Cases become nested choose(): equal in meaning, not in form."""
    return _show(tree, _OR)


def _show(tree: Expr, level: int) -> str:
    own, text = _level_and_text(tree)
    return text if own >= level else f"({text})"


def _level_and_text(tree: Expr) -> tuple[int, str]:
    match tree:
        case Number():
            return (_ATOM if tree.unit is None else _POWER), tree.text
        case Truth():
            return _ATOM, "true" if tree.value else "false"
        case Name():
            return _ATOM, tree.name
        case Unary(op="not"):
            return _NOT, f"not {_show(tree.operand, _NOT)}"
        case Unary():
            return _MINUS, f"-{_show(tree.operand, _MINUS)}"
        case Binary():
            return _BINARY[tree.op], _binary(tree)
        case Chain():
            parts = [_show(tree.operands[0], _SUM)]
            for sign, operand in zip(tree.ops, tree.operands[1:], strict=True):
                parts += [sign, _show(operand, _SUM)]
            return _COMPARE, " ".join(parts)
        case Logic():
            own = _OR if tree.op == "or" else _AND
            return own, f" {tree.op} ".join(_show(o, own + 1) for o in tree.operands)
        case Item():
            return _ATOM, f"{_show(tree.base, _ATOM)}[{_list(tree.indexes)}]"
        case Call():
            return _ATOM, f"{tree.function}({_list(tree.args)})"
        case Vector():
            return _ATOM, f"[{_list(tree.items)}]"
        case Cases():
            text = show(tree.otherwise)
            for condition, value in reversed(tree.branches):
                text = f"choose({show(condition)}, {show(value)}, {text})"
            return _ATOM, text
        case _:
            assert_never(tree)


def _binary(tree: Binary) -> str:
    own = _BINARY[tree.op]
    if tree.op == "**":
        return f"{_show(tree.left, _ATOM)}**{_show(tree.right, _MINUS)}"
    return f"{_show(tree.left, own)} {tree.op} {_show(tree.right, own + 1)}"


def _list(items: tuple[Expr, ...]) -> str:
    return ", ".join(show(item) for item in items)
