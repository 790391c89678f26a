"""The commands edge and poles."""

from __future__ import annotations

import csv
import io
import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import nodal
from nodal.report import edge as report
from nodal.report.terminal import Page

SECOND = """nodal 1
title "Two poles"
under test { source s: a to ground = 10 V behind 1 Ω -- 1 µH }
contact touch: a to ground
branch c: a to ground = 1 µF
reading out: a to ground times 2
"""
EDGE = "edge 100 ns over 40 µs\n"
"""ζ = 0.5, 10⁶ rad/s."""

TWO = """nodal 1
source s: a to ground = 1 V behind 1 Ω
source t: b to ground = 1 V behind 1 Ω
branch r: a to b = 1 Ω
reading out: a to ground
step over 1 µs
"""

CABLE = """nodal 1
source s: a to ground = 1 V behind 50 Ω
stock wire { impedance 50 Ω; velocity 0.66 }
cable line: a, ground to b, ground = 1 m of wire
branch load: b to ground = 50 Ω
reading out: b to ground
step over 100 ns
"""


class Runner:
    """Runs the command as a process would."""

    def __init__(self, folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
        self.folder, self.capsys = folder, capsys

    def __call__(self, *words: str, text: str = SECOND + EDGE) -> tuple[int, str, str]:
        from nodal.cli import main

        path = self.folder / "design.nodal"
        path.write_text(text, encoding="utf-8")
        with pytest.raises(SystemExit) as end:
            main([words[0], str(path), *words[1:]])
        out, err = self.capsys.readouterr()
        return int(end.value.code or 0), out, err


@pytest.fixture
def run(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> Runner:
    return Runner(tmp_path, capsys)


def test_json_is_the_contract(run: Runner) -> None:
    status, out, _ = run("edge", "--json", "--points", "60")
    answer: dict[str, Any] = json.loads(out)
    case = answer["cases"]["nominal"]
    assert status == 0
    assert list(answer) == ["format", "tool", "file", "cases"]
    assert list(case) == ["drive", "time_s", "readings", "contacts", "estimated_error"]
    assert list(case["contacts"]["touch"]) == ["loaded", "undisturbed"]
    assert 10 <= len(case["time_s"]) <= 60
    assert (case["time_s"][0], case["time_s"][-1]) == (0.0, 40e-6)
    # The amplitude counts, and so does `times`.
    assert case["readings"]["out"][-1] == pytest.approx(20.0, abs=1e-6)
    assert case["contacts"]["touch"]["undisturbed"][-1] == pytest.approx(10.0)
    assert case["estimated_error"] < 1e-9


def test_csv_has_a_column_a_curve(run: Runner) -> None:
    status, out, _ = run("edge", "--format", "csv", "--points", "30")
    rows = list(csv.reader(io.StringIO(out)))
    assert status == 0
    curves = ["reading.out_v", "contact.touch.loaded_v", "contact.touch.undisturbed_v"]
    assert rows[0] == ["case", "time_s", *curves]
    assert float(rows[-1][2]) == pytest.approx(2 * float(rows[-1][3]))


def test_text_shows_what_is_of_interest(run: Runner) -> None:
    status, out, _ = run("edge", "--step")
    assert status == 0
    assert "step over 40 µs" in out
    for word in ("10 %", "50 %", "90 %", "peak", "settled to 2 %", "undisturbed V", "loaded V"):
        assert word in out
    assert "overshoot(out)" in out
    assert "16.3 %" in out  # ζ = 0.5 (textbook)
    assert "1.638 µs" in out  # 1.63757294733/ω


def test_every_case_unless_some_are_chosen(run: Runner) -> None:
    text = SECOND + EDGE + "case slow { branch c: a to ground = 4 µF }\n"
    assert list(json.loads(run("edge", "--json", text=text)[1])["cases"]) == ["nominal", "slow"]
    assert list(json.loads(run("edge", "--json", "--case", "slow", text=text)[1])["cases"]) == ["slow"]


def test_options_take_the_place_of_the_file(run: Runner) -> None:
    _, out, _ = run("edge", "--edge", "1us", "--over", "5e-6", "--json", text=SECOND)
    assert json.loads(out)["cases"]["nominal"]["time_s"][-1] == 5e-6


@pytest.mark.parametrize(
    ("words", "text", "code"),
    [
        ((), SECOND, "no-edge"),
        (("--edge", "1ns"), SECOND, "no-edge"),
        (("--edge", "1 V"), SECOND + EDGE, "bad-edge"),
        (("--edge", "1ms"), SECOND + EDGE, "bad-edge"),
        (("--over", "0"), SECOND + EDGE, "bad-edge"),
        (("--edge", "1ns", "--step"), SECOND + EDGE, "wrong-call"),
        (("--case", "none"), SECOND + EDGE, "unknown-case"),
        (("--drive", "none"), SECOND + EDGE, "unknown-drive"),
        ((), TWO, "drive-needed"),
        # An inductor takes a step of current with an impulse of voltage.
        (("--step",), "nodal 1\nsource s: a to ground = 1 A\nbranch l: a to ground = 1 µH\n"
                      "reading out: a to ground\n" + EDGE, "no-solution"),
    ],
)  # fmt: skip
def test_what_is_wrong_is_said(run: Runner, words: tuple[str, ...], text: str, code: str) -> None:
    status, _, err = run("edge", *words, text=text)
    assert status == 2
    assert f"error[{code}]" in err


def test_poles_of_a_second_order_network(run: Runner) -> None:
    status, out, _ = run("poles", "--json")
    case = json.loads(out)["cases"]["nominal"]
    (pole,) = case["poles"]
    assert (status, case["stable"], case["zeros"]["out"]) == (0, True, [])
    assert pole["pair"]
    assert pole["damping_ratio"] == pytest.approx(0.5, rel=1e-9)
    assert pole["natural_frequency_hz"] == pytest.approx(1e6 / (2 * np.pi), rel=1e-9)
    assert pole["time_constant_s"] == pytest.approx(2e-6, rel=1e-9)


def test_poles_and_zeros_of_a_twin_t() -> None:
    """(s² + 1)/(s² + 4 s + 1) with a third pair that cancels (Tuttle 1940)."""
    found = (
        nodal.loads(
            "nodal 1\nsource s: a to ground = 1 V\nbranch r1: a to x = 1 Ω\nbranch r2: x to b = 1 Ω\n"
            "branch c3: x to ground = 2 F\nbranch c1: a to y = 1 F\nbranch c2: y to b = 1 F\n"
            "branch r3: y to ground = 0.5 Ω\nreading out: b to ground"
        )
        .network()
        .poles()
    )
    assert [p.s for p in found.poles] == pytest.approx([-2 + 3**0.5, -1, -2 - 3**0.5], rel=1e-12)
    assert [p.s for p in found.cancelled["out"]] == pytest.approx([-1])
    zero = next(root for root in found.zeros["out"] or () if root.pair)
    assert (zero.s.imag, zero.damping) == (pytest.approx(1.0), 0.0)


def test_an_unstable_pole_is_flagged(run: Runner) -> None:
    text = """nodal 1
source s: a to ground = 1 V behind 1 kΩ
branch c: a to ground = 1 nF
amplifier grows: a, ground to b, ground { gain 3 }
branch back: b to a = 1 kΩ
reading out: b to ground
"""
    status, out, _ = run("poles", text=text)
    assert status == 0
    assert "unstable" in out
    # (2 - 3)/RC
    assert json.loads(run("poles", "--json", text=text)[1])["cases"]["nominal"]["poles"][0][
        "time_constant_s"
    ] == pytest.approx(-1e-6)


def test_cables_have_no_poles_unless_lumped(run: Runner) -> None:
    status, _, err = run("poles", text=CABLE)
    assert status == 2
    assert "error[no-poles]" in err
    assert "line" in err
    status, out, _ = run("poles", "--lumped", text=CABLE)
    assert status == 0
    assert "no more than a guide" in out


def test_a_model_has_edges_and_poles() -> None:
    model = nodal.loads(SECOND + EDGE).network()
    found = model.edge()
    assert found.readings["out"]([0.0, 40e-6]) == pytest.approx([0.0, 20.0], abs=1e-6)
    assert model.edge(ramp=0.0).stimulus.ramp == 0.0
    assert len(model.poles().poles) == 1


def test_columns_stay_within_the_page() -> None:
    model = nodal.loads(SECOND + EDGE).network()
    page = Page(60)
    report.edge_text(page, "nominal", "", report.answer(model.response, "s", None, text=True))
    assert max(map(len, page.text().splitlines())) <= 60
