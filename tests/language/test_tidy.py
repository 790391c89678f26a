"""The canonical text: what it looks like, and that it says what the text said, comments and all."""

from __future__ import annotations

import random
import re
from itertools import pairwise
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from support.texts import ROOT, read_all

from nodal.language.diagnostics import Collector, DesignError
from nodal.language.lexing import Lexeme
from nodal.language.parse import parse_with_lexemes
from nodal.language.tidy import WIDTH, tidy
from nodal.language.units import UNITS
from nodal.strategies import EVERY, texts

CIRCUITS = sorted((ROOT / "circuits").rglob("*.nodal"))
SOURCES = [*CIRCUITS, ROOT / "tests" / "editor" / "every_statement.nodal"]

PAIRS = {
    "spaces": (
        "let  a=2*( lead+1 mm )/pi\nlet b =-a- -3pF",
        "let a = 2 * (lead + 1 mm) / pi\nlet b = -a - -3 pF\n",
    ),
    "commas and colons": (
        "cable c:a ,b to c , d=1m of x\nlet r=wire (1 m,2 mm)",
        "cable c: a, b to c, d = 1 m of x\nlet r = wire(1 m, 2 mm)\n",
    ),
    "words before a parenthesis": (
        "sweep(1 Hz)to (2 Hz),(3)per decade\nstock s{capacitance(1 pF/m)}",
        "sweep (1 Hz) to (2 Hz), (3) per decade\nstock s { capacitance (1 pF/m) }\n",
    ),
    "a field's sign": (
        "amplifier a: b, c to d, e{gain-2;poles 1MHz,2MHz q 0.7}",
        "amplifier a: b, c to d, e { gain -2; poles 1 MHz, 2 MHz q 0.7 }\n",
    ),
    "a code": ("allow single - part -node:x", "allow single-part-node: x\n"),
    "one statement a line": ("let a = 1;let b = 2 ; ;\nlet c = 3;", "let a = 1\nlet b = 2\nlet c = 3\n"),
    "units": (
        "let a = 1kohm\nlet b = 3e-1uF\nlet c = 1\u2126\nlet d = 1 \u03bcF\nlet e = 2as",
        "let a = 1 kΩ\nlet b = 3e-1 µF\nlet c = 1 Ω\nlet d = 1 µF\nlet e = 2as\n",
    ),
    "signs where the file uses them": (
        "let a = 1 Ω ± 1 % || 2 ohm +- 2 % -- 3 uohm",
        "let a = 1 Ω ± 1 % || 2 Ω ± 2 % -- 3 uΩ\n",
    ),
    "the parallel sign": ("let a = 1 ohm ∥ 2 ohm || 3 ohm", "let a = 1 ohm ∥ 2 ohm ∥ 3 ohm\n"),
    "degrees and roots": (
        "temperature 20 degC\nrequire x: phase(r) at 1 Hz <= 1 deg\nlet y = 0 °C\nlet z = 1 nV/rtHz",
        "temperature 20 °C\nrequire x: phase(r) at 1 Hz <= 1 °\nlet y = 0 °C\nlet z = 1 nV/rtHz\n",
    ),
    "none of them": ("let a = 1 kohm||2 uohm+-1 %", "let a = 1 kohm || 2 uohm +- 1 %\n"),
    "texts and comments stay": (
        'title   "a  \u2126; b"#c ||\u2126 \t\n# 1 uF +- 1',
        'title "a  \u2126; b"  #c ||\u2126\n# 1 uF +- 1\n',
    ),
    "signs in comments and texts do not count": (
        'title "1 Ω ∥ 2 Ω" # ±\nlet a = 1 ohm || 2 ohm +- 1 %',
        'title "1 Ω ∥ 2 Ω"  # ±\nlet a = 1 ohm || 2 ohm +- 1 %\n',
    ),
    "blocks": (
        "case a{let b=1\nomit c}\ncase d{let b=1;omit c}\ncase e{ }\ncase f{\n}",
        "case a {\n  let b = 1\n  omit c\n}\ncase d { let b = 1; omit c }\ncase e {}\ncase f {}\n",
    ),
    "blocks in blocks": (
        "case a{amplifier b:c,d to e,f{gain 1;output 50 ohm}\nomit c}\ncase b{stock s{loss 1};omit c}",
        "case a {\n  amplifier b: c, d to e, f { gain 1; output 50 ohm }\n  omit c\n}\n"
        "case b { stock s { loss 1 }; omit c }\n",
    ),
    "empty lines": (
        "\n\nlet a = 1\n\n\n\nlet b = 2\ncase c {\n\n  omit d\n\n\n  omit e\n\n}\n\n\n",
        "let a = 1\n\nlet b = 2\ncase c {\n  omit d\n\n  omit e\n}\n",
    ),
    "comments on their own": (
        "   # first\n\n\n# second\nlet a = 1\ncase c {\n# inside\n\n"
        "    # still\nomit d\n      # last\n\n}\n # end",
        "# first\n\n# second\nlet a = 1\ncase c {\n  # inside\n\n  # still\n  omit d\n  # last\n}\n# end\n",
    ),
    "a comment behind code": (
        "let a = 1 # one\ncase c { # two\n  omit d;   # three\n}# four\ncase e { omit f } # five",
        "let a = 1          # one\ncase c {           # two\n  omit d           # three\n"
        "}                  # four\ncase e { omit f }  # five\n",
    ),
    "a comment in an empty block": (
        "case a {# why\n}\ncase b {\n#why\n}",
        "case a {  # why\n}\ncase b {\n  #why\n}\n",
    ),
    "a line break inside a statement": (
        "place p: leg(a to b,\nc with d; r = 3,\n\n\n # why\ns = (4 +\n5)\n)\nlet x =\n1 mm",
        "place p: leg(a to b,\n    c with d; r = 3,\n    # why\n    s = (4 +\n        5)\n)\n"
        "let x =\n    1 mm\n",
    ),
    "a broken header": (
        "assembly q(a to b\n; p\n){\nbranch c: a to\tb = p }",
        "assembly q(a to b\n    ; p\n) {\n  branch c: a to b = p\n}\n",
    ),
}


