"""The elementary functions in the C, read back word for word and compared with the kernels they were made from."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from hybgen.kernels.table import ARITY, kernel
from hybgen.kernels.word import COMPARISONS, Exit, Kernel, Let, Word, closure, number
from hybgen.reread.execute import NotUnderstood
from hybgen.reread.source import Source, body_of, same

_TYPES = {"uint32_t": "u32", "int32_t": "i32", "uint64_t": "u64", "int64_t": "i64", "bool": "bool"}
_C_TYPES = {ours: theirs for theirs, ours in _TYPES.items()}
_MACROS = {"UINT64_C": "u64", "INT64_C": "i64"}


def wrong(law: str, number_format: str, source: Source) -> Iterator[str]:
    """Names of the functions, tables and types of the elementary functions that are not as they have to be."""
    there = [n for n in ARITY if f"{law}_{n}" in source.functions]
    if not there:
        return
    real = {"float32": "float", "float64": "double"}.get(number_format, "")
    if real:
        yield from _punning(law, real, source)
    reader = _Reader(law, real, source)
    for expected in closure([kernel(n, number_format) for n in there]):
        name = f"{law}_{expected.name}"
        try:
            right = name in source.functions and reader.same(source.functions[name], expected)
        except (NotUnderstood, KeyError, AttributeError):
            right = False
        if not right:
            yield name
        for table, type_, words in expected.tables:
            if not reader.table(f"{law}_{table}", type_, words):
                yield f"{law}_{table}"


def _punning(law: str, real: str, source: Source) -> Iterator[str]:
    word = "uint32_t" if real == "float" else "uint64_t"
    if source.structs.get(f"{law}_punned") != [("number", real, None), ("bits", word, None)]:
        yield f"the union {law}_punned"
    for name, text in (("bits", "p.number = number; return p.bits;"), ("real", "p.bits = bits; return p.number;")):
        if not same(source.functions[f"{law}_{name}"].body, body_of(text, law)):
            yield f"{law}_{name}"


class _Reader:
    """Reads functions of one file as kernels."""

    def __init__(self, law: str, real: str, source: Source) -> None:
        self.law, self.source = law, source
        self.types = _TYPES | {real: "real"}

    def type(self, node: Any) -> str:
        return self.types[" ".join(node.type.names)]

    def same(self, function: Any, expected: Kernel) -> bool:
        """Is the function, item by item, the kernel?"""
        parameters = tuple((p.name, self.type(p.type)) for p in function.decl.type.args.params)
        names = dict(parameters)
        items: list[Let | Exit] = []
        *body, last = function.body.block_items
        for node in body:
            if type(node).__name__ == "Decl":
                value = self.word(node.init, names)
                items.append(Let(node.name, value))
                names[node.name] = self.type(node.type)
                if node.quals != ["const"] or names[node.name] != value.type:
                    return False
            else:
                (answer,) = node.iftrue.block_items
                items.append(Exit(self.word(node.cond, names), self.word(answer.expr, names)))
                if node.iffalse is not None or type(answer).__name__ != "Return":
                    return False
        found = (parameters, tuple(items), self.word(last.expr, names), self.type(function.decl.type.type))
        return found == (expected.parameters, expected.items, expected.answer, expected.answer.type)

    def table(self, name: str, type_: str, words: tuple[int, ...]) -> bool:
        """Is the array this table?"""
        if name not in self.source.initial:
            return False
        found = [self.word(e, {}) for e in self.source.initial[name].exprs]
        return found == [number(w, type_) for w in words] and self.source.arrays[name] == (
            _C_TYPES[type_],
            (len(words),),
        )

    def word(self, node: Any, names: Mapping[str, str]) -> Word:
        """An expression as a word."""
        match type(node).__name__:
            case "Constant":
                return number(int(node.value.rstrip("u"), 0), "u32" if node.value.endswith("u") else "i32")
            case "ID":
                if node.name in ("true", "false"):
                    return Word("const", "bool", value=int(node.name == "true"))
                return Word("name", names[node.name], name=node.name)
            case "UnaryOp":
                inner = self.word(node.expr, names)
                if node.op == "-" and inner.op == "const" and inner.type[0] == "i":
                    return number(-inner.value, inner.type)
                if node.op == "!":
                    return Word("not", "bool", (inner,))
            case "BinaryOp":
                left, right = self.word(node.left, names), self.word(node.right, names)
                truth = node.op in COMPARISONS or node.op in ("&&", "||")
                if node.op in ("<<", ">>") or left.type == right.type:
                    return Word(node.op, "bool" if truth else left.type, (left, right))
            case "TernaryOp":
                parts = tuple(self.word(n, names) for n in (node.cond, node.iftrue, node.iffalse))
                if parts[1].type == parts[2].type:
                    return Word("?", parts[1].type, parts)
            case "Cast":
                inner, wanted = self.word(node.expr, names), self.type(node.to_type.type)
                return inner if inner.op == "const" and inner.type == wanted else Word("cast", wanted, (inner,))
            case "ArrayRef":
                declared, _ = self.source.arrays[node.name.name]
                table = node.name.name.removeprefix(f"{self.law}_")
                return Word("table", self.types[declared], (self.word(node.subscript, names),), table)
            case "FuncCall":
                return self.call(node, names)
        raise NotUnderstood(f"{type(node).__name__} at line {node.coord}")

    def call(self, node: Any, names: Mapping[str, str]) -> Word:
        """A call of another kernel, or of the functions between a float and its bits."""
        if node.name.name in _MACROS:
            return number(int(node.args.exprs[0].value, 0), _MACROS[node.name.name])
        name = node.name.name.removeprefix(f"{self.law}_")
        arguments = tuple(self.word(a, names) for a in node.args.exprs)
        given = self.type(self.source.functions[node.name.name].decl.type.type)
        if name in ("bits", "real"):
            return Word(name, given, arguments)
        return Word("call", given, arguments, name)
