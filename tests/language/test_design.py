"""The facade: everything wrong is said at once; cases, values from outside and curves from Python."""

from __future__ import annotations

import numpy as np
import pytest

import nodal
from nodal.language.codes.meaning import MEANING

DIVIDER = """nodal 1
title "Divider"
let top = 9 MΩ
source s: tip to ground = 1 V
branch upper: tip to plug = top
branch lower: plug to ground = 1 MΩ
reading m: plug to ground times 10
case half { let top = 1 MΩ }
"""


def codes(text: str, **lets: float | str) -> list[str]:
    with pytest.raises(nodal.DesignError) as caught:
        nodal.loads(text).network(**lets)
    return [finding.code for finding in caught.value.diagnostics]


@pytest.mark.parametrize(
    ("code", "text"),
    [(row.code, text) for row in MEANING for text in row.examples],
    ids=[f"{row.code}-{number}" for row in MEANING for number, _ in enumerate(row.examples)],
)
def test_every_example_of_the_table_raises_its_code(code: str, text: str) -> None:
    try:
        found = nodal.loads(text).diagnostics
    except nodal.DesignError as error:
        found = error.diagnostics
    assert code in [finding.code for finding in found]


def test_divider_by_hand() -> None:
    design = nodal.loads(DIVIDER)
    assert design.title == "Divider"
    assert design.cases == ("nominal", "half")
    assert design.diagnostics == []
    frequencies = np.array([0.0, 1e3])
    # 1/(9 + 1) and 1/(1 + 1), times 10: Ohm's law.
    np.testing.assert_allclose(design.network().sweep(frequencies).reading("m"), 1.0, rtol=1e-12)
    np.testing.assert_allclose(design.network("half").sweep(frequencies).reading("m"), 5.0, rtol=1e-12)
    np.testing.assert_allclose(design.network().sweep(frequencies).impedance("s"), 10e6, rtol=1e-12)


def test_values_from_outside_win_over_file_and_case() -> None:
    design = nodal.loads(DIVIDER)
    for given in (4e6, "4 MΩ", "4e3 kohm"):
        model = design.network("half", top=given)
        np.testing.assert_allclose(model.sweep([1.0]).reading("m"), 10 / 5, rtol=1e-12)
    assert codes(DIVIDER, top="4 pF") == ["wrong-dimension"]
    assert codes(DIVIDER, top="4 MΩ\nbranch x: tip to ground = 1 Ω") == ["override-form"]
    assert codes(DIVIDER, top=float("nan")) == ["override-form"]
    assert codes(DIVIDER, tpo=1.0) == ["unknown-let"]


def test_mistakes_of_every_case_and_of_the_text_are_said_together_and_once() -> None:
    text = DIVIDER + "case a { branch upper: tip to plug = 1 V }\n"
    text += "branch w: tip to plug = 1 pF + 1 Ω\nbrnach x\n"
    found = codes(text)
    assert sorted(found) == ["unknown-statement", "wrong-dimension", "wrong-dimension"]


def test_what_nothing_uses_is_warned_of_and_can_be_allowed() -> None:
    idle = DIVIDER + "let spare = 3\nstock k { capacitance 1 pF/m }\ncase x { let topp = 3 MΩ }\n"
    assert [(f.code, f.name) for f in nodal.loads(idle).diagnostics] == [
        ("unused-let", "spare"),
        ("unused-stock", "k"),
        ("unused-let", "topp"),
    ]
    allowed = idle + "allow unused-let: spare\nallow unused-stock: k\n"
    assert [f.name for f in nodal.loads(allowed).diagnostics] == ["topp"]


def test_a_stock_that_nothing_is_cut_from_is_looked_at() -> None:
    idle = DIVIDER + "let per = 1 pF/m\nstock k { capacitance 2 * per; inductance 1 pF/m; speed 3 }\n"
    assert sorted(codes(idle)) == ["unknown-name", "wrong-dimension"]
    right = idle.replace("inductance 1 pF/m; speed 3", "inductance 1 nH/m")
    assert [f.name for f in nodal.loads(right).diagnostics] == ["per", "k"]


