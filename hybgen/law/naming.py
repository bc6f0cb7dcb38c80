"""Which names a law may use."""

from __future__ import annotations

import re

from hybgen.diag.finding import Findings
from hybgen.expr.tokens import KEYWORDS
from hybgen.expr.typed import function_names
from hybgen.law.document import Scalar

LONGEST = 40
_IDENTIFIER = re.compile(r"[A-Za-z][A-Za-z0-9_]*\Z")

# ISO C99/C11 6.4.1, C++20 [lex.key], and macros of <stdint.h> <stdbool.h> <stddef.h>, <errno.h>, <iso646.h>; from memory
_C = frozenset(
    """
    auto break case char const continue default do double else enum extern float for goto if inline int long register
    restrict return short signed sizeof static struct switch typedef union unsigned void volatile while
    alignas alignof and and_eq asm bitand bitor bool catch char8_t char16_t char32_t class co_await co_return co_yield
    compl concept consteval constexpr constinit const_cast decltype delete dynamic_cast explicit export false friend
    mutable namespace new noexcept not not_eq nullptr operator or or_eq private protected public reinterpret_cast
    requires static_assert static_cast template this thread_local throw true try typeid typename using virtual wchar_t
    xor xor_eq typeof NULL offsetof size_t ptrdiff_t max_align_t errno EOF main assert interrupt near far huge linux
    unix I complex imaginary
    """.split()
)
_MACRO = re.compile(
    r"(U?INT|u?int)(_?(FAST|LEAST|fast|least))?(\d+|MAX|max|PTR|ptr)(_(MIN|MAX|C|t))?\Z|(SIZE|PTRDIFF|WCHAR|WINT|SIG_ATOMIC)_(MIN|MAX)\Z"
)
_OURS = frozenset({"self", "last_jump", "jumps", "none"})
_LOCALS = frozenset("p u y now status jump taken used answer text steps a b x i low high down".split())
"""Local names of the generated code: a law of that name would be hidden by them."""


def check_name(key: Scalar, what: str, findings: Findings, word: bool = False) -> bool:
    """Is this a good name? `word`: it is not used in expressions (a jump, a claim, a logic value, the law)."""
    name = key.text
    if not _IDENTIFIER.match(name):
        hint = "letters a-z, A-Z, digits and '_', starting with a letter"
        fixed = re.sub(r"[^A-Za-z0-9_]+", "_", name).strip("_")
        findings.error(
            "HG501",
            key.span,
            f"'{name[:60]}' can't name {what}: it is no C identifier",
            hint=f"write '{fixed}'" if name.isascii() and _IDENTIFIER.match(fixed) and len(fixed) <= LONGEST else hint,
        )
        return False
    if len(name) > LONGEST:
        findings.error("HG504", key.span, f"the name '{name[:60]}' has {len(name)} characters, more than {LONGEST}")
        return False
    if word:
        return True
    if name in KEYWORDS or name in function_names() or name == "pi":
        findings.error(
            "HG505",
            key.span,
            f"'{name}' can't name {what}: it means something in expressions",
            hint="choose another name",
        )
        return False
    return free_in_c(key, what, findings)


def check_law_name(key: Scalar, findings: Findings) -> bool:
    """Is this a good name for a law? It becomes the prefix of every symbol, and is itself a type in C."""
    if not check_name(key, "a law", findings, word=True) or not free_in_c(key, "a law", findings):
        return False
    if key.text in _LOCALS or key.text.startswith("new_"):
        findings.error(
            "HG502", key.span, f"'{key.text}' can't name a law: the generated code uses it", hint="write a longer name"
        )
        return False
    return True


def macro_of(law: str, name: str) -> bool:
    """Is the name a macro of the law's header, whatever the law declares?"""
    prefix = law.upper()
    return name.startswith(f"{prefix}_STATUS_") or name in (f"{prefix}_H", f"{prefix}_NO_NAMES")


def free_in_c(key: Scalar, what: str, findings: Findings) -> bool:
    """Is the name free in C, C++ and the generated code?"""
    name = key.text
    if name in _C or _MACRO.match(name) or name in _OURS or name.startswith("held_"):
        owner = "the generated code uses it" if name in _OURS or name.startswith("held_") else "C or C++ reserves it"
        findings.error(
            "HG502", key.span, f"'{name}' can't name {what}: {owner}", hint=f"write '{name}_' or a longer name"
        )
        return False
    return True
