"""Symbolic execution of the functions of a generated file: for all inputs at once, what each member becomes."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

from hybgen.expr.core import FALSE, INT, REAL, TRUE, Const, Node, Op, Type, op
from hybgen.numbers.format import Format
from hybgen.reread.interned import Interner
from hybgen.reread.source import Source

Place = tuple[str, str, int | None]
"""(struct at hand, member, component)"""

_REAL = {"+": "add", "-": "sub", "*": "mul", "/": "div"}
_INT = {"+": "iadd", "-": "isub", "*": "imul"}
_COMPARE = {"<": "lt", "<=": "le", ">": "gt", ">=": "ge", "==": "eq", "!=": "ne"}


class NotUnderstood(Exception):
    """A piece of C that the generator does not write; the message says which."""


@dataclass(slots=True)
class State:
    """What is known at a point of a function: members, locals, status bits; all interned trees."""

    members: dict[Place, Node] = field(default_factory=dict)
    locals: dict[str, Node] = field(default_factory=dict)
    bits: dict[str, Node] = field(default_factory=dict)

    def copy(self) -> State:
        return State(dict(self.members), dict(self.locals), dict(self.bits))


@dataclass(frozen=True, slots=True)
class Executor:
    """Runs functions of one file. `start` gives the tree of a member that was not written yet."""

    source: Source
    law: str
    format: Format
    enums: Mapping[str, Type]
    """Enum type name -> the logic variable's type."""
    interner: Interner
    start: Callable[[Place], Node]
    tables: Mapping[str, str]
    """Function of a table, without the law's prefix -> the table."""

    def function(self, name: str, jump: int | None = None) -> State:
        """The state at the end of NAME_<name>; `jump` is the argument of that name."""
        state = State()
        if jump is not None:
            state.locals["jump"] = self.interner.leaf(Const(jump, INT))
        self.body(f"{self.law}_{name}", state)
        return state

    def body(self, function: str, state: State) -> None:
        """Executes the body of a function from a state."""
        self._block(self.source.functions[function].body.block_items or [], state)

    def _block(self, items: list[Any], state: State) -> None:
        for item in items:
            self._statement(item, state)

    def _statement(self, item: Any, state: State) -> None:
        match type(item).__name__:
            case "Decl":
                self._declare(item, state)
            case "Assignment":
                self._assign(item, state)
            case "If":
                self._if(self.value(item.cond, state), item.iftrue, item.iffalse, state)
            case "Switch":
                self._switch(item, state)
            case "Compound":
                outer = set(state.locals)
                self._block(item.block_items or [], state)
                for name in set(state.locals) - outer:
                    del state.locals[name]
            case "Return" | "Break" | "EmptyStatement":
                if type(item).__name__ == "Return" and item.expr is not None:
                    state.locals["return"] = self.value(item.expr, state)
            case "Cast":
                pass  # (void)p;
            case other:
                raise NotUnderstood(f"statement {other} at line {item.coord}")

    def _declare(self, item: Any, state: State) -> None:
        made = self.value(item.init, state) if item.init is not None else None
        if item.name == "status" and made is not self.interner.leaf(Const(0, INT)):
            raise NotUnderstood(f"status does not start as 0 at line {item.coord}")
        if made is not None:
            state.locals[item.name] = made

    def _assign(self, item: Any, state: State) -> None:
        if item.op == "|=":
            assert item.lvalue.name == "status", item.coord
            state.bits[item.rvalue.name.removeprefix(f"{self.law.upper()}_STATUS_")] = self.interner.leaf(TRUE)
            return
        if item.op != "=":
            raise NotUnderstood(f"assignment {item.op} at line {item.coord}")
        made = self.value(item.rvalue, state)
        if type(item.lvalue).__name__ == "ID":
            state.locals[item.lvalue.name] = made
        else:
            state.members[self._place(item.lvalue)] = made

    def _if(self, condition: Node, then: Any, orelse: Any, state: State) -> None:
        if isinstance(condition, Const):
            chosen = then if condition.value else orelse
            if chosen is not None:
                self._statement(chosen, state)
            return
        yes, no = state.copy(), state.copy()
        self._statement(then, yes)
        if orelse is not None:
            self._statement(orelse, no)
        self._merge(condition, yes, no, state)

    def _merge(self, condition: Node, yes: State, no: State, state: State) -> None:
        for place in {**yes.members, **no.members}:
            state.members[place] = self._either(
                condition, yes.members.get(place) or self.start(place), no.members.get(place) or self.start(place)
            )
        for name in {**yes.locals, **no.locals}:
            if name in yes.locals and name in no.locals:
                state.locals[name] = self._either(condition, yes.locals[name], no.locals[name])
        unset = self.interner.leaf(FALSE)
        for bit in {**yes.bits, **no.bits}:
            state.bits[bit] = self._either(condition, yes.bits.get(bit, unset), no.bits.get(bit, unset))

    def _either(self, condition: Node, yes: Node, no: Node) -> Node:
        return yes if yes is no else self._op("select", condition, yes, no)

    def _op(self, name: str, *args: Node) -> Node:
        like = op(name, *args)
        return self.interner.op(name, args, like)

    def _switch(self, item: Any, state: State) -> None:
        """Each case ends with break; the labels before it share its body."""
        subject = self.value(item.cond, state)
        rows: list[tuple[list[Any], list[Any]]] = []
        labels: list[Any] = []
        default: list[Any] = []
        for case in item.stmt.block_items or []:
            body = case.stmts or []
            if type(case).__name__ == "Default":
                default = body
                continue
            labels.append(case.expr)
            if body:
                if type(body[-1]).__name__ != "Break":
                    raise NotUnderstood(f"a case without break at line {case.coord}")
                rows.append((labels, body))
                labels = []
        self._rows(subject, rows, default, state)

    def _rows(self, subject: Node, rows: list[tuple[list[Any], list[Any]]], default: list[Any], state: State) -> None:
        if not rows:
            self._block(default, state)
            return
        (labels, body), *rest = rows
        tests = [self._compare("eq", subject, self.value(label, state)) for label in labels]
        condition = tests[0] if len(tests) == 1 else self._op("or", *tests)
        if isinstance(condition, Const):
            if condition.value:
                self._block(body, state)
            else:
                self._rows(subject, rest, default, state)
            return
        yes, no = state.copy(), state.copy()
        self._block(body, yes)
        self._rows(subject, rest, default, no)
        self._merge(condition, yes, no, state)

    def _place(self, node: Any) -> Place:
        index = None
        if type(node).__name__ == "ArrayRef":
            index, node = int(node.subscript.value), node.name
        if type(node).__name__ != "StructRef" or node.type != "->":
            raise NotUnderstood(f"a place at line {node.coord}")
        return node.name.name, node.field.name, index

    def value(self, node: Any, state: State) -> Node:
        """The tree of an expression."""
        match type(node).__name__:
            case "Constant":
                return self._constant(node)
            case "ID":
                return self._name(node.name, state)
            case "StructRef" | "ArrayRef":
                place = self._place(node)
                return state.members.get(place) or self.start(place)
            case "UnaryOp":
                return self._unary(node, state)
            case "BinaryOp":
                return self._binary(node, state)
            case "TernaryOp":
                return self._op("select", *(self.value(n, state) for n in (node.cond, node.iftrue, node.iffalse)))
            case "Cast":
                return self._cast(node, state)
            case "FuncCall":
                return self._call(node, state)
            case other:
                raise NotUnderstood(f"expression {other} at line {node.coord}")

    def _cast(self, node: Any, state: State) -> Node:
        inner = self.value(node.expr, state)
        wanted = node.to_type.type.type.names
        if wanted == ["float" if self.format.precision == 24 else "double"] and inner.type == INT:
            return self._op("to_real", inner)
        if wanted == ["int32_t" if self.format.precision == 24 else "int64_t"] or (
            wanted == ["int32_t"] and inner.type == REAL
        ):
            return self.interner.op("truncate", (inner,), Op("truncate", (inner,), INT))
        raise NotUnderstood(f"a cast at line {node.coord}")

    def _constant(self, node: Any) -> Node:
        text = node.value
        if node.type in ("float", "double"):
            single = text.endswith("f")
            if single is not (self.format.precision == 24):
                raise NotUnderstood(f"the literal {text} at line {node.coord} is of the wrong type")
            return self.interner.leaf(Const(self.format.round(Fraction(text.rstrip("f"))), REAL))
        return self.interner.leaf(Const(int(text.rstrip("u")), INT))

    def _name(self, name: str, state: State) -> Node:
        if name in ("true", "false"):
            return self.interner.leaf(TRUE if name == "true" else FALSE)
        if name in state.locals:
            return state.locals[name]
        if name in self.source.macros:
            return self.interner.leaf(Const(self.source.macros[name], INT))
        type_name, code = self.source.enumerators[name]
        return self.interner.leaf(Const(code, self.enums[type_name]))

    def _unary(self, node: Any, state: State) -> Node:
        inner = self.value(node.expr, state)
        if node.op == "!":
            return (
                self.interner.leaf(FALSE if inner.value else TRUE)
                if isinstance(inner, Const)
                else self._op("not", inner)
            )
        if node.op != "-":
            raise NotUnderstood(f"operator {node.op} at line {node.coord}")
        if inner.type not in (REAL, INT):
            raise NotUnderstood(f"a minus at line {node.coord}")
        if isinstance(inner, Const) and inner.value != 0:
            return self.interner.leaf(Const(-inner.value, inner.type))
        return self._op("ineg" if inner.type == INT else "neg", inner)

    def _binary(self, node: Any, state: State) -> Node:
        if node.op in ("&&", "||"):
            return self._op("and" if node.op == "&&" else "or", *self._flat(node, node.op, state))
        left, right = self.value(node.left, state), self.value(node.right, state)
        if node.op in _COMPARE:
            return self._compare(_COMPARE[node.op], left, right)
        table = _INT if left.type == INT else _REAL
        if left.type != right.type or node.op not in table:
            raise NotUnderstood(f"operator {node.op} at line {node.coord}")
        return self._op(table[node.op], left, right)

    def _compare(self, name: str, left: Node, right: Node) -> Node:
        if name in ("eq", "ne") and isinstance(left, Const) and isinstance(right, Const):
            return self.interner.leaf(TRUE if (left is right) is (name == "eq") else FALSE)
        return self._op(name, left, right)

    def _flat(self, node: Any, sign: str, state: State) -> list[Node]:
        """a && b && c: the generator writes n-ary logic without inner parentheses, so only the left side nests."""
        if type(node).__name__ == "BinaryOp" and node.op == sign:
            return [*self._flat(node.left, sign, state), self.value(node.right, state)]
        return [self.value(node, state)]

    def _call(self, node: Any, state: State) -> Node:
        name = node.name.name.removeprefix(f"{self.law}_")
        args = tuple(self.value(a, state) for a in node.args.exprs)
        table = self.tables.get(name, "")
        if table:
            name = "lookup" if len(args) == 1 else "lookup2"
        like = op(name, *args, table=table)
        return self.interner.op(like.op, args, like)
