"""The units of the language: their spellings, how large they are, and what they measure.

A unit is an optional SI prefix (case-sensitive), a base unit, and an optional rate (`/m`, `/K`, `/V`, `/W`,
`/√Hz`). Several spellings are read (`uF`, `µF` with either code point, `kohm`); one, the canonical, is kept.
"""

from __future__ import annotations

import difflib
import math
import re
from dataclasses import dataclass
from functools import lru_cache

Dimension = tuple[float, ...]
"""Exponents of V, A, s, m, K, °, dB and °C. Degrees, decibels and Celsius stand apart: they never mix with
numbers."""

_BASES = ("V", "A", "s", "m", "K", "°", "dB", "°C")


def _dimension(**exponents: float) -> Dimension:
    return tuple(float(exponents.get(key, 0)) for key in ("V", "A", "s", "m", "K", "deg", "dB", "degC"))


NONE = _dimension()
VOLT = _dimension(V=1)
AMPERE = _dimension(A=1)
SECOND = _dimension(s=1)
METRE = _dimension(m=1)
KELVIN = _dimension(K=1)
DEGREE = _dimension(deg=1)
DECIBEL = _dimension(dB=1)
CELSIUS = _dimension(degC=1)
OHM = _dimension(V=1, A=-1)
SIEMENS = _dimension(V=-1, A=1)
FARAD = _dimension(V=-1, A=1, s=1)
HENRY = _dimension(V=1, A=-1, s=1)
HERTZ = _dimension(s=-1)
WATT = _dimension(V=1, A=1)


def multiply(a: Dimension, b: Dimension) -> Dimension:
    """Dimension of a product."""
    return tuple(x + y for x, y in zip(a, b, strict=True))


def divide(a: Dimension, b: Dimension) -> Dimension:
    """Dimension of a quotient."""
    return tuple(x - y for x, y in zip(a, b, strict=True))


