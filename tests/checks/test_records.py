"""Records: lines that hold stay, lines that moved say so, and what people wrote in between survives."""

from __future__ import annotations

import json
import math
import tomllib
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st
from quantiphy import Quantity

import nodal
from nodal import records
from nodal.checks import Checks
from nodal.measured import Measured, measure

ROOT = Path(__file__).parents[2]

FIGURES = {
    "nominal": {
        "gain(m) at 0 Hz": Measured(0.999969298942, "", floor=1e-14),
        "bandwidth(m)": Measured(167265712.76122975, "Hz"),
        "noise(m)": Measured(1.19601076140593e-4, "V"),
        "impedance(t) at 1 GHz": Measured(1641.633851234, "Ω"),
        "impedance(t) at 10 MHz": Measured(1866.0, "Ω"),
        "impedance(t) at 100 kHz": Measured(186604.5, "Ω"),
        "resistance(t) at 0 Hz": Measured(math.inf, "Ω"),
    },
    "bare": {"bandwidth(m)": Measured(1e9, "Hz", ">="), "peaking(m)": Measured(6.7e-16, "", floor=1e-9)},
}
TEXT = """\
# Figures of probe.nodal: `nodal record` writes them, `nodal check` compares with them.
# A line may carry a tolerance of its own, "1.5 MHz ± 2 %"; [tolerance] has some for many: "noise(*)" = "1 %".
format = 1

[tolerance]

[case.nominal]
"bandwidth(m)" = "167.265713 MHz"
"gain(m) at 0 Hz" = "0.999969299"
"impedance(t) at 100 kHz" = "186.6045 kΩ"
"impedance(t) at 10 MHz" = "1.866 kΩ"
"impedance(t) at 1 GHz" = "1.64163385 kΩ"
"noise(m)" = "119.601076 µV"
"resistance(t) at 0 Hz" = "∞ Ω"

[case.bare]
"bandwidth(m)" = ">= 1 GHz"
"peaking(m)" = "0"
"""
PATH = "probe.figures.toml"


def changed(case: str, figure: str, value: Measured | None, base=FIGURES):
    """The figures with one of them changed, or gone."""
    figures = {name: dict(inside) for name, inside in base.items()}
    if value is None:
        del figures[case][figure]
    else:
        figures[case][figure] = value
    return figures


def update(text: str, figures) -> str:
    return records.update(records.parse(text, PATH), figures, "probe.nodal")


def compare(text: str, figures) -> list[records.Change]:
    return records.compare(records.parse(text, PATH), figures)


# Writing


def test_a_new_record() -> None:
    assert records.update(None, FIGURES, "probe.nodal") == TEXT
    assert compare(TEXT, FIGURES) == []
    assert update(TEXT, FIGURES) == TEXT


def test_a_record_of_a_design_is_toml_with_its_figures() -> None:
    """Read by other means: tomllib for the file, the quantity library for values, the facade for figures."""
    path = ROOT / "circuits" / "bench_probe.nodal"
    design = nodal.load(str(path))
    text = records.update(None, measure(Checks(design)), path.name)
    cases = tomllib.loads(text)["case"]
    assert list(cases) == ["nominal", "long_clip", "spring_tip"]
    for case in cases:
        model = design.network(case)
        assert float(Quantity(cases[case]["gain(screen) at 0 Hz"])) == pytest.approx(
            abs(model.sweep([0.0]).reading("screen")[0]), rel=1e-8
        )
        shown = float(Quantity(cases[case]["impedance(touch) at 10 MHz"]))
        assert shown == pytest.approx(abs(model.sweep([1e7]).impedance("touch")[0]), rel=1e-8)
        edge = float(Quantity(cases[case]["bandwidth(screen)"]))
        low, at_edge = abs(model.sweep([10.0, edge]).reading("screen"))
        assert at_edge / low == pytest.approx(math.sqrt(0.5), rel=1e-8)


def test_lines_that_hold_are_kept_byte_for_byte() -> None:
    odd = TEXT.replace('"bandwidth(m)" = "167.265713 MHz"', '  "bandwidth(m)"="0.1672657130 GHz"   # odd')
    nearly = changed("nominal", "bandwidth(m)", Measured(167265712.76 * (1 + 0.9e-6), "Hz"))
    assert update(odd, nearly) == odd
    moved = changed("nominal", "bandwidth(m)", Measured(167265712.76 * (1 + 1.1e-6), "Hz"))
    assert update(odd, moved) == odd.replace("0.1672657130 GHz", "167.265897 MHz")