def of(text: str) -> str:
    """Tidied, behind a version that is not part of what is compared."""
    head, newline, rest = tidy(f"nodal 1\n{text}").partition("\n")
    assert (head, newline) == ("nodal 1", "\n")
    return rest.removeprefix("\n") if text.startswith("\n") else rest


@pytest.mark.parametrize("name", PAIRS)
def test_canonical_text(name: str) -> None:
    written, canonical = PAIRS[name]
    assert of(written) == canonical
    assert of(canonical) == canonical


def test_a_block_too_wide_for_a_line_is_broken() -> None:
    fits = "case c { let a = 1; let bb = " + "1 + " * 20 + "1 }\n"
    assert len(fits) - 1 <= WIDTH
    assert of(fits) == fits
    long = fits.replace("bb", "b" * (WIDTH - len(fits) + 3))
    assert len(long) - 1 == WIDTH
    assert of(long) == long
    assert of(long.replace("bb", "bbb", 1)).count("\n") == 4


class TestComments:
    def test_a_shared_column_stays(self) -> None:
        text = "let a = 1           # one\n\nlet c = 2 mm        # two\n"
        assert of(text) == text

    def test_a_lone_column_does_not(self) -> None:
        assert of("let a = 1           # one\n\nlet c = 2 mm         # two\n") == (
            "let a = 1  # one\n\nlet c = 2 mm  # two\n"
        )

    def test_a_line_too_long_for_the_column_moves_its_run_alone(self) -> None:
        text = "let a = 1   # one\nlet c=2+2+2 # two\n\nlet d = 1   # three\nlet e = 2   # four\n"
        assert of(text) == (
            "let a = 1          # one\nlet c = 2 + 2 + 2  # two\n\nlet d = 1   # three\nlet e = 2   # four\n"
        )

    def test_a_new_line_joins_the_column_of_its_run(self) -> None:
        text = "let a = 1        # one\nlet b = 1        # two\nlet c = 1 # three\n"
        assert of(text) == "let a = 1        # one\nlet b = 1        # two\nlet c = 1        # three\n"

    def test_the_column_that_most_stand_in_wins(self) -> None:
        text = "let a = 1     # one\nlet b = 1     # two\nlet c = 1   # three\n\nlet d = 1   # four\n"
        assert of(text) == text.replace("   # three", "     # three").replace("   # four", "  # four")

    def test_columns_are_those_that_an_editor_shows(self) -> None:
        assert of("let a = 1\t# one\nlet bcd = 1\t# two\n") == (
            "let a = 1       # one\nlet bcd = 1     # two\n"
        )
        marked = "\ufeffnodal 1      # one\nlet a = 1    # two\n"
        assert tidy(marked) == marked.removeprefix("\ufeff")

    def test_a_comment_may_go_on_in_its_column(self) -> None:
        text = "let  a = 1 # one that is\n           # long\n# not this\nlet b = 2\n"
        assert of(text) == "let a = 1  # one that is\n           # long\n# not this\nlet b = 2\n"