def root(a: Dimension) -> Dimension:
    """Dimension of a square root."""
    return tuple(x / 2 for x in a)


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit in its canonical spelling: a number of it times 10**`exponent` is the number in base units."""

    text: str
    exponent: int
    dimension: Dimension


PREFIXES = {
    "a": -18, "f": -15, "p": -12, "n": -9, "µ": -6, "m": -3, "c": -2, "": 0, "k": 3, "M": 6, "G": 9, "T": 12,
    "P": 15,
    "E": 18,
}  # fmt: skip
"""SI prefixes, canonical spelling, to powers of ten; `c` is taken for the metre alone."""

_PREFIXED = {
    "Ω": OHM, "S": SIEMENS, "F": FARAD, "H": HENRY, "Hz": HERTZ, "s": SECOND, "m": METRE, "V": VOLT,
    "A": AMPERE,
    "W": WATT, "K": KELVIN,
}  # fmt: skip
_PLAIN = {
    "%": (-2, NONE), "ppm": (-6, NONE), "°": (0, DEGREE), "°C": (0, CELSIUS), "dB": (0, DECIBEL),
}  # fmt: skip
_RATES = {"m": METRE, "K": KELVIN, "V": VOLT, "W": WATT, "√Hz": root(HERTZ)}


def _bases() -> dict[str, Unit]:
    units = {text: Unit(text, exponent, dimension) for text, (exponent, dimension) in _PLAIN.items()}
    for prefix, exponent in PREFIXES.items():
        for base, dimension in _PREFIXED.items():
            if prefix != "c" or base == "m":
                units[prefix + base] = Unit(prefix + base, exponent, dimension)
    return units


def _rates(bases: dict[str, Unit]) -> dict[str, Unit]:
    units = {}
    for unit in bases.values():
        if unit.dimension != CELSIUS:
            for rate, dimension in _RATES.items():
                text = f"{unit.text}/{rate}"
                units[text] = Unit(text, unit.exponent, divide(unit.dimension, dimension))
    return units


_BASE_UNITS = _bases()
UNITS: dict[str, Unit] = {**_BASE_UNITS, **_rates(_BASE_UNITS)}
"""Every unit by its canonical spelling."""

_CANONICAL = str.maketrans({"\u2126": "Ω", "\u03bc": "µ", "\u212a": "K", "\u00a0": " "})
# One base unit, then at most one rate; what follows must not go on as a word would.
_LETTERS = r"(?:deg[C]?|dB|rtHz|√Hz|°C?|%|[A-Za-zµΩ]+)"
_TOKEN = re.compile(rf"(?P<base>{_LETTERS})(?:/(?P<rate>{_LETTERS}))?(?![A-Za-z0-9_µΩ°])")
_BARE = re.compile(rf"(?P<base>{_LETTERS})(?![A-Za-z0-9_µΩ°])")


@lru_cache(maxsize=4096)
def _canonical(text: str) -> str:
    """Spelling with aliases replaced; not necessarily a unit."""
    base, slash, rate = text.translate(_CANONICAL).partition("/")
    return _alias(base) + slash + ("√Hz" if rate == "rtHz" else rate)


def _alias(base: str) -> str:
    if base == "deg":
        return "°"
    if base == "degC":
        return "°C"
    if base.endswith("ohm"):
        base = base[:-3] + "Ω"
    if base.startswith("u") and base[1:] in _PREFIXED:
        base = "µ" + base[1:]
    return base


def scan_unit(text: str) -> str | None:
    """The canonical spelling of a unit ("uF" -> "µF", "kohm" -> "kΩ"), or None if `text` is not exactly
    one."""
    canonical = _canonical(text)
    return canonical if canonical in UNITS else None


def match_unit(text: str, position: int = 0) -> tuple[str, int] | None:
    """The longest unit that starts at `position`: its canonical spelling and where it ends.

    `1 V/R` with a `let R` gives "V" alone, `200 A/V` the whole rate; a unit never ends inside a word.
    """
    for pattern in (_TOKEN, _BARE):
        found = pattern.match(text.translate(_CANONICAL) if not text.isascii() else text, position)
        if found:
            unit = scan_unit(found.group())
            if unit:
                return unit, found.end()
    return None


_WORDS = {
    "ohms": "Ω", "volt": "V", "volts": "V", "amp": "A", "amps": "A", "ampere": "A", "amperes": "A",
    "farad": "F",
    "farads": "F", "henry": "H", "henries": "H", "henrys": "H", "hertz": "Hz", "sec": "s", "secs": "s",
    "second": "s",
    "seconds": "s", "metre": "m", "metres": "m", "meter": "m", "meters": "m", "watt": "W", "watts": "W",
    "siemens": "S", "kelvin": "K", "percent": "%", "degree": "°", "degrees": "°", "c": "°C", "decibel": "dB",
    "decibels": "dB", "cycles": "Hz",
}  # fmt: skip
# Which of two prefixes that differ in case alone was meant: nobody measures millihertz or megafarads with a
# probe.
_LIKELY = ("pF", "nF", "µF", "fF", "nH", "µH", "pH", "mH", "kΩ", "MΩ", "mΩ", "GΩ", "kHz", "MHz", "GHz", "ns",
    "ps",
           "ms", "µs", "mV", "kV", "mA", "µA", "mm", "mW", "kW", "mS", "µS", "MV")  # fmt: skip
_PREFIX_MEANING = {
    "k": "kΩ",
    "K": "kΩ",
    "M": "MΩ",
    "G": "GΩ",
    "p": "pF",
    "n": "nF",
    "u": "µF",
    "µ": "µF",
    "f": "fF",
}
_NUMBER_FIRST = re.compile(
    r"\s*(?P<number>[-+]?[0-9][0-9.]*(?:[eE][-+]?[0-9]+)?)?\s*(?P<unit>.*?)\s*$", re.DOTALL
)


def nearest_unit(text: str, expected: Dimension | None = None) -> str | None:
    """The right spelling nearest to a wrong one, with the number in front of it if `text` has one.

    "10 uf" -> "10 µF", "9 M" -> "9 MΩ", "MHZ" -> "MHz"; `expected` decides what a lone prefix is a prefix of
    ("3 n" -> "3 ns" where seconds are expected). None where nothing is near.
    """
    found = _NUMBER_FIRST.match(text)
    assert found is not None  # the pattern matches anything
    number, unit = found["number"], found["unit"]
    nearest = _nearest(_canonical(unit) if unit else "", expected)
    if nearest is None:
        return None
    return f"{number} {nearest}" if number else nearest


def _nearest(text: str, expected: Dimension | None) -> str | None:
    base, slash, rate = text.partition("/")
    if slash:
        near = _nearest(base, None)
        rates = {"rthz": "√Hz", "v": "V", "k": "K", "w": "W", "hz": "√Hz"}
        whole = f"{near}/{rates.get(rate.lower(), 'm')}" if near else ""
        return whole if whole in UNITS else None
    if text in UNITS and (expected is None or UNITS[text].dimension == expected):
        return text
    if text in _PREFIX_MEANING or text == "":
        if expected is not None:
            prefix = {"K": "k", "u": "µ"}.get(text, text)
            symbol = _symbol_for(expected)
            if symbol is not None and prefix + symbol in UNITS:
                return prefix + symbol
        return _PREFIX_MEANING.get(text)
    lower = text.lower()
    if lower in _WORDS:
        return _WORDS[lower]
    spelled = text
    for word, symbol in _WORDS.items():
        if lower.endswith(word) and len(word) > 3:
            spelled = text[: -len(word)] + symbol
            break
    if lower.endswith("ohm"):
        spelled = text[:-3] + "Ω"
    folded = spelled.lower().replace("u", "µ", 1) if spelled[:1] in "uU" else spelled.lower()
    same = [unit for unit in _BASE_UNITS if unit.lower() == folded]
    same = [unit for unit in same if UNITS[unit].dimension == expected] or same
    if same:
        return min(same, key=lambda unit: _LIKELY.index(unit) if unit in _LIKELY else len(_LIKELY))
    # One letter is like any two with it among them: 90 mn was hardly meant for 90 m.
    close = difflib.get_close_matches(spelled, [unit for unit in _BASE_UNITS if len(unit) > 1], 1, 0.6)
    return close[0] if close else None


def _symbol_for(dimension: Dimension) -> str | None:
    return next((text for text, known in _PREFIXED.items() if known == dimension), None)


def to_number(digits: str, unit: str) -> float:
    """The number in base units, rounded once: 9.5 pF is exactly the float nearest to 9.5e-12. May be
    infinite."""
    exponent = UNITS[unit].exponent if unit else 0
    mantissa, _, own = digits.replace("E", "e").partition("e")
    if len(own) > 6:  # an exponent beyond any float; keep int() cheap
        return 0.0 if own.startswith("-") or not mantissa.strip("0.") else math.inf
    return float(f"{mantissa}e{int(own or 0) + exponent}")


def dimension_of(unit: str) -> Dimension:
    """Dimension of a canonical unit; "" is a plain number."""
    return UNITS[unit].dimension if unit else NONE


@lru_cache(maxsize=1024)
def unit_name(dimension: Dimension) -> str:
    """A unit for a dimension, without prefix: "Ω", "F/m", "A/V", else a product such as "V²·s"; "" for
    none."""
    if dimension == NONE:
        return ""
    if dimension == SIEMENS:
        return "S"
    named = {**_PREFIXED, "°": DEGREE, "dB": DECIBEL, "°C": CELSIUS}
    for text, known in named.items():
        if known == dimension:
            return text
    for text, known in named.items():
        for rate, per in _RATES.items():
            if divide(known, per) == dimension:
                return f"{text}/{rate}"
    for rate, per in _RATES.items():
        if divide(NONE, per) == dimension:
            return f"1/{rate}"
    powers = zip(_BASES, dimension, strict=True)
    return "·".join(name + _superscript(power) for name, power in powers if power)


def _superscript(power: float) -> str:
    if power == 1:
        return ""
    if power != int(power):
        return f"^{power:g}"
    return str(int(power)).translate(str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹"))


_KINDS = {
    NONE: "a plain number", OHM: "a resistance", SIEMENS: "a conductance", FARAD: "a capacitance",
    HENRY: "an inductance", HERTZ: "a frequency", SECOND: "a time", METRE: "a length", VOLT: "a voltage",
    AMPERE: "a current", WATT: "a power", KELVIN: "a temperature difference", DEGREE: "an angle",
    DECIBEL: "decibels", CELSIUS: "a temperature",
}  # fmt: skip


def quantity_name(dimension: Dimension) -> str:
    """A dimension in words for messages: "a resistance (Ω)", "a quantity in F/m", "a plain number"."""
    if dimension == NONE:
        return _KINDS[NONE]
    if dimension in _KINDS:
        return f"{_KINDS[dimension]} ({unit_name(dimension)})"
    return f"a quantity in {unit_name(dimension)}"


def show(number: float, unit: str = "", digits: int = 6) -> str:
    """A number with an SI prefix for messages: show(9e6, "Ω") -> "9 MΩ"."""
    from quantiphy import Quantity  # not needed unless something is printed

    if not math.isfinite(number):
        return f"{number:g} {unit}".strip().replace("inf", "∞")
    if unit.partition("/")[0] not in _PREFIXED:
        return f"{number:.{digits}g} {unit}".strip()
    text = str(Quantity(number, unit).render(prec=digits - 1, strip_zeros=True))
    size, _, shown = text.partition(" ")
    return f"{size} µ{unit}" if shown == f"u{unit}" else text