def test_a_moved_line_keeps_its_tolerance_and_comment() -> None:
    kept = TEXT.replace('"167.265713 MHz"', '"167.265713 MHz ± 1 %"  # see the note of May')
    assert update(kept, changed("nominal", "bandwidth(m)", Measured(168.9e6, "Hz"))) == kept
    moved = update(kept, changed("nominal", "bandwidth(m)", Measured(169e6, "Hz")))
    assert moved == kept.replace("167.265713 MHz", "169 MHz")


def test_new_figures_take_their_place_and_stale_ones_go() -> None:
    noted = TEXT.replace('"noise(m)"', '# The floor of the instrument.\n"noise(m)"')
    more = changed("nominal", "impedance(t) at 20 MHz", Measured(900.0, "Ω"))
    more["nominal"]["mean(m)"] = Measured(1.0, "V")
    del more["nominal"]["noise(m)"]
    assert update(noted, more) == noted.replace(
        '"impedance(t) at 1 GHz"', '"impedance(t) at 20 MHz" = "900 Ω"\n"impedance(t) at 1 GHz"'
    ).replace(
        '# The floor of the instrument.\n"noise(m)" = "119.601076 µV"\n',
        '"mean(m)" = "1 V"\n# The floor of the instrument.\n',
    )


def test_cases_come_and_go() -> None:
    without = {"nominal": FIGURES["nominal"]}
    assert update(TEXT, without) == TEXT[: TEXT.index("\n[case.bare]")]
    assert update(TEXT[: TEXT.index("\n[case.bare]")], FIGURES) == TEXT
    first = {**FIGURES, "again": {"noise(m)": Measured(1e-3, "V")}}
    table = '[case.again]\n"noise(m)" = "1 mV"\n\n[case.bare]'
    assert update(TEXT, first) == TEXT.replace("[case.bare]", table)
    noted = TEXT + "# Bare, as delivered.\n"
    assert "[case.bare]\n# Bare, as delivered.\n" in update(noted, without)


def test_line_ends_of_another_system_stay() -> None:
    windows = TEXT.replace("\n", "\r\n")
    more = changed("bare", "noise(m)", Measured(1e-3, "V"))
    assert update(windows, FIGURES) == windows
    assert update(windows, more) == update(TEXT, more).replace("\n", "\r\n")


_LABELS = st.builds(
    lambda figure, rest: f"{figure}(m){rest}", st.sampled_from(["gain", "noise", "phase", "error"]),
    st.sampled_from(["", " at 0 Hz", " at 1 kHz", " at 20 MHz", " at 3 mHz", " from 0 Hz to 1 MHz"]),
)  # fmt: skip
_MEASURED = st.builds(
    Measured,
    st.floats(allow_nan=False) | st.sampled_from([math.inf, -math.inf, 0.0, -0.0]),
    st.sampled_from(["", "Hz", "V", "V/√Hz", "°", "A/V", "V/A", "Ω", "s"]),
    st.sampled_from([None, None, None, ">=", "<="]),
    st.sampled_from([0.0, 1e-9, 1e-15]),
).filter(lambda m: m.bound is None or (math.isfinite(m.value) and m.value > 0.0))
_DESIGNS = st.dictionaries(st.sampled_from(["nominal", "a", "b"]), st.dictionaries(_LABELS, _MEASURED))


@given(_DESIGNS, _DESIGNS, st.data())
def test_what_was_written_holds(first, second, data) -> None:
    """Law: a record brought up to date holds, bringing it up to date again changes nothing, and comments
    put anywhere in it survive another design's figures."""
    text = records.update(None, first, "x.nodal")
    assert records.compare(records.parse(text, PATH), first) == []
    lines = text.splitlines(keepends=True)
    place = data.draw(st.integers(0, len(lines)))
    text = "".join([*lines[:place], "# by hand\n", *lines[place:]])
    assert update(text, first) == text
    later = update(text, second)
    assert records.compare(records.parse(later, PATH), second) == []
    assert update(later, second) == later
    assert later.count("# by hand\n") == 1
    tables = tomllib.loads(later).get("case", {})
    written = {case: set(figures) for case, figures in tables.items() if figures}
    assert written == {case: set(figures) for case, figures in second.items() if figures}