def test_the_example_of_the_reference() -> None:
    reference = (ROOT / "grammar" / "LANGUAGE.md").read_text(encoding="utf-8")
    example = re.search(
        r"Written like this:\n\n```nodal\n(.*?)```\n\nit becomes:\n\n```nodal\n(.*?)```", reference, re.S
    )
    assert example
    assert tidy(example[1]) == example[2]


def test_line_ends_and_marks() -> None:
    assert tidy("\ufeffnodal 1\r\nlet  a = 1 # one\r\n") == "nodal 1\r\nlet a = 1  # one\r\n"
    assert tidy("nodal 1\nlet a = 1\r\nlet b = 2\r") == "nodal 1\nlet a = 1\nlet b = 2\n"
    assert tidy("nodal 1\rlet a = 1\r") == "nodal 1\nlet a = 1\n"
    assert tidy("nodal 1") == "nodal 1\n"


def test_a_text_with_errors_is_refused_with_all_of_them() -> None:
    with pytest.raises(DesignError) as refused:
        tidy("nodal 1\nlet a = 9 M\nbranch b: c to = 1 ohm\n", "x.nodal")
    assert [found.code for found in refused.value.diagnostics] == ["missing-unit", "syntax"]
    assert refused.value.sources["x.nodal"].startswith("nodal 1")


def test_a_text_that_would_grow_beyond_the_limit_is_refused() -> None:
    with pytest.raises(DesignError) as refused:
        tidy("nodal 1\n" + "case c {" * 99 + "let a = 1;" * 12000 + "}" * 99, "x.nodal")
    assert [found.code for found in refused.value.diagnostics] == ["too-long"]
    assert "canonical form" in refused.value.diagnostics[0].message


def test_names_and_includes_need_not_be_known() -> None:
    text = 'nodal 1\ninclude "nowhere.nodal"\nbranch a: b to c = unknown\n'
    assert tidy(text) == text


def test_every_unit_in_every_spelling() -> None:
    ascii_only = {"Ω": "ohm", "µ": "u", "°": "deg", "√": "rt"}
    plain = []
    for unit in UNITS:
        for sign, spelling in ascii_only.items():
            unit = unit.replace(sign, spelling)
        plain.append(unit)
    text = "nodal 1\n" + "".join(f"let x{i} = 1{unit}\n" for i, unit in enumerate(plain))
    same = [line.split(" = 1")[1].strip() for line in tidy(text).splitlines()[1:]]
    assert same == plain
    signed = tidy(text + "let a = 1 Ω\nlet b = 1 µV\nlet c = 1 °C\nlet d = 1 V/√Hz\n")
    canonical = [line.split(" = 1")[1].strip() for line in signed.splitlines()[1:-4]]
    assert canonical == list(UNITS)


# Laws


def lexed(text: str) -> list[Lexeme]:
    collector = Collector()
    lexemes = parse_with_lexemes(text, "test.nodal", collector)[1]
    assert not collector.failed, collector.found
    return lexemes


def comments(text: str) -> list[tuple[str, int, bool]]:
    """Each comment with the number of lexemes before it, and whether it stands behind code."""
    solid = [lexeme for lexeme in lexed(text) if lexeme.type != "END"]
    found = []
    bounds = [(0, 0), *((lexeme.span.start, lexeme.span.end) for lexeme in solid), (len(text), len(text))]
    for count, ((_, start), (end, _)) in enumerate(pairwise(bounds)):
        for number, line in enumerate(text[start:end].replace("\r\n", "\n").replace("\r", "\n").split("\n")):
            if "#" in line:
                behind = number == 0 and count > 0
                found.append((line[line.index("#") :].rstrip(" \t\u00a0"), count, behind))
    return found


