"""Mistakes: each told once, at its exact place, and the rest of the file still read."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st
from support.texts import ROOT, codes, found_text, read_all

from nodal.language import syntax as s
from nodal.language.codes import BY_CODE
from nodal.language.codes.text import TEXT
from nodal.language.diagnostics import render

EXAMPLES = [(row.code, example) for row in TEXT for example in row.examples]
FILE_CODES = {"no-file", "is-directory", "unreadable", "not-utf-8", "too-long"}
"""Raised by files, not by texts; see test_read."""


@pytest.mark.parametrize(("code", "text"), EXAMPLES)
def test_each_example_raises_its_code_and_no_other(code: str, text: str) -> None:
    found = codes(text)
    assert found
    assert set(found) == {code}


def test_every_code_of_a_text_has_examples() -> None:
    assert {row.code for row in TEXT if not row.examples} == FILE_CODES


@pytest.mark.parametrize(
    ("line", "code", "place", "help_part"),
    [
        ("branch tip: gate to core = 9 M ∥ 9.5 pF", "missing-unit", "9 M", "9 MΩ"),
        ("let a = 10 uf", "unknown-unit", "uf", "10 µF"),
        ("let a = 10 MHZ", "unknown-unit", "MHZ", "10 MHz"),
        ("let a = 90 mn", "unknown-unit", "mn", "the units are"),
        ("let a = 1,5 V", "number-form", "1,5 V", "1.5 V"),
        ("let a = 1,000 V", "number-form", "1,000 V", "1000 V"),
        ("let a = 4k7", "number-form", "4k7", "4.7 kΩ"),
        ("let a = 4R7", "number-form", "4R7", "4.7 Ω"),
        ("let a = 3n3F", "number-form", "3n3F", "3.3 nF"),
        ("let a = 2µ2", "number-form", "2µ2", "2.2 µF"),
        ("let a = .5 V", "number-form", ".5 V", "0.5 V"),
        ("let a = 5. V", "number-form", "5. V", "5.0 V"),
        ("let a = 1_000 V", "number-form", "1_000 V", "1000 V"),
        ("branch 3v3: a to b = 1 Ω", "number-form", "3v3", "a name begins with a letter"),
        ("branch a: 2nd to b = 1 Ω", "unknown-unit", "nd", "a name begins with a letter"),
        ("branch a: b to c = 1 Ω ‖ 2 Ω", "look-alike", "‖", '"∥" or "||"'),
        ("branch a: b to c = 1 Ω – 2 Ω", "look-alike", "–", '"--" for series, "-" for minus'),
        ("temperature 25 ºC", "look-alike", "º", '"°"'),
        ("let a = 3 × 2", "look-alike", "×", '"*"'),
        ("let a\u202e = 3", "hidden-character", "\u202e", "delete it"),
        ("let größe = 3", "name-form", "größe", "write grosse"),
        ("let é = 3", "name-form", "é", "write e"),
        ("brnch a: b to c = 1 Ω", "unknown-statement", "brnch", "did you mean branch"),
        ("branch a: b to c = 1 Ω 2 Ω", "syntax", "2 Ω", "operator"),
        ("branch a: b to c = 1 Ω --\nbranch d: b to c = 1 Ω", "syntax", "d", 'between "--" and "branch"'),
        ("branch a: b, c = 1 Ω", "syntax", ",", "branch NAME: NODE to NODE = NETWORK"),
        ("branch a: b = 1 Ω", "node-count", "=", "NODE to NODE"),
        ("cable c: a to b = 1 m of s", "node-count", "to", "CORE, SHIELD to CORE, SHIELD"),
        ("contact t: a", "node-count", "\n", "NODE to NODE"),
        ("let x = (1 + 2", "unclosed", "(", '")"'),
        ("let x = 1 + 2)", "nothing-to-close", ")", '"("'),
        ('title "x', "unclosed-text", '"x', "same line"),
    ],
)
def test_code_place_and_help(line: str, code: str, place: str, help_part: str) -> None:
    text = f"nodal 1\nlet before = 1\n{line}\nlet after = 2\n"
    file, found = read_all(text)
    (only,) = found
    assert only.code == code
    assert found_text(text, only) == place
    assert help_part in only.help
    names = [statement.name.text for statement in file.statements if isinstance(statement, s.Let)]
    assert names[0] == "before"
    assert names[-1] == "after"


def test_every_mistake_is_told() -> None:
    text = """nodal 1