@given(st.floats(min_value=1e-30, max_value=1e30), st.sampled_from(["Hz", "Ω", "", "V/√Hz", "°"]))
def test_nine_digits(value: float, unit: str) -> None:
    """What is written is the value to nine significant digits, as the quantity library reads it."""
    text = records.value_text(Measured(value, unit))
    number = float(Quantity(text.removesuffix("/√Hz"))) if unit != "°" else float(text.removesuffix(" °"))
    assert number == pytest.approx(value, rel=5.01e-9)
    assert len(text.split(" ")[0].partition("e")[0].replace(".", "").lstrip("0")) <= 9


@pytest.mark.parametrize(
    ("value", "floor", "text"),
    [(6.7e-16, 1e-9, "0"), (-3.0701057416e-5, 1e-9, "-3.0701e-05"), (-0.0, 0.0, "0"),
     (0.00086511120644, 1e-9, "0.000865111"), (0.5, 1e-9, "0.5"), (1.23456789012, 1e-9, "1.23456789")],
)  # fmt: skip
def test_rounding_is_not_written(value: float, floor: float, text: str) -> None:
    assert records.value_text(Measured(value, "", floor=floor)) == text


# Comparing


def test_what_moved_what_is_new_stale_or_no_longer_reached() -> None:
    figures = changed("nominal", "bandwidth(m)", Measured(1e9, "Hz", ">="))
    figures["nominal"]["noise(m)"] = Measured(1.31561184e-4, "V")
    del figures["nominal"]["gain(m) at 0 Hz"]
    figures["nominal"]["resistance(t) at 0 Hz"] = Measured(1e9, "Ω")
    figures["added"] = {"noise(m)": Measured(1e-3, "V")}
    figures["bare"] = changed("bare", "bandwidth(m)", Measured(5e8, "Hz"))["bare"]
    found = compare(TEXT, figures)
    assert [(c.kind, c.case, c.figure, c.before, c.after, c.line) for c in found] == [
        ("unreached", "nominal", "bandwidth(m)", "167.265713 MHz", ">= 1 GHz", 8),
        ("stale", "nominal", "gain(m) at 0 Hz", "0.999969299", None, 9),
        ("moved", "nominal", "noise(m)", "119.601076 µV", "131.561184 µV", 13),
        ("moved", "nominal", "resistance(t) at 0 Hz", "∞ Ω", "1 GΩ", 14),
        ("moved", "bare", "bandwidth(m)", ">= 1 GHz", "500 MHz", 17),
        ("new", "added", "noise(m)", None, "1 mV", 0),
    ]
    assert [c.change for c in found] == [None, None, pytest.approx(0.1, rel=1e-6), None, None, None]


def test_a_bound_is_no_value() -> None:
    (found,) = compare(TEXT, changed("bare", "bandwidth(m)", Measured(1e9, "Hz")))
    assert (found.kind, found.before, found.after) == ("moved", ">= 1 GHz", "1 GHz")


def test_a_case_that_is_not_asked_for_is_not_stale() -> None:
    record = records.parse(TEXT, PATH)
    some = {"nominal": FIGURES["nominal"]}
    assert records.compare(record, some, FIGURES) == []
    assert {(c.kind, c.case) for c in records.compare(record, some)} == {("stale", "bare")}


@pytest.mark.parametrize(
    ("tolerance", "line", "drift", "holds"),
    [
        ("", "", 0.9e-6, True),
        ("", "", 1.1e-6, False),
        ("", " ± 1 %", 0.0099, True),
        ("", " ± 1 %", 0.0101, False),
        ("", " ± 2 ppm", 1.9e-6, True),
        ("", " +- 100 Hz", 0.5e-6, True),
        ("", " ± 100 Hz", 0.7e-6, False),
        ("", " ± 0.2 kHz", 1.1e-6, True),
        ('"*" = "1 %"', "", 0.0099, True),
        ('"bandwidth(*)" = "± 1 kHz"', "", 5.9e-6, True),
        ('"bandwidth(*)" = "1 kHz"', "", 6.1e-6, False),
        ('"bandwidth(?)" = "1 %"', " ± 1 ppm", 0.005, False),  # the line's own counts
        ('"bandwidth(m)" = "1 %"\n"*" = "1 ppm"', "", 0.005, True),  # the figure's name counts more
        ('"*" = "1 %"\n"band*" = "1 ppm"', "", 0.005, False),  # the last pattern counts
        ('"band*" = "1 %"\n"*" = "1 mV"', "", 0.005, True),  # a pattern of another unit is passed over
        ('"noise(*)" = "1 %"', "", 0.005, False),
    ],
)
def test_tolerances(tolerance: str, line: str, drift: float, holds: bool) -> None:
    text = TEXT.replace("[tolerance]\n", f"[tolerance]\n{tolerance}\n").replace(
        '"167.265713 MHz"', f'"167.265713 MHz{line}"'
    )
    figures = changed("nominal", "bandwidth(m)", Measured(167265713.0 * (1 + drift), "Hz"))
    assert (compare(text, figures) == []) == holds


