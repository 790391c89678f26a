"""How findings are shown: place, excerpt, caret under the exact characters, related places, JSON."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from nodal.language.codes import BY_CODE, TABLE, make
from nodal.language.diagnostics import Collector, Diagnostic, Lines, as_json, render
from nodal.language.syntax import Span


def finding(text: str, part: str, **more: object) -> Diagnostic:
    start = text.index(part)
    return Diagnostic("some-code", "error", "it is wrong", Span("a.nodal", start, start + len(part)), **more)


def shown(text: str, part: str, **more: object) -> list[str]:
    return render([finding(text, part, **more)], {"a.nodal": text}).splitlines()


def test_the_form_of_a_diagnostic() -> None:
    text = "\n" * 19 + "branch tip: gate to core = 9 M ∥ 9.5 pF\n"
    start = text.index("9 M")
    found = make(
        "missing-unit",
        Span("circuits/bench_probe.nodal", start, start + 3),
        arguments={"found": "9 M", "fix": "write 9 MΩ for a resistor"},
    )
    assert render([found], {"circuits/bench_probe.nodal": text}) == (
        'circuits/bench_probe.nodal:20:28: error[missing-unit]: "9 M" has no unit\n'
        "   20 | branch tip: gate to core = 9 M ∥ 9.5 pF\n"
        "      |                            ^^^\n"
        "   help: write 9 MΩ for a resistor\n"
    )


@pytest.mark.parametrize(
    ("line", "part", "excerpt", "carets"),
    [
        ("ab cd", "cd", "ab cd", "   ^^"),
        ("日本 x", "x", "日本 x", "     ^"),  # wide characters take two cells
        ("日本 x", "本", "日本 x", "  ^^"),
        ("e\u0301e\u0301 x", "x", "e\u0301e\u0301 x", "   ^"),  # combining ones none
        ("\tx\ty", "y", "    x   y", "        ^"),
        ("a\x1b[31m b", "b", "a�[31m b", "       ^"),  # nothing that a terminal would obey
        ("a\u202eb c", "c", "a�b c", "    ^"),
    ],
)
def test_carets_stand_under_the_characters(line: str, part: str, excerpt: str, carets: str) -> None:
    assert shown(f"first\n{line}\nlast", part)[1:] == [f"    2 | {excerpt}", f"      | {carets}"]


def test_an_empty_span_has_one_caret() -> None:
    text = "let a\n"
    found = Diagnostic("c", "error", "m", Span("a.nodal", 5, 5))
    assert render([found], {"a.nodal": text}).splitlines() == [
        "a.nodal:1:6: error[c]: m", "    1 | let a", "      |      ^",
    ]  # fmt: skip


def test_a_span_over_lines_is_marked_to_the_end_of_its_first() -> None:
    assert shown("let a = (1 +\n  2)", "(1 +\n  2)")[1:] == ["    1 | let a = (1 +", "      |         ^^^^"]


def test_a_span_beyond_the_text_is_at_its_end() -> None:
    found = Diagnostic("c", "error", "m", Span("a.nodal", 50, 60))
    assert render([found], {"a.nodal": "ab"}).splitlines()[0] == "a.nodal:1:3: error[c]: m"


@pytest.mark.parametrize("before", [0, 10, 150, 1000])
@pytest.mark.parametrize("after", [0, 10, 150, 1000])
def test_long_lines_are_trimmed_around_the_place(before: int, after: int) -> None:
    text = "x" * before + "HERE" + "y" * after
    _, excerpt, carets = shown(text, "HERE")
    assert len(excerpt) <= 8 + 102
    at = excerpt.index("HERE")
    assert carets == "      | " + " " * (at - 8) + "^^^^"
    assert ("…" in excerpt) == (before + after + 4 > 100)


def test_a_long_span_is_marked_as_far_as_it_is_shown() -> None:
    _, excerpt, carets = shown("x" * 1000, "x" * 1000)
    assert len(carets) <= len(excerpt) <= 8 + 102


def test_related_places() -> None:
    text = "let a = 1\nlet a = 2\n"
    found = Diagnostic(
        "c", "error", "m", Span("a.nodal", 14, 15), "choose another", ((Span("a.nodal", 4, 5), "first here"),)
    )
    assert render([found], {"a.nodal": text}).splitlines() == [
        "a.nodal:2:5: error[c]: m",
        "    2 | let a = 2",
        "      |     ^",
        "   first here: a.nodal:1:5",
        "    1 | let a = 1",
        "      |     ^",
        "   help: choose another",
    ]


def test_without_a_place_and_without_a_text() -> None:
    assert render([Diagnostic("c", "warning", "m")], {}) == "warning[c]: m\n"
    assert render([Diagnostic("c", "note", "m", Span("b", 3, 4))], {}) == "b:1:1: note[c]: m\n"
    assert render([], {}) == ""


def test_sorted_by_place_and_told_once() -> None:
    text = "one two three"
    found = [finding(text, "three"), finding(text, "one"), finding(text, "three"), finding(text, "two")]
    places = [line for line in render(found, {"a.nodal": text}).splitlines() if line.startswith("a.nodal")]
    assert [line.split(":")[2] for line in places] == ["1", "5", "9"]
    assert [entry["start"] for entry in as_json(found, {"a.nodal": text})] == [[1, 1], [1, 5], [1, 9]]


def test_color_changes_nothing_but_color() -> None:
    text = "one two"
    plain = render([finding(text, "two")], {"a.nodal": text})
    colored = render([finding(text, "two")], {"a.nodal": text}, color=True)
    assert "\x1b[1;31m" in colored
    assert colored.replace("\x1b[1;31m", "").replace("\x1b[0m", "") == plain


def test_json() -> None:
    text = "a\r\nbc Ωd\r\n"
    assert as_json([finding(text, "Ωd", help="h"), Diagnostic("c", "note", "m")], {"a.nodal": text}) == [
        {
            "code": "c",
            "severity": "note",
            "path": None,
            "start": None,
            "end": None,
            "message": "m",
            "help": "",
        },
        {
            "code": "some-code",
            "severity": "error",
            "path": "a.nodal",
            "start": [2, 4],
            "end": [2, 6],
            "message": "it is wrong",
            "help": "h",
        },
    ]


@given(st.text(alphabet="ab\r\n\u2028Ω", max_size=40))
def test_positions_against_counting(text: str) -> None:
    lines = Lines(text)
    line, column = 1, 1
    for offset, char in enumerate(text):
        assert lines.position(offset) == (line, column)
        ends = char == "\n" or (char == "\r" and text[offset + 1 : offset + 2] != "\n")
        line, column = (line + 1, 1) if ends else (line, column + 1)
    assert lines.position(len(text)) == (line, column)


def test_the_table() -> None:
    assert len(BY_CODE) == len(TABLE), "a code stands in the table twice"
    for row in TABLE:
        assert row.code.replace("-", "").isalnum()
        assert row.code == row.code.lower()
        assert row.explanation
    with pytest.raises(KeyError):
        Collector().add("no-such-code", None)