branch a: b to c = 9 M
branch d: e to = 1 Ω
brnch f: g to h = 1 Ω; let i 2
case k {
  let l = 1,5 V
  let m 4
  reading n: o times 10
}
stock p { capacitance; loss 0.1 at }
amplifier q: r, s to t, u {
  gain gain 1
  poles 3 MHz, , 4 MHz
}
sweep 1 Hz to 1 kHz
"""
    wrong = ["missing-unit", "syntax", "unknown-statement", "syntax", "number-form", "syntax", "node-count"]
    assert codes(text) == [*wrong, "syntax", "syntax", "syntax", "syntax", "syntax"]


def test_one_mistake_a_statement() -> None:
    assert codes("nodal 1\nlet a b c d = = 1 2 3\n") == ["syntax"]


def test_what_is_right_before_a_mistake_is_kept() -> None:
    file, _ = read_all("nodal 1\nlet a = 1 V 2\ncase k { let b = 1 } extra\nlet c = 1\n")
    assert [statement.name.text for statement in file.statements[1:]] == ["a", "k", "c"]


def test_names_of_lost_statements_are_kept() -> None:
    file, _ = read_all("nodal 1\nlet a b 1 V\nplace p: q(r s)\nlet c = 1\n")
    assert {"a", "b", "p", "q", "r", "s"} <= file.lost
    assert "c" not in file.lost


def test_a_broken_header_does_not_hide_its_body() -> None:
    text = "nodal 1\nassembly m(a to { \n branch x: a to b = 1 uf\n}\ncase { let y = 2 }\nlet z = 1\n"
    file, found = read_all(text)
    assert sorted(d.code for d in found) == ["syntax", "unclosed", "unknown-unit"]
    assert [type(statement) for statement in file.statements] == [s.Version, s.Let]


def test_an_unknown_block_is_passed_over_whole() -> None:
    text = "nodal 1\nblock x {\n anything goes = here {\n }\n}\nlet z = 1\n"
    file, found = read_all(text)
    assert [d.code for d in found] == ["unknown-statement"]
    assert [type(statement) for statement in file.statements] == [s.Version, s.Let]


@pytest.mark.parametrize(
    "opening", ["under test {", "stock s {", "amplifier a: b, c to d, e {", "assembly m(a to b) {"]
)
def test_an_unclosed_brace_is_told_at_its_place_and_the_rest_read(opening: str) -> None:
    text = (
        f"nodal 1\n{opening}\n\nreading r: a to b\ncase k {{ let x = 1 }}\nsweep 1 Hz to 9 Hz, 3 per decade\n"
    )
    file, found = read_all(text)
    (only,) = found
    assert only.code == "unclosed"
    assert only.span is not None
    assert only.span.start == text.index("{")
    assert [type(statement) for statement in file.statements[2:]] == [s.Reading, s.Case, s.Sweep]


@pytest.mark.parametrize(
    ("opening", "inside"),
    [
        ("under test {", ["source s: a to b = 1 V", "stock q { loss 0 }", "assembly m(a) { }", "let x = 1"]),
        ("assembly m(a to b) {", ["branch c: a to b = 1 Ω", "place p: m(a)", "let x = 1"]),
        ("case k {", ["reading r: a to b", "under test { let y = 1 }", "let x = 1", "require r: f(x) <= 1"]),
    ],
)
def test_what_can_stand_inside_an_unclosed_brace_stays_there(opening: str, inside: list[str]) -> None:
    file, found = read_all("\n".join(["nodal 1", opening, *inside, 'title "x"', ""]))
    assert [d.code for d in found] == ["unclosed"]
    _, block, title = file.statements
    assert isinstance(block, s.UnderTest | s.Assembly | s.Case)
    assert len(block.body) == len(inside)
    assert isinstance(title, s.Title)


def test_an_unclosed_case_ends_before_the_next() -> None:
    file, found = read_all("nodal 1\ncase k {\n let x = 1\ncase l { let x = 2 }\n")
    assert [d.code for d in found] == ["unclosed"]
    assert [statement.name.text for statement in file.statements[1:]] == ["k", "l"]


def test_unclosed_parentheses_end_before_the_next_statement() -> None:
    text = "nodal 1\nlet a = ((1 +\n 2)\nbranch b: c to d = wire(1 m,\n\nlet e = 3\n"
    file, found = read_all(text)
    assert [(d.code, d.span.start) for d in found if d.span] == [
        ("unclosed", text.index("((")), ("unclosed", text.index("(1 m")),
    ]  # fmt: skip
    assert [statement.name.text for statement in file.statements[1:]] == ["e"]


def test_messages_name_no_terminal() -> None:
    terminals = {
        "NAME",
        "NUMBER",
        "LPAR",
        "RPAR",
        "LBRACE",
        "RBRACE",
        "PARALLEL",
        "END",
        "DOTTED",
        "AT_MOST",
        "COLON",
    }
    for code, text in EXAMPLES:
        for found in read_all(text)[1]:
            assert not terminals & set(found.message.replace('"', " ").split()), code


def test_texts_of_the_table_are_sentences_without_a_stop() -> None:
    for row in BY_CODE.values():
        assert not row.message.endswith("."), row.code
        assert not row.help.endswith("."), row.code
        assert row.explanation.endswith((".", "1")), row.code


CIRCUITS = [path.read_text(encoding="utf-8") for path in sorted((ROOT / "circuits").glob("*.nodal"))]
SNIPPETS = [
    "(", ")", "{", "}", ";", "\n", "\r", "\x00", "#", ".", "=", ",", ":", "∥", "--", "±", "‖", "ж", "é",
    "\u202e", " to ", "\"", "1,5", "4k7", "9 M", "let ", "case x {", "under test {", "nodal 2\n",
]  # fmt: skip


@given(st.data())
def test_a_mutated_circuit_is_read_or_told_about(data: st.DataObject) -> None:
    text = data.draw(st.sampled_from(CIRCUITS))
    for _ in range(data.draw(st.integers(1, 6))):
        at = data.draw(st.integers(0, len(text)))
        gone = data.draw(st.sampled_from([0, 0, 1, 3, 40]))
        text = text[:at] + data.draw(st.sampled_from(SNIPPETS)) + text[at + gone :]
    _, found = read_all(text)
    for diagnostic in found:
        assert diagnostic.span is not None
        assert 0 <= diagnostic.span.start <= diagnostic.span.end <= len(text)
    assert len(found) == len(set(found))
    assert (render(found, {"test.nodal": text}) == "") == (not found)