def test_what_can_be_zero_has_a_floor() -> None:
    def moved(value: float, tolerance: str = "") -> bool:
        figures = changed("bare", "peaking(m)", Measured(value, "", floor=1e-9))
        return compare(TEXT.replace('"peaking(m)" = "0"', f'"peaking(m)" = "0{tolerance}"'), figures) != []

    assert not moved(0.9e-9)
    assert moved(1.1e-9)
    assert not moved(0.9e-9, " ± 1 %")
    assert moved(1.1e-9, " ± 1 %")
    assert not moved(0.9e-8, " ± 1e-8")
    for now, holds in ((1.000009e-4, True), (1.000011e-4, False)):
        figures = changed("bare", "peaking(m)", Measured(now, "", floor=1e-9))
        text = TEXT.replace('"peaking(m)" = "0"', '"peaking(m)" = "0.0001"')
        assert (compare(text, figures) == []) == holds


@pytest.mark.parametrize(
    ("network", "figure", "exactly"),
    [
        # Two equal RC products: the divider is flat, and its delay zero.
        ("9 MΩ ∥ 11 pF | 1 MΩ ∥ 99 pF", "flatness(m)", "0"),
        ("9 MΩ ∥ 11 pF | 1 MΩ ∥ 99 pF", "group_delay(m) at 100 kHz", "0 s"),
        ("9 MΩ ∥ 11 pF | 1 MΩ ∥ 99 pF", "phase(m) at 1 kHz", "0 °"),
        # Resistors alone: no capacitance at the contact, no phase.
        ("900 Ω | 300 Ω -- 700 Ω", "capacitance(s) at 1 kHz", "0 F"),
        ("900 Ω | 300 Ω -- 700 Ω", "phase(m) at 1 kHz", "0 °"),
    ],
)
def test_noise_level_figures_are_written_as_what_they_are(network: str, figure: str, exactly: str) -> None:
    upper, lower = network.split("|")
    design = nodal.loads(f"""nodal 1
source s: a to ground = 1 V
branch upper: a to b = {upper}
branch lower: b to ground = {lower}
reading m: b to ground
sweep 1 Hz to 1 MHz, 10 per decade
require flat: flatness(m) <= 1
require still: phase(m) at 1 kHz <= 1 °
""")
    assert records.value_text(measure(Checks(design))["nominal"][figure]) == exactly


def test_a_matched_line_has_no_capacitance() -> None:
    """A lossless line into its own impedance is a resistor at every frequency; what is left is rounding."""
    design = nodal.loads("""nodal 1
stock line { impedance 50 Ω; velocity 0.66 }
source s: a to ground = 1 V behind 75 Ω
cable k: a, ground to b, ground = 1.7 m of line
branch load: b to ground = 50 Ω
reading m: b to ground
sweep 1 MHz to 1 GHz, 10 per decade
""")
    assert records.value_text(measure(Checks(design))["nominal"]["capacitance(s) at 1 MHz"]) == "0 F"


def test_a_perfect_balance_is_recorded_as_such() -> None:
    """Two dividers of one ratio: nothing of the common drive reaches the difference but rounding."""
    leg = (
        "branch u{0}: {0} to o{0} = {1} * 3.7 MΩ ∥ 2.5 pF / {1}\n"
        "branch l{0}: o{0} to ground = {1} * 3.7 MΩ / 99 ∥ 247.5 pF / {1}\n"
    )
    design = nodal.loads(
        "nodal 1\nsource high: p to ground = 1 V\nsource low: n to ground = 1 V\n"
        + leg.format("p", 1) + leg.format("n", 1.7) + "reading m: op to on times 100\n"
        "drive difference: high by 0.5, low by -0.5\ndrive common: high, low\n"
        "sweep 1 kHz to 1 MHz, 10 per decade\n"
        "require balance: rejection(m, difference, common) at 50 kHz >= 60 dB\n"
    )  # fmt: skip
    label = "rejection(m, difference, common) at 50 kHz"
    assert records.value_text(measure(Checks(design))["nominal"][label]) == "∞"


