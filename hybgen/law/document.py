"""YAML text -> a frozen tree with places: nothing is interpreted, everything is bounded.

Only the event stream of the YAML library is used, so no tag, type or object can come out of a file. Aliases are
followed, counted as if they were written out.
"""

from __future__ import annotations

import bisect
import itertools
import re
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from typing import Any

import yaml

from hybgen.diag.finding import Findings, LawError
from hybgen.diag.span import Span

MOST_BYTES = 1 << 20
MOST_NODES = 20000
DEEPEST = 24
FARTHEST = 400
"""So far apart may two neighbours of a value stand in the file (a line end and blanks between them)."""
_BLANK = re.compile(r"\s*")
_CUT = re.compile(r"(\\\n\s*)+")
_ESCAPES = {"x": 4, "u": 6, "U": 10}
"""Length of an escape in double quotes, if not 2."""

_LOADER: Any = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
_FORBIDDEN = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\x7f\x80-\x9f\u2028\u2029\ufeff\ud800-\udfff\ufffe\uffff]")


@dataclass(frozen=True, slots=True)
class Text:
    """A file's text (line ends are `\\n`), its lines, and where they start."""

    file: str
    text: str
    lines: tuple[str, ...]
    starts: tuple[int, ...]

    def span(self, index: int, length: int) -> Span:
        """The place of `length` characters from an index of the text, cut at the end of the line."""
        index = min(max(index, 0), len(self.text))
        line = bisect.bisect_right(self.starts, index) - 1
        start, text = self.starts[line], self.lines[line]
        end = start + len(text)
        return Span(self.file, line + 1, index - start + 1, max(1, min(length, end - index)), text)


@dataclass(frozen=True, slots=True)
class Scalar:
    """A piece of text."""

    text: str
    span: Span
    plain: bool
    begin: int = field(repr=False)
    end: int = field(repr=False)
    source: Text = field(repr=False, compare=False)

    def locate(self, offset: int, length: int) -> Span:
        """The place of a piece of this scalar's value."""
        return self.locator()(offset, length)

    def locator(self) -> Callable[[int, int], Span]:
        """`locate` for many pieces: the walk through the text is made once."""
        places = self._places()

        def locate(offset: int, length: int) -> Span:
            if not places:
                return self.source.span(self.begin, length)
            first = places[min(offset, len(places) - 1)] + max(0, offset - len(places) + 1)
            last = places[min(max(offset, offset + length - 1), len(places) - 1)]
            return self.source.span(first, max(1, last - first + 1))

        return locate

    def _places(self) -> list[int] | range:
        """For each character of the value its index in the file, found by walking both side by side."""
        raw = self.source.text[self.begin : self.end]
        quote = raw[:1] if not self.plain and raw[:1] in ("'", '"') else ""
        first = len(quote)
        if raw[first : first + len(self.text)] == self.text:
            return range(self.begin + first, self.begin + first + len(self.text))
        at = raw.find("\n") + 1 if raw[:1] in ("|", ">") else first
        places = []
        for sign in self.text:
            place, at = _walked(raw, at, sign, quote)
            places.append(self.begin + place)
        return places


def _walked(raw: str, at: int, sign: str, quote: str) -> tuple[int, int]:
    """Where a sign of a value stands in the raw text, from `at` on, and where the next one may stand."""
    if quote == '"' and (cut := _CUT.match(raw, at)):
        at = cut.end()
    if quote == '"' and raw[at : at + 1] == "\\":
        return at, at + _ESCAPES.get(raw[at + 1 : at + 2], 2)
    if sign.isspace():
        run = _BLANK.match(raw, at)
        assert run is not None
        return min(at, len(raw)), run.end() if "\n" in run[0] else min(at + 1, run.end())
    found = raw.find(sign, at, at + FARTHEST)
    if found < 0:
        return max(0, at - 1), at
    return found, found + (2 if sign == quote else 1)


@dataclass(frozen=True, slots=True)
class Sequence:
    """A list."""

    items: tuple[Node, ...]
    span: Span


