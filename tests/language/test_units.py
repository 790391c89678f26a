"""Units: what they mean, how they are spelled, and what is nearest to a wrong spelling."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from nodal.language import units
from nodal.language.units import UNITS, match_unit, nearest_unit, scan_unit, to_number, unit_name


@pytest.mark.parametrize(
    ("written", "canonical"),
    [
        ("pF", "pF"), ("uF", "µF"), ("\u00b5F", "µF"), ("\u03bcF", "µF"), ("kohm", "kΩ"), ("\u2126", "Ω"),
        ("M\u03a9", "MΩ"),
        ("ohm/m", "Ω/m"), ("deg", "°"), ("degC", "°C"), ("nV/rtHz", "nV/√Hz"), ("ppm/K", "ppm/K"), ("A/V",
        "A/V"),
        ("dB/m", "dB/m"), ("%", "%"), ("cm", "cm"), ("us", "µs"),
    ],
)  # fmt: skip
def test_spellings(written: str, canonical: str) -> None:
    assert scan_unit(written) == canonical


WRONG = ["uf", "M", "k", "Mhz", "KHz", "cF", "pF/s", "V/A", "", "p F", "ohms", "°C/m", "mdB"]


@pytest.mark.parametrize("wrong", WRONG)
def test_what_is_no_unit(wrong: str) -> None:
    assert scan_unit(wrong) is None


# The International System of Units, 9th edition: prefixes (table 7) and derived units (table 4).
@pytest.mark.parametrize(
    ("digits", "unit", "number"),
    [
        ("9.5", "pF", 9.5e-12), ("1", "m", 1.0), ("1", "mV", 1e-3), ("2", "MΩ", 2e6), ("0.3", "ppm", 0.3e-6),
        ("3", "%", 0.03),
        ("1e3", "µs", 1e-3), ("1.5E-3", "kHz", 1.5), ("48", "pF/m", 48e-12), ("2", "cm", 0.02), ("7", "",
        7.0),
    ],
)  # fmt: skip
def test_scale_is_exact(digits: str, unit: str, number: float) -> None:
    assert to_number(digits, unit) == number


def test_numbers_out_of_range() -> None:
    assert to_number("1e400", "V") == math.inf
    assert to_number("1e999999999999", "V") == math.inf
    assert to_number("1e-999999999999", "V") == 0.0


@given(st.floats(min_value=0, allow_infinity=False, allow_nan=False))
def test_repr_of_a_float_keeps_its_value(x: float) -> None:
    assert to_number(repr(x), "V") == x


def test_dimensions_agree_with_their_definitions() -> None:
    # SI Brochure, table 4: Ω = V/A, F = A·s/V, H = V·s/A, W = V·A, Hz = 1/s, S = A/V.
    dim = {text: unit.dimension for text, unit in UNITS.items()}
    assert dim["Ω"] == units.divide(dim["V"], dim["A"])
    assert units.multiply(dim["Ω"], dim["F"]) == dim["s"]
    assert units.divide(dim["H"], dim["Ω"]) == dim["s"]
    assert units.multiply(dim["V"], dim["A"]) == dim["W"]
    assert units.multiply(dim["Hz"], dim["s"]) == units.NONE
    assert dim["A/V"] == dim["S"]
    assert units.root(units.multiply(dim["H"], units.divide(dim["H"], dim["s"]))) == units.root(
        units.multiply(dim["H"], dim["Ω"])
    )
    assert units.multiply(dim["V/√Hz"], units.root(dim["Hz"])) == dim["V"]


@pytest.mark.parametrize(
    ("text", "position", "expected"),
    [
        ("9 MΩ ∥", 2, ("MΩ", 4)), ("1 V/R", 2, ("V", 3)), ("200 A/V", 4, ("A/V", 7)), ("9 M", 2, None),
        ("1 mm/m_x", 2, ("mm", 4)),
        ("5 nV/√Hz;", 2, ("nV/√Hz", 8)), ("1 s2", 2, None), ("1 % with", 2, ("%", 3)), ("23°C", 2, ("°C",
        4)), ("1 V/2", 2, ("V", 3)),
    ],
)  # fmt: skip
def test_longest_match(text: str, position: int, expected: tuple[str, int] | None) -> None:
    assert match_unit(text, position) == expected


@pytest.mark.parametrize(
    ("wrong", "nearest"),
    [
        ("9 M", "9 MΩ"), ("10 uf", "10 µF"), ("4.7 k", "4.7 kΩ"), ("3 KHz", "3 kHz"), ("1 mhz", "1 MHz"),
        ("5 ohms", "5 Ω"),
        ("1 kOhm", "1 kΩ"), ("2 pf", "2 pF"), ("1 volts", "1 V"), ("100 mhenry", "100 mH"),
        ("nothing_like_it", None),
        ("pf/m", "pF/m"), ("nv/rthz", "nV/√Hz"), ("MHZ", "MHz"),
    ],
)  # fmt: skip
def test_nearest(wrong: str, nearest: str | None) -> None:
    assert nearest_unit(wrong) == nearest


def test_nearest_by_context() -> None:
    assert nearest_unit("3 n", units.SECOND) == "3 ns"
    assert nearest_unit("3 n", units.HENRY) == "3 nH"
    assert nearest_unit("10", units.HERTZ) == "10 Hz"


@pytest.mark.parametrize("text", sorted(UNITS))
def test_every_unit_is_its_own_canonical_spelling(text: str) -> None:
    assert scan_unit(text) == text
    assert match_unit(f"1 {text} ", 2) == (text, 2 + len(text))


def test_names_of_dimensions() -> None:
    assert unit_name(UNITS["kΩ"].dimension) == "Ω"
    assert unit_name(UNITS["pF/m"].dimension) == "F/m"
    assert unit_name(UNITS["A/V"].dimension) == "S"
    assert unit_name(units.multiply(units.VOLT, units.VOLT)) == "V²"
    assert units.show(9e6, "Ω") == "9 MΩ"
    assert units.show(1.5e-8, "F") == "15 nF"