def test_every_drive_is_recorded_where_none_is_the_default() -> None:
    design = nodal.loads(
        "nodal 1\nsource x: a to ground = 1 V behind 1 kΩ\nsource y: b to ground = 1 V behind 3 kΩ\n"
        "branch r: a to b = 1 Ω\nreading m: b to ground\nsweep 1 Hz to 1 kHz, 10 per decade\n"
    )
    found = measure(Checks(design))["nominal"]
    # Superposition: with x alone, 1 kΩ and 1 Ω above 3 kΩ.
    assert found["gain(m) with x at 0 Hz"].value == pytest.approx(3000 / 4001)
    assert found["gain(m) with y at 0 Hz"].value == pytest.approx(1001 / 4001)
    assert "noise(m)" in found


def test_without_a_sweep_the_requirements_are_recorded() -> None:
    design = nodal.loads(
        "nodal 1\nsource x: a to ground = 1 V\nbranch r: a to b = 1 kΩ\nbranch s: b to ground = 3 kΩ\n"
        "reading m: b to ground\nrequire g: gain(m) at 1 kHz >= 0.5\n"
    )
    assert {k: v.value for k, v in measure(Checks(design))["nominal"].items()} == {
        "gain(m) at 1 kHz": pytest.approx(0.75)
    }


def test_frequencies_of_the_rows_do_not_depend_on_the_cases_asked_for() -> None:
    checks = Checks(nodal.load(str(ROOT / "circuits" / "bench_probe.nodal")))
    everything = measure(checks)
    some = measure(checks, ["long_clip"])
    assert records.compare(records.parse(records.update(None, everything, ""), PATH), some, everything) == []
    assert some["long_clip"].keys() == everything["long_clip"].keys()


# Bad records


@pytest.mark.parametrize(
    ("old", "new", "code", "line"),
    [
        ('"noise(m)"', '<<<<<<< ours\n"noise(m)"', "record-syntax", 13),
        ('"noise(m)"', '"bandwidth(m)" = "1 MHz"\n"noise(m)"', "record-syntax", 13),
        ('"119.601076 µV"', '"119.601076 µV', "record-syntax", 13),
        ('"119.601076 µV"', "119.6", "record-form", 13),
        ('"119.601076 µV"', '"about 120 µV"', "record-form", 13),
        ('"119.601076 µV"', '"120 µV ± much"', "record-form", 13),
        ('"119.601076 µV"', "'120 µV'", "record-form", 13),
        ("\n[tolerance]\n", "\n[tolerances]\n", "record-form", 5),
        ("[tolerance]\n", '[tolerance]\n"noise(*)" = "some %"\n', "record-form", 6),
        ("format = 1", "format = 2", "record-form", 1),
        ("format = 1\n", "", "record-form", 1),
    ],
)
def test_broken_records(old: str, new: str, code: str, line: int) -> None:
    with pytest.raises(nodal.DesignError) as error:
        compare(TEXT.replace(old, new, 1), FIGURES)
    (found,) = error.value.diagnostics
    assert found.code == code
    assert found.span is not None
    assert TEXT.replace(old, new, 1).count("\n", 0, found.span.start) + 1 == line


def test_a_tolerance_in_another_unit_is_said() -> None:
    text = TEXT.replace('"119.601076 µV"', '"119.601076 µV ± 2 kHz"')
    with pytest.raises(nodal.DesignError, match="is not in V"):
        compare(text, changed("nominal", "noise(m)", Measured(1.2e-4, "V")))


def test_files_that_are_not_there_or_no_text(tmp_path) -> None:
    assert records.load(str(tmp_path / "none.figures.toml")) is None
    broken = tmp_path / "x.figures.toml"
    broken.write_bytes(TEXT.encode("utf-16"))
    with pytest.raises(nodal.DesignError) as error:
        records.load(str(broken))
    assert error.value.diagnostics[0].code == "not-utf-8"
    assert records.record_path("a/b.nodal") == "a/b.figures.toml"


def test_labels_survive_quoting() -> None:
    assert json.loads(json.dumps("gain(m) at 1 µHz", ensure_ascii=False)) == "gain(m) at 1 µHz"
    figures = {"nominal": {"gain(m) at 1 µHz": Measured(1.0, "")}}
    text = records.update(None, figures, "x.nodal")
    assert records.parse(text, PATH).entries["nominal"]["gain(m) at 1 µHz"].text == "1"
