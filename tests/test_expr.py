"""Expressions: tokens, trees, printing, types, units."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hybgen.diag.finding import Findings
from hybgen.diag.span import Span
from hybgen.expr import units
from hybgen.expr.constant import value_in
from hybgen.expr.core import BOOL, INT, REAL, Kind, RefKind, Type
from hybgen.expr.parser import parse
from hybgen.expr.scope import Lookup, Scope, Symbol
from hybgen.expr.show import show
from hybgen.expr.tree import Binary, Call, Chain, Expr, Item, Logic, Name, Number, Truth, Unary, Vector
from hybgen.expr.typed import Typed, Want, typed


def locate(offset: int, length: int) -> Span:
    return Span("law.yaml", 1, offset + 1, length)


def tree(text: str) -> Expr:
    findings = Findings()
    found = parse(text, locate, findings)
    assert found is not None, findings.sorted()
    return found


MODE = Type(Kind.ENUM, ("idle", "run"), "mode")
SCOPE = Scope(
    {
        s.name: s
        for s in (
            Symbol(RefKind.INPUT, "level", REAL, unit=units.parse("m")),
            Symbol(RefKind.INPUT, "warm", REAL, unit=units.parse("degC")),
            Symbol(RefKind.INPUT, "armed", BOOL),
            Symbol(RefKind.INPUT, "pulses", INT, bounds=(Fraction(0), Fraction(1000))),
            Symbol(RefKind.INPUT, "pull", REAL, (3,), units.parse("N")),
            Symbol(RefKind.PARAMETER, "gain", REAL, unit=units.parse("V/m")),
            Symbol(RefKind.PARAMETER, "matrix", REAL, (2, 3)),
            Symbol(RefKind.PARAMETER, "limit", REAL, constant=(Fraction(5),)),
            Symbol(RefKind.STATE, "mode", MODE),
            Symbol(RefKind.STATE, "idle_for", REAL, unit=units.parse("s"), timer=True),
            Symbol(RefKind.STATE, "speed", REAL, unit=units.parse("mm/s")),
        )
    },
    {
        "curve": Lookup("curve", (units.parse("V"),), units.parse("degC")),
        "map": Lookup("map", (units.parse("V"), units.parse("degC")), units.parse("N")),
    },
    ("start",),
)


def check(text: str, want: Want | None = None) -> Typed | list[str]:
    findings = Findings()
    found = typed(tree(text), SCOPE, want, findings)
    return found if found is not None else [f.code for f in findings.sorted()]


@pytest.mark.parametrize(
    ("text", "unit"),
    [
        ("0.02 m", "m"),
        ("2 /s", "/s"),
        ("3 N m", "N m"),
        ("0.5 V/s", "V/s"),
        ("2 m**2", "m**2"),
        ("4 m/s2", "m/s2"),
        ("1 W/(m2 K)", "W/(m2 K)"),
        ("5 %", "%"),
        ("10 min", "min"),
    ],
)
def test_a_unit_belongs_to_its_number(text: str, unit: str) -> None:
    found = tree(text)
    assert isinstance(found, Number) and found.unit is not None
    assert found.unit.same(units.parse(unit))


def test_a_slash_with_blanks_divides() -> None:
    assert isinstance(tree("2 m / s"), Binary)
    assert isinstance(tree("2/s"), Binary)
    assert tree("3 and x") == Logic("and", (Number(Fraction(3), None, "3"), Name("x")))


def test_unit_scales_are_exact() -> None:
    assert units.parse("mm").scale == Fraction(1, 1000)
    assert units.parse("deg").factor_text(units.parse("rad")) == "pi/180"
    assert units.parse("kW h").same(units.parse("kWh"))
    assert units.parse("L/min").scale == Fraction(1, 60000)
    assert not units.parse("m").same(units.parse("mm"))
    with pytest.raises(units.BadUnit):
        units.parse("metre")


@pytest.mark.parametrize(
    ("text", "codes"),
    [
        ("levl > 0.1 m", ["HG201"]),
        ("level > 0.1", ["HG202"]),
        ("level > 100 mm", ["HG203"]),
        ("level == 0.1 m", ["HG205"]),
        ("nearby(level)", ["HG206"]),
        ("clamp(level, 0 m)", ["HG207"]),
        ("pull > 0", ["HG208"]),
        ("pull[3] > 0 N", ["HG209"]),
        ("pulses * pulses * pulses * pulses", ["HG211"]),
        ("level**0.5", ["HG212"]),
        ("warm * 2", ["HG213"]),
        ("warm + warm", ["HG213"]),
        ("valid(armed)", ["HG215"]),
        ("jumped(stop)", ["HG215"]),
        ("qconj(limit)", ["HG190"]),
        ("sqrt(level)", ["HG202"]),
        ("map(gain * level)", ["HG207"]),
        ("curve(gain * level, warm)", ["HG207"]),
        ("map(level, warm)", ["HG202"]),
        ("map(gain * level, 5 K)", ["HG202"]),
        ("map(levl, wram)", ["HG201", "HG201"]),
        ("map(pull, warm)", ["HG208"]),
        ("map(gain * level, armed)", ["HG204"]),
        ("map > 0 N", ["HG201"]),
        ("armed + 1", ["HG204"]),
        ("not level", ["HG204"]),
        ("mode == walk", ["HG201"]),
        ("mode < run", ["HG204"]),
        ("idle", ["HG201"]),
        ("limit / (2 - 2)", ["HG216"]),
        ("speed > level / 1 s", ["HG203"]),
        ("levl > 0 and armd", ["HG201", "HG201"]),
    ],
)
def test_mistakes_have_codes(text: str, codes: list[str]) -> None:
    assert check(text) == codes


@pytest.mark.parametrize(
    ("text", "type_", "unit"),
    [
        ("gain * level", REAL, "V"),
        ("warm - 25 degC", REAL, "K"),
        ("warm + 2 K", REAL, "degC"),
        ("curve(gain * level)", REAL, "degC"),
        ("map(gain * level, warm)", REAL, "N"),
        ("map(0, curve(gain * level))", REAL, "N"),
        ("pulses + 1", INT, "1"),
        ("pulses + 0.5", REAL, "1"),
        ("pulses >= limit", BOOL, "1"),
        ("level > 0", BOOL, "1"),
        ("mode == run", BOOL, "1"),
        ("0.1 m <= level < 0.3 m", BOOL, "1"),
        ("idle_for >= 500 ms", BOOL, "1"),
        ("idle_for == 2 min", BOOL, "1"),
        ("dot(pull, pull)", REAL, "N2"),
        ("choose(armed, level, 0)", REAL, "m"),
        ("min(level, 1 m, 2 m)", REAL, "m"),
        ("-level", REAL, "m"),
        ("level**2", REAL, "m2"),
        ("level**-1", REAL, "1/m"),
        ("sign(level)", REAL, "1"),
        ("2 * pi", REAL, "1"),
    ],
)
def test_types_and_units(text: str, type_: Type, unit: str) -> None:
    found = check(text)
    assert isinstance(found, Typed), found
    assert found.type == type_
    assert found.unit.same(units.parse(unit))


def test_logic_values_are_found_from_what_is_wanted() -> None:
    found = check("choose(armed, run, idle)", Want(MODE, what="state 'mode'"))
    assert isinstance(found, Typed) and found.type == MODE
    assert check("walk", Want(MODE, what="state 'mode'")) == ["HG201"]


def test_matrix_product_sums_rows_from_the_left() -> None:
    found = check("matrix @ pull")
    assert isinstance(found, Typed) and found.shape == (2,)
    from hybgen.expr.core import Op

    assert isinstance(found.nodes[0], Op) and found.nodes[0].op == "add"


def test_constants_convert_exactly() -> None:
    findings = Findings()
    assert value_in(tree("4 mm"), units.parse("m"), findings) == (Fraction(1, 250), units.parse("m"))
    assert value_in(tree("2 * 3 min"), units.parse("s"), findings) == (Fraction(360), units.parse("s"))
    assert value_in(tree("0.3"), units.parse("m"), findings) == (Fraction(3, 10), units.parse("m"))
    assert value_in(tree("1 s"), units.parse("m"), findings) is None
    assert [f.code for f in findings.sorted()] == ["HG202"]


_NAMES = st.sampled_from(["a", "b", "level", "x1"])
_LEAVES = st.one_of(
    st.builds(Name, _NAMES),
    st.builds(Truth, st.booleans()),
    st.builds(lambda n: Number(Fraction(n), None, str(n)), st.integers(0, 10**6)),
    st.builds(
        lambda n, u: Number(Fraction(n), units.parse(u), f"{n} {u}"),
        st.integers(0, 99),
        st.sampled_from(["m", "V/s", "m2"]),
    ),
)


def _grow(inner: st.SearchStrategy[Expr]) -> st.SearchStrategy[Expr]:
    few = st.lists(inner, min_size=1, max_size=3).map(tuple)
    several = st.lists(inner, min_size=2, max_size=3).map(tuple)
    signs = st.sampled_from(["<", "<=", ">", ">=", "==", "!="])
    return st.one_of(
        st.builds(Unary, st.sampled_from(["-", "not"]), inner),
        st.builds(Binary, st.sampled_from(["+", "-", "*", "/", "@"]), inner, inner),
        st.builds(lambda b, n: Binary("**", b, Number(Fraction(n), None, str(n))), inner, st.integers(0, 9)),
        several.flatmap(lambda o: st.builds(Chain, st.tuples(*[signs] * (len(o) - 1)), st.just(o))),
        st.builds(Logic, st.sampled_from(["and", "or"]), several),
        st.builds(lambda b, i: Item(b, (Number(Fraction(i), None, str(i)),)), inner, st.integers(0, 9)),
        st.builds(Call, st.sampled_from(["min", "curve", "map"]), few),
        st.builds(Vector, few),
    )


@settings(max_examples=400, deadline=None)
@given(st.recursive(_LEAVES, _grow, max_leaves=25))
def test_what_is_shown_is_read_back(expr: Expr) -> None:
    assert tree(show(expr)) == expr


@settings(max_examples=300, deadline=None)
@given(st.text(st.sampled_from("ab 1.0e-+*/()[],<>=!&|mV/s%andortue\t\u00e9"), max_size=40))
def test_no_text_breaks_the_parser(text: str) -> None:
    findings = Findings()
    found = parse(text, locate, findings)
    assert (found is None) == (len(findings) > 0)