@dataclass(frozen=True, slots=True)
class Mapping:
    """Keys and values in the written order."""

    entries: tuple[tuple[Scalar, Node], ...]
    span: Span

    def get(self, key: str) -> Node | None:
        """The value of a key, or None."""
        return next((v for k, v in self.entries if k.text == key), None)

    def key(self, key: str) -> Scalar | None:
        """The key itself, for its place."""
        return next((k for k, _ in self.entries if k.text == key), None)


Node = Scalar | Sequence | Mapping


class _Stop(Exception):
    """Internal: a finding has been added."""


def read_document(data: bytes, file: str) -> Mapping:
    """The tree of a law file. Raises LawError with the first mistake of the YAML."""
    findings = Findings()
    try:
        return _Reader(_text(data, file, findings), findings).document()
    except _Stop:
        raise LawError(findings.sorted()) from None


def _text(data: bytes, file: str, findings: Findings) -> Text:
    whole = Span(file, 1, 1)
    if len(data) > MOST_BYTES:
        findings.error(
            "HG104",
            whole,
            f"this file has more than {MOST_BYTES} bytes: no law is that long",
            hint="is this the right file?",
        )
        raise _Stop
    try:
        text = data.decode("utf-8")
    except UnicodeDecodeError as bad:
        line = data[: bad.start].count(b"\n") + 1
        findings.error(
            "HG106", Span(file, line, 1), f"byte {bad.start} of this file is no UTF-8", hint="save the file as UTF-8"
        )
        raise _Stop from None
    text = text.removeprefix("\ufeff").replace("\r\n", "\n").replace("\r", "\n")
    lines = tuple(text.split("\n"))
    source = Text(file, text, lines, (0, *itertools.accumulate(len(line) + 1 for line in lines[:-1])))
    if bad_sign := _FORBIDDEN.search(text):
        findings.error(
            "HG107",
            source.span(bad_sign.start(), 1),
            f"the character U+{ord(bad_sign[0]):04X} has no place in a law",
            hint="take it out",
        )
        raise _Stop
    if not text.strip():
        findings.error("HG103", whole, "this file is empty", hint="'hybgen new NAME' writes a law to start from")
        raise _Stop
    return source