def test_values_from_outside_are_warned_of_too() -> None:
    """What they make of the connections and of tolerances; what the file has already is not repeated."""
    text = DIVIDER.replace("9 MΩ", "9 MΩ ± 1 %").replace("plug = top", "plug = top ∥ 9 MΩ") + "let idle = 1\n"
    design = nodal.loads(text)
    assert [f.code for f in design.diagnostics] == ["unused-let"]
    assert design.network(top=1e6).diagnostics == ()
    assert [f.code for f in design.network(top="0 Ω").diagnostics] == ["shorted-part"]
    (wide,) = design.network(top="1 MΩ ± 2 MΩ").diagnostics
    assert (wide.code, wide.name) == ("spread-below-zero", "upper.R1")
    assert "-1 MΩ" in wide.message
    allowed = nodal.loads(text + "allow spread-below-zero: upper.R1\n")
    assert allowed.network(top="1 MΩ ± 2 MΩ").diagnostics == ()


def test_spread_below_zero_is_said_once_for_all_sections() -> None:
    text = (
        DIVIDER
        + """assembly x(p to q; c) { branch b: p to q = c }
    chain w: 9 of x(tip to plug; c = 1 Ω ± 3 Ω)
    branch even: tip to plug = 1 pF ± 1 pF ∥ 1 pF ± 100 % with k = 2
    """
    )
    assert [f.code for f in nodal.loads(text).diagnostics] == ["spread-below-zero"]


STUB = """assembly stub(p to q) {
  branch open: p to x = 1 Ω
  branch short: q to q = 1 Ω; branch on: p to q = 1 Ω
}
assembly pair(p to q) { chain u: 2 of stub(p to q) }
chain many: 4 of pair(tip to plug)
"""


def test_connections_inside_show_the_places_of_use_once_for_all_sections() -> None:
    text = DIVIDER + STUB
    found = nodal.loads(text).diagnostics
    assert [f.code for f in found] == ["dangling-node", "shorted-part"]
    for finding, inside in zip(found, ("x = 1 Ω", "1 Ω; branch on"), strict=True):
        assert finding.span is not None
        assert text[finding.span.start :].startswith(inside)
        (inner, said), (outer, said_outer) = finding.related
        assert text[inner.start : inner.end] == "stub(p to q)"
        assert text[outer.start : outer.end] == "pair(tip to plug)"
        assert (said, said_outer) == ("used here as many.u", "used here as many; the same in 8 sections")


@pytest.mark.parametrize("name", ["many.u.x", "many.1.u.1.x", "many.3.u.2.x"])
def test_allow_in_one_section_holds_for_all(name: str) -> None:
    text = DIVIDER + STUB + f"allow dangling-node: {name}\nallow shorted-part: many.u.short.R\n"
    assert nodal.loads(text).diagnostics == []
    assert len(nodal.loads(text.replace("many.u.short", "many.short")).diagnostics) == 1


def test_couplings_inside_show_the_place_of_use() -> None:
    text = (
        DIVIDER
        + """assembly x(p to q) { branch a: p to q = 1 Ω; coupling k: a with a = 0.1 }
    chain c: 3 of x(tip to plug)
    """
    )
    with pytest.raises(nodal.DesignError) as caught:
        nodal.loads(text)
    (finding,) = caught.value.diagnostics
    assert [said for _, said in finding.related] == ["used here as c"]


def test_unknown_cases_and_drives() -> None:
    design = nodal.loads(DIVIDER + "source t: tap to ground = 1 V\nbranch u: tap to plug = 1 MΩ\n")
    with pytest.raises(KeyError, match="half"):
        design.network("hlaf")
    with pytest.raises(ValueError, match="s, t"):
        design.network().sweep([1.0])
    with pytest.raises(KeyError, match="drive"):
        design.network().sweep([1.0], drive="q")


def test_unknown_names_and_frequencies_of_a_sweep_are_told():
    model = nodal.loads("nodal 1\nsource s: tip to ground = 1 V\nreading screen: tip to ground\n").network()
    sweep = model.sweep([1.0])
    assert len(repr(model)) < 100
    assert len(repr(sweep)) < 200
    for ask in (lambda: sweep.reading("scren"), lambda: sweep.voltage("tp"), lambda: sweep.impedance("ss")):
        with pytest.raises(KeyError, match=r"no .* '.*'; "):
            ask()
    for wrong in (-1.0, float("nan"), float("inf")):
        with pytest.raises(ValueError, match="zero or more"):
            model.sweep([1.0, wrong])
