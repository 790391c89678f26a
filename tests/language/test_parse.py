"""Text -> tree, statement by statement, and the rules of the text: line ends, spellings, spans, names."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st
from support.texts import ROOT, read_all, statement, statements, value

from nodal.language import syntax as s
from nodal.language.lexing import KEYWORDS
from nodal.language.syntax import Name, Number, Word


def w(text: str) -> Word:
    return Word(text)


def n(digits: str, unit: str = "") -> Number:
    return Number(digits, unit)


AB = (w("a"), w("b"))

STATEMENTS: list[tuple[str, s.Statement]] = [
    ('title "A probe, 1 MΩ: #1"', s.Title("A probe, 1 MΩ: #1")),
    ('include "stock.nodal"', s.Include("stock.nodal")),
    ("let x = 110 mm", s.Let(w("x"), n("110", "mm"))),
    ("let p.skew = 1 %", s.Let(w("p.skew"), n("1", "%"))),
    ("source d: a to b = 1 V", s.Source(w("d"), AB, n("1", "V"), None, None)),
    ("source d: a to b = 1 V behind 25 Ω", s.Source(w("d"), AB, n("1", "V"), "behind", n("25", "Ω"))),
    ("source d: a to b = 1 A shunted by 1 kΩ", s.Source(w("d"), AB, n("1", "A"), "shunted by", n("1", "kΩ"))),
    ("branch d: a to b = r", s.Branch(w("d"), AB, Name("r"))),
    ("branch d: p.a to b.1 = r", s.Branch(w("d"), (w("p.a"), w("b.1")), Name("r"))),
    ("coupling m: tip.L with lead.L2 = 0.3", s.Coupling(w("m"), w("tip.L"), w("lead.L2"), n("0.3"))),
    ("stock q { }", s.Stock(w("q"), ())),
    (
        "stock q { capacitance 48 pF/m; skin 1.1 Ω/m at 100 MHz }",
        s.Stock(
            w("q"),
            (
                s.Field(w("capacitance"), ((n("48", "pF/m"),),), ("",)),
                s.Field(w("skin"), ((n("1.1", "Ω/m"), n("100", "MHz")),), ("at",)),
            ),
        ),
    ),
    (
        "cable c: a, b to d, e = 1.2 m of q",
        s.Cable(w("c"), AB, (w("d"), w("e")), n("1.2", "m"), w("q")),
    ),
    (
        "amplifier g: a, b to d, e { poles 120 MHz, 300 MHz q 0.8; common_mode 80 dB at 1 kHz }",
        s.Amplifier(
            w("g"),
            AB,
            (w("d"), w("e")),
            (
                s.Field(w("poles"), ((n("120", "MHz"),), (n("300", "MHz"), n("0.8"))), ("", "q")),
                s.Field(w("common_mode"), ((n("80", "dB"), n("1", "kHz")),), ("at",)),
            ),
        ),
    ),
    ("contact t: a to b", s.Contact(w("t"), AB)),
    ("reading r: a to b", s.Reading(w("r"), AB, None)),
    ("reading r: a to b times 200 A/V", s.Reading(w("r"), AB, n("200", "A/V"))),
    ("drive d: x", s.Drive(w("d"), ((w("x"), None),))),
    (
        "drive d: x by 0.5, p.y by -0.5",
        s.Drive(w("d"), ((w("x"), n("0.5")), (w("p.y"), s.Negative(n("0.5"))))),
    ),
    (
        "assembly m(a, b to c, d with e; p, q = 3 pF) { branch z: a to c = p }",
        s.Assembly(
            w("m"),
            AB,
            (w("c"), w("d")),
            (w("e"),),
            (s.Parameter(w("p"), None), s.Parameter(w("q"), n("3", "pF"))),
            (s.Branch(w("z"), (w("a"), w("c")), Name("p")),),
        ),
    ),
    ("assembly m(a) { }", s.Assembly(w("m"), (w("a"),), (), (), (), ())),
    (
        "place p: m(a to b with ground; q = 1 %)",
        s.Place(
            w("p"), s.Use(w("m"), (w("a"),), (w("b"),), (w("ground"),), (s.Parameter(w("q"), n("1", "%")),))
        ),
    ),
    ("place p: m(a)", s.Place(w("p"), s.Use(w("m"), (w("a"),), (), (), ()))),
    (
        "chain p: 20 of m(a to b)",
        s.Chain(w("p"), n("20"), s.Use(w("m"), (w("a"),), (w("b"),), (), ())),
    ),
    ("omit p.x", s.Omit(w("p.x"))),
    ("case k { omit x }", s.Case(w("k"), (s.Omit(w("x")),))),
    (
        "under test { contact t: a to b; let x = 1 }",
        s.UnderTest((s.Contact(w("t"), AB), s.Let(w("x"), n("1")))),
    ),
    ("sweep 1 Hz to 1 GHz, 60 per decade", s.Sweep(n("1", "Hz"), n("1", "GHz"), n("60"))),
    ("edge 1 ns over 100 ns", s.Edge(n("1", "ns"), n("100", "ns"), None)),
    ("edge 1 ns over 100 ns, top at 90 ns", s.Edge(n("1", "ns"), n("100", "ns"), n("90", "ns"))),
    ("step over 100 ns", s.Edge(None, n("100", "ns"), None)),
    ("step over 100 ns, top at t", s.Edge(None, n("100", "ns"), Name("t"))),
    ("temperature 23 °C", s.Temperature(n("23", "°C"))),
    (
        "require r: bandwidth(screen) >= 1 GHz",
        s.Require(
            w("r"), s.Figure(w("bandwidth"), (Name("screen"),)), None, None, None, None, ">=", n("1", "GHz")
        ),
    ),
    (
        "require r: gain(p.q, 1 kHz) with common at 0 Hz = 1 ± 1 % with k = 2",
        s.Require(
            w("r"),
            s.Figure(w("gain"), (Name("p.q"), n("1", "kHz"))),
            w("common"),
            n("0", "Hz"),
            None,
            None,
            "=",
            s.Qualified(n("1"), (s.PlusMinus(n("1", "%"), n("2")),)),
        ),
    ),
    (
        "require r: flatness(x) from 0 Hz to 50 MHz <= 3 %",
        s.Require(
            w("r"),
            s.Figure(w("flatness"), (Name("x"),)),
            None,
            None,
            n("0", "Hz"),
            n("50", "MHz"),
            "<=",
            n("3", "%"),
        ),
    ),
    ("allow lonely-node: tip.C1", s.Allow(w("lonely-node"), w("tip.C1"))),
]

VALUES: list[tuple[str, s.Expression]] = [
    ("a.b", Name("a.b")),
    ("-a", s.Negative(Name("a"))),
    ("1 + 2 - 3", s.Sum((n("1"), n("2"), n("3")), ("+", "-"))),
    ("1 * a / 3", s.Product((n("1"), Name("a"), n("3")), ("*", "/"))),
    ("1 + 2 * 3", s.Sum((n("1"), s.Product((n("2"), n("3")), ("*",))), ("+",))),
    ("(1 + 2) * 3", s.Product((s.Sum((n("1"), n("2")), ("+",)), n("3")), ("*",))),
    ("1 - -2", s.Sum((n("1"), s.Negative(n("2"))), ("-",))),
    ("1 ∥ 2 ∥ 3", s.Parallel((n("1"), n("2"), n("3")))),
    ("1 -- 2 -- 3", s.Series((n("1"), n("2"), n("3")))),
    ("1 ∥ 2 -- 3", s.Series((s.Parallel((n("1"), n("2"))), n("3")))),
    ("1 ∥ (2 -- 3)", s.Parallel((n("1"), s.Series((n("2"), n("3")))))),
    ("wire(110 mm, d)", s.Call(w("wire"), (n("110", "mm"), Name("d")))),
    ("sqrt(min(1, 2))", s.Call(w("sqrt"), (s.Call(w("min"), (n("1"), n("2"))),))),
    ("2 * a ± 1 %", s.Qualified(s.Product((n("2"), Name("a")), ("*",)), (s.PlusMinus(n("1", "%")),))),
    ("1 V ± 0.3 V with k = 2", s.Qualified(n("1", "V"), (s.PlusMinus(n("0.3", "V"), n("2")),))),
    ("1 pF trim 5 pF to 45 pF", s.Qualified(n("1", "pF"), (s.TrimRange(n("5", "pF"), n("45", "pF")),))),
    (
        "1 Ω rated 500 V rms and 250 mW",
        s.Qualified(n("1", "Ω"), (s.Rated(((n("500", "V"), True), (n("250", "mW"), False))),)),
    ),
    (
        "1 Ω drift 25 ppm/K and -0.5 ppm/V",
        s.Qualified(n("1", "Ω"), (s.DriftRates((n("25", "ppm/K"), s.Negative(n("0.5", "ppm/V")))),)),
    ),
    (
        "1 pF loss 0.001 as head ∥ 2 Ω",
        s.Parallel((s.Qualified(n("1", "pF"), (s.LossFactor(n("0.001")), s.Called(w("head")))), n("2", "Ω"))),
    ),
    ("200 A/V", n("200", "A/V")),
    ("1 V/R1", s.Product((n("1", "V"), Name("R1")), ("/",))),
    ("1 V / m", s.Product((n("1", "V"), Name("m")), ("/",))),
    ("5 nV/rtHz", n("5", "nV/√Hz")),
]


@pytest.mark.parametrize(("text", "tree"), STATEMENTS, ids=[text for text, _ in STATEMENTS])
def test_statement(text: str, tree: s.Statement) -> None:
    assert statement(text) == tree


def test_every_kind_of_statement_is_tried() -> None:
    kinds = {kind for kind in s.Statement.__args__ if kind is not s.Version}
    assert {type(tree) for _, tree in STATEMENTS} == kinds


@pytest.mark.parametrize(("text", "tree"), VALUES, ids=[text for text, _ in VALUES])
def test_value(text: str, tree: s.Expression) -> None:
    assert value(text) == tree


@pytest.mark.parametrize(
    ("ascii_text", "text"),
    [
        ("1 kohm || 2 uF +- 1 %", "1 kΩ ∥ 2 µF ± 1 %"),
        ("1 deg", "1 °"),
        ("23 degC", "23 °C"),
        ("5 nV/rtHz", "5 nV/√Hz"),
        ("1 k\u2126 ∥ 2 \u03bcF", "1 kΩ ∥ 2 µF"),
        ("1\u00a0kΩ\u00a0∥\u202f2 µF", "1 kΩ ∥ 2 µF"),
        ("9MΩ∥9.5pF--5Ω", "9 MΩ ∥ 9.5 pF -- 5 Ω"),
        ("1 m", "1m"),
    ],
)
def test_spellings_of_the_same(ascii_text: str, text: str) -> None:
    assert value(ascii_text) == value(text)


@pytest.mark.parametrize("word", sorted(KEYWORDS))
def test_no_word_is_reserved(word: str) -> None:
    text = f"branch {word}: {word} to {word} = {word} ∥ {word} * {word}"
    expected = s.Parallel((Name(word), s.Product((Name(word), Name(word)), ("*",))))
    assert statement(text) == s.Branch(w(word), (w(word), w(word)), expected)
    assert statement(f"let {word} = 1") == s.Let(w(word), n("1"))
    assert statement(f"require {word}: {word}({word}) with {word} at {word} <= {word}") == s.Require(
        w(word), s.Figure(w(word), (Name(word),)), w(word), Name(word), None, None, "<=", Name(word)
    )
    use = s.Use(w(word), (w(word), w(word)), (w(word),), (w(word),), (s.Parameter(w(word), Name(word)),))
    text = f"place {word}: {word}({word}, {word} to {word} with {word}; {word} = {word})"
    assert statement(text) == s.Place(w(word), use)
    text = f"cable {word}: {word}, {word} to {word}, {word} = {word} of {word}"
    assert statement(text) == s.Cable(w(word), (w(word),) * 2, (w(word),) * 2, Name(word), w(word))
    assert statement(f"case {word} {{ omit {word} }}") == s.Case(w(word), (s.Omit(w(word)),))


@pytest.mark.parametrize(
    "text",
    [
        "let a = 1\nlet b = 2\n",
        "let a = 1; let b = 2",
        "\n\n let a = 1 # one\n#\n ; ;\n\tlet b = 2;\n",
        "let a = 1\r\nlet b = 2\r\n",
        "let a = 1\rlet b = 2\r",
        "let a\u00a0=\n1\nlet b = # two\n\n2",
    ],
)
def test_statements_end_at_line_ends_and_semicolons(text: str) -> None:
    assert statements(text) == (s.Let(w("a"), n("1")), s.Let(w("b"), n("2")))


@pytest.mark.parametrize("operator", ["∥", "||", "--", "+", "-", "*", "/"])
def test_a_line_goes_on_after_an_operator(operator: str) -> None:
    assert value(f"a {operator}\n\n  # comment\n  b") == value(f"a {operator} b")


def test_a_line_goes_on_in_parentheses_and_after_comma_colon_equals() -> None:
    text = "place p:\n m(\n a,\n b\n to c\n with d\n ; q\n =\n 1\n )\nlet x =\n (1\n +\n 2\n )"
    assert statements(text) == statements("place p: m(a, b to c with d; q = 1); let x = (1 + 2)")


def test_a_line_goes_on_after_the_rest() -> None:
    text = "let x = 1 ±\n 2\nrequire r: f(x) <=\n 3\nrequire q: f(x) >=\n 3"
    assert statements(text) == statements("let x = 1 ± 2; require r: f(x) <= 3; require q: f(x) >= 3")


def test_a_byte_order_mark_is_no_mistake() -> None:
    file, found = read_all("\ufeffnodal 1\nlet x = 1\n")
    assert found == []
    assert len(file.statements) == 2


def test_blocks_on_one_line_and_on_many() -> None:
    one = statements("case k { let a = 1; let b = 2 }")
    assert one == statements("case k {\n\n let a = 1\n let b = 2\n\n}\n")
    assert one == statements("case k { ; let a = 1\n let b = 2; }")
    assert statement("case k {}") == s.Case(w("k"), ())


# Spans


def nodes_of(thing: object) -> Iterator[s.Node]:
    """Every node of a tree."""
    if isinstance(thing, tuple):
        for member in thing:
            yield from nodes_of(member)
    elif isinstance(thing, s.Node):
        yield thing
        for field in dataclasses.fields(thing):
            yield from nodes_of(getattr(thing, field.name))


def source_of(text: str, node: s.Node) -> str:
    return text[node.span.start : node.span.end]


@pytest.mark.parametrize("text", [text for text, _ in STATEMENTS])
def test_spans_of_statements_are_exact(text: str) -> None:
    before = "nodal 1 # Ω∥\n"
    file, found = read_all(f"{before}  {text}  # after\n")
    assert found == []
    assert source_of(file.text, file.statements[1]) == text
    for node in nodes_of(file.statements[1]):
        if isinstance(node, Word | Name):
            assert source_of(file.text, node) == node.text
        assert node.span.path == "test.nodal"
        assert source_of(file.text, node) == source_of(file.text, node).strip() != ""


@pytest.mark.parametrize("text", [text for text, _ in VALUES])
def test_spans_of_values_are_exact(text: str) -> None:
    file, _ = read_all(f"nodal 1\nlet x = {text}\n")
    for node in nodes_of(file.statements[1].value):
        assert value(source_of(file.text, node)) == node if isinstance(node, s.Expression) else True
    assert source_of(file.text, file.statements[1].value) == text


# Round trips: a tree written out by the few lines below parses to itself.


def write(tree: s.Expression) -> str:
    match tree:
        case Number(digits, unit):
            return f"{digits} {unit}".strip()
        case Name(text):
            return text
        case s.Negative(operand):
            return f"-({write(operand)})"
        case s.Call(function, arguments):
            return f"{function.text}({', '.join(map(write, arguments))})"
        case s.Sum(members, operators) | s.Product(members, operators):
            pieces = [f"({write(members[0])})"]
            for operator, member in zip(operators, members[1:], strict=True):
                pieces += [operator, f"({write(member)})"]
            return " ".join(pieces)
        case s.Parallel(members):
            return " ∥ ".join(f"({write(member)})" for member in members)
        case s.Series(members):
            return " -- ".join(f"({write(member)})" for member in members)
    raise AssertionError(tree)


def several(of: st.SearchStrategy[s.Expression]) -> st.SearchStrategy[tuple[s.Expression, ...]]:
    return st.lists(of, min_size=2, max_size=4).map(tuple)


def grown(of: st.SearchStrategy[s.Expression]) -> st.SearchStrategy[s.Expression]:
    def chain(kind: type, operators: str) -> st.SearchStrategy[s.Expression]:
        return several(of).flatmap(
            lambda members: st.tuples(*[st.sampled_from(operators)] * (len(members) - 1)).map(
                lambda chosen: kind(members, chosen)
            )
        )

    return st.one_of(
        st.builds(s.Negative, of),
        chain(s.Sum, "+-"),
        chain(s.Product, "*/"),
        st.builds(s.Parallel, several(of)),
        st.builds(s.Series, several(of)),
        st.builds(s.Call, st.builds(Word, st.sampled_from(["sqrt", "with", "f"])), several(of)),
    )


LEAVES = st.one_of(
    st.builds(
        Number, st.sampled_from(["0", "1", "4.7", "1e-3", "2.5E+6"]), st.sampled_from(["", "pF", "Ω", "%"])
    ),
    st.builds(Name, st.sampled_from(["a", "to", "k", "pi", "x.y", "tip.1", "_"])),
)


@given(st.recursive(LEAVES, grown, max_leaves=12))
def test_trees_come_back(tree: s.Expression) -> None:
    assert value(write(tree)) == tree


@given(st.floats(min_value=0, allow_infinity=False), st.sampled_from(["", "Ω", "µF", "ppm/K", "nV/√Hz"]))
def test_any_float_and_unit_parses(number: float, unit: str) -> None:
    assert value(f"{number!r} {unit}") == Number(repr(number), unit)
    assert value(f"{number!r}{unit}") == Number(repr(number), unit)


# Whole files


@pytest.mark.parametrize("path", sorted((ROOT / "circuits").glob("**/*.nodal")), ids=lambda path: path.stem)
def test_the_shipped_circuits_parse(path: Path) -> None:
    file, found = read_all(path.read_text(encoding="utf-8"))
    assert found == []
    assert len(file.statements) > 5


def test_there_are_shipped_circuits() -> None:
    assert list((ROOT / "circuits").glob("**/*.nodal"))