class _Reader:
    """Builds the tree from YAML events with a stack of its own; nothing recurses."""

    def __init__(self, source: Text, findings: Findings) -> None:
        self.source = source
        self.findings = findings
        self.anchors: dict[str, tuple[Node, int]] = {}
        self.count = 0

    def stop(self, code: str, span: Span, message: str, hint: str | None = None) -> _Stop:
        self.findings.error(code, span, message, hint=hint)
        return _Stop()

    def document(self) -> Mapping:
        top: Node | None = None
        events = self.events()
        for event in events:
            if isinstance(event, yaml.DocumentStartEvent):
                if top is not None:
                    raise self.stop("HG109", self.at(event), "a law file has one document", "take out the second '---'")
                top = self.tree(events)
        if not isinstance(top, Mapping):
            span = top.span if top is not None else self.source.span(0, 1)
            raise self.stop(
                "HG114",
                span,
                "a law file has keys at its top: law, step, inputs, …",
                "'hybgen new NAME' writes a law to start from",
            )
        return top

    def events(self) -> Iterator[Any]:
        try:
            yield from yaml.parse(self.source.text, Loader=_LOADER)
        except yaml.MarkedYAMLError as error:
            raise self.syntax(error) from None
        except yaml.YAMLError as error:
            raise self.stop("HG108", self.source.span(0, 1), f"this is no YAML: {str(error).splitlines()[0]}") from None

    def syntax(self, error: yaml.MarkedYAMLError) -> _Stop:
        mark = error.problem_mark or error.context_mark
        index = mark.index if mark is not None else 0
        span = self.source.span(index, 1)
        before = span.text[: span.column]
        if "\t" in before and not before.strip():
            return self.stop("HG105", span, "a tab can't indent YAML", "use blanks")
        if self.source.text[index : index + 1] == "\t":
            return self.stop("HG105", span, "a tab can't stand here in YAML", "use blanks")
        problem = error.problem or error.context or "it can't be read"
        hint = "inside { } and [ ] put an expression with , [ ] { } or ': ' in quotes"
        if "mapping values are not allowed" in problem:
            hint = "check the indentation, and put a text with ': ' in quotes"
        elif "block" in (error.context or ""):
            hint = "check the indentation: the keys of one group start in one column"
        elif "flow" in (error.context or "") and error.context_mark is not None:
            hint += f", and close what line {error.context_mark.line + 1} opens"
        return self.stop("HG108", span, f"this is no YAML: {problem}", hint)

    def at(self, event: Any) -> Span:
        return self.source.span(event.start_mark.index, 1)

    def tree(self, events: Iterator[Any]) -> Node:
        """One node with all that is in it."""
        stack: list[tuple[Any, list[Node], int]] = []
        for event in events:
            if isinstance(event, yaml.MappingStartEvent | yaml.SequenceStartEvent):
                self.opened(event, len(stack))
                stack.append((event, [], self.count))
                continue
            if isinstance(event, yaml.MappingEndEvent | yaml.SequenceEndEvent):
                start, items, before = stack.pop()
                made: Node = self.closed(start, items)
                size = self.count - before + 1
                anchor = start.anchor
            elif isinstance(event, yaml.ScalarEvent):
                made, size, anchor = self.scalar(event), 1, event.anchor
            else:
                assert isinstance(event, yaml.AliasEvent)
                made, size = self.alias(event)
                anchor = None
            if anchor is not None:
                self.anchors[anchor] = (made, size)
            if not stack:
                return made
            stack[-1][1].append(made)
        raise AssertionError("the YAML library ended a document too early")

    def counted(self, event: Any, size: int) -> None:
        self.count += size
        if self.count > MOST_NODES:
            raise self.stop(
                "HG110",
                self.at(event),
                f"this file has more than {MOST_NODES} entries, aliases written out",
                "a law is far smaller",
            )

    def opened(self, event: Any, depth: int) -> None:
        self.counted(event, 1)
        self.untagged(event)
        if depth >= DEEPEST:
            raise self.stop("HG111", self.at(event), f"this is nested deeper than {DEEPEST} levels")

    def untagged(self, event: Any) -> None:
        if event.tag is not None:
            raise self.stop(
                "HG109", self.at(event), f"the tag '{event.tag[:40]}' has no place in a law", "write the plain value"
            )

    def scalar(self, event: Any) -> Scalar:
        self.counted(event, 1)
        self.untagged(event)
        begin, end = event.start_mark.index, event.end_mark.index
        text = self.source.text[begin:end].rstrip()
        span = self.source.span(begin, len(text.split("\n", 1)[0]))
        return Scalar(event.value, span, event.style in (None, ""), begin, end, self.source)

    def alias(self, event: Any) -> tuple[Node, int]:
        known = self.anchors.get(event.anchor)
        if known is None:
            raise self.stop("HG108", self.at(event), f"the alias '*{event.anchor[:40]}' has no anchor before it")
        self.counted(event, known[1])
        return known

    def closed(self, start: Any, items: list[Node]) -> Node:
        span = self.at(start)
        if isinstance(start, yaml.SequenceStartEvent):
            return Sequence(tuple(items), span)
        entries: list[tuple[Scalar, Node]] = []
        seen: dict[str, Scalar] = {}
        for key, value in zip(items[::2], items[1::2], strict=True):
            if not isinstance(key, Scalar) or not key.text:
                raise self.stop("HG113", key.span, "a key has to be a plain word")
            if key.text in seen:
                self.findings.error(
                    "HG112",
                    key.span,
                    f"the key '{key.text[:60]}' is given twice",
                    hint="keep one of the two",
                    related=((seen[key.text].span, "first given here"),),
                )
                raise _Stop
            seen[key.text] = key
            entries.append((key, value))
        return Mapping(tuple(entries), span)