def check_laws(text: str) -> None:
    once = tidy(text)
    assert tidy(once) == once
    tree, found = read_all(once)
    assert found == []
    assert tree == read_all(text)[0]
    assert comments(once) == comments(text)
    lines = once.split("\n")
    assert lines.pop() == ""
    for line in lines:
        assert line == line.rstrip(" \t\u00a0")
        assert "\t" not in line.partition("#")[0].partition('"')[0]
    assert "\n\n\n" not in once


@pytest.mark.parametrize("path", SOURCES, ids=lambda path: path.stem)
def test_laws_over_files(path: Path) -> None:
    check_laws(path.read_text(encoding="utf-8"))


@pytest.mark.parametrize("path", CIRCUITS, ids=lambda path: path.stem)
def test_shipped_circuits_are_tidy(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    assert tidy(text, str(path)) == text


SPACE = [" ", "  ", "\t", "\u00a0", "   "]
TIGHT = {"LPAR", "RPAR", "LBRACE", "RBRACE", "COLON", "SEMICOLON"}
GOES_ON = {"COMMA", "COLON", "EQUAL", "PARALLEL", "SERIES", "PLUS_MINUS", "PLUS", "MINUS", "STAR", "SLASH",
           "AT_MOST", "AT_LEAST", "LPAR"}  # fmt: skip
ASCII = {"∥": "||", "±": "+-", "Ω": "ohm", "µ": "u", "°": "deg", "√": "rt"}


SEEDS = st.integers(0, 2**32).map(random.Random)


def respaced(text: str, chance: random.Random) -> str:
    """The same statements with other spaces, line breaks, spellings and more comments."""
    lexemes, written, depth, count = lexed(text), [], 0, 0
    spellings = {sign: chance.choice((sign, other, None)) for sign, other in ASCII.items()}

    def comment() -> str:
        nonlocal count
        count += 1
        return f"#{chance.choice(SPACE)}{count}{chance.choice(('', ' ||', ' 1 Ω;', ' {', ' ', chr(9)))}"

    def line_end() -> str:
        end = chance.choice(("", "", " ", "\t")) + (comment() if chance.random() < 0.3 else "") + "\n"
        while chance.random() < 0.25:
            end += chance.choice(SPACE) * chance.randrange(2)
            end += comment() * (chance.random() < 0.5) + "\n"
        return end + chance.choice(("", "", "  ", "\t", "          "))

    for lexeme, after in zip(lexemes, [*lexemes[1:], None], strict=True):
        kind = lexeme.type
        if kind == "END":
            closing = after is None or after.type in ("END", "RBRACE")
            written.append(
                line_end() if closing or chance.random() < 0.7 else chance.choice((";", " ; ", ";;"))
            )
            continue
        word = text[lexeme.span.start : lexeme.span.end]
        if kind in ("PARALLEL", "PLUS_MINUS", "NUMBER"):
            for sign, other in spellings.items():
                chosen = other if other is not None else chance.choice((sign, ASCII[sign]))
                word = word.replace(sign, chosen)
            if kind == "NUMBER" and lexeme.unit and lexeme.unit != "as":
                word = word.replace(" ", chance.choice(("", " ", "  ")))
        written.append(word)
        depth += (kind == "LPAR") - (kind == "RPAR")
        if after is None or after.type == "END":
            continue
        may_break = depth > 0 or kind in GOES_ON or kind == "LBRACE" or after.type == "RBRACE"
        if may_break and chance.random() < 0.15:
            written.append(line_end())
        elif (kind in TIGHT or after.type in TIGHT | {"COMMA"}) and kind != "COMMA" and chance.random() < 0.5:
            pass
        else:
            written.append(chance.choice(SPACE))
    return "".join(written) + line_end() * (chance.random() < 0.5)


@pytest.mark.parametrize("path", SOURCES, ids=lambda path: path.stem)
@settings(max_examples=12)
@given(SEEDS)
def test_laws_over_respaced_files(path: Path, chance: random.Random) -> None:
    text = path.read_text(encoding="utf-8")
    variant = respaced(text, chance)
    assert variant != text
    assert read_all(variant)[0] == read_all(text)[0]
    check_laws(variant)


@given(texts(EVERY), SEEDS)
def test_laws_over_random_networks(text: str, chance: random.Random) -> None:
    check_laws(respaced(text, chance))
