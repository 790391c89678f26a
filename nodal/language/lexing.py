"""Text -> lexemes: words, numbers with their units, texts and symbols, newlines where they end a statement.

Everything that is wrong with characters, numbers, units and brackets is found here and reported at once.
Where the meaning of a wrong spelling is plain, the lexeme that was meant goes on to the parser, so that one
mistake is told once; where it is not, a lexeme of type BAD makes the parser give up the statement without a
word.
"""

from __future__ import annotations

import re
import unicodedata
from bisect import bisect_left
from functools import lru_cache

from nodal.language.diagnostics import Collector
from nodal.language.syntax import Span
from nodal.language.units import nearest_unit, scan_unit

MAX_DEPTH = 100
"""Levels of parentheses and braces."""

WORD, DOTTED, NUMBER, TEXT, END, BAD = "WORD", "DOTTED", "NUMBER", "TEXT", "END", "BAD"
SYMBOLS = {
    "∥": "PARALLEL", "||": "PARALLEL", "--": "SERIES", "±": "PLUS_MINUS", "+-": "PLUS_MINUS",
    "<=": "AT_MOST", ">=": "AT_LEAST", "=": "EQUAL", "+": "PLUS", "-": "MINUS", "*": "STAR", "/": "SLASH",
    "(": "LPAR", ")": "RPAR", "{": "LBRACE", "}": "RBRACE", ",": "COMMA", ":": "COLON", ";": "SEMICOLON",
}  # fmt: skip
"""Spelling of a symbol -> its terminal in the grammar."""

# After these a newline is no end of a statement.
_GOES_ON = frozenset(SYMBOLS.values()) - {"RPAR", "LBRACE", "RBRACE", "SEMICOLON"}

KEYWORDS = frozenset((
    "nodal", "title", "include", "let", "under", "test", "source", "behind", "shunted", "by",
    "branch", "coupling", "with", "stock", "cable", "of", "amplifier", "contact", "to", "reading",
    "times", "drive", "assembly", "place", "chain", "omit", "case", "sweep", "per", "decade",
    "edge", "step", "over", "top", "at", "temperature", "require", "from", "allow", "trim", "rated",
    "and", "rms", "drift", "loss", "as", "k", "q",
))  # fmt: skip
"""Every word that is a keyword somewhere; a test compares it with the grammar."""


class Lexeme:
    """One token: `type` is a terminal of the grammar, WORD (a keyword or a NAME, as the parser can take)
    or BAD."""

    __slots__ = ("span", "text", "type", "unit")

    def __init__(self, type: str, text: str, span: Span, unit: str = "") -> None:
        self.type = type
        self.text = text
        """As written; for a NUMBER the digits alone."""
        self.unit = unit
        """Canonical unit of a NUMBER."""
        self.span = span

    def __repr__(self) -> str:
        return f"Lexeme({self.type}, {self.text!r}, {self.unit!r})"


_UNIT_LETTERS = "A-Za-z%°√Ω\u2126µ\u03bcº˚℃"
_MASTER = re.compile(
    rf"""
    (?P<space>[ \t\u00a0\u202f]+ | \#[^\r\n]*)
  | (?P<newline>\r\n|\n|\r)
  | (?P<word>[A-Za-z_][A-Za-z0-9_]*(?:\.[A-Za-z0-9_]+)*)
  | (?P<number>(?:[0-9]+(?:[.,'_][0-9]+)*\.?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)
    (?: (?P<gap>[ \t\u00a0\u202f]*) (?P<unit>[{_UNIT_LETTERS}]+(?:/[{_UNIT_LETTERS}]+)?)
        (?P<tail>[A-Za-z0-9_.]*) )?
  | (?P<double>==|=<|=>|//)
  | (?P<symbol>\|\||--|\+-|<=|>=|[∥±=+\-*/(){{}},:;])
  | (?P<text>"[^"\r\n]*")
    """,
    re.VERBOSE,
)
_PLAIN_NUMBER = re.compile(r"[0-9]+(?:\.[0-9]+)?(?:[eE][+-]?[0-9]+)?")
_FOLLOWING = KEYWORDS - {"k"}  # k stands behind "with" alone: behind a number it is a prefix without its unit
_PREFIX_ALONE = frozenset("kMGTPEpnufµ\u03bc")

# Spellings that mean nothing here -> (what was meant, as a message shows it; the lexeme that goes on).
_LOOK_ALIKES = {
    "‖": "∥", "∣∣": "∥", "¦¦": "∥", "|": "∥", "∣": "∥", "ǁ": "∥", "∦": "∥", "//": "∥",
    "–": "--", "—": "--", "―": "--", "−": "-", "‐": "-", "‑": "-", "﹣": "-", "－": "-",
    "×": "*", "·": "*", "⋅": "*", "∙": "*", "•": "*", "∗": "*", "✕": "*", "÷": "/", "∕": "/", "⁄": "/",
    "≤": "<=", "≦": "<=", "⩽": "<=", "≥": ">=", "≧": ">=", "⩾": ">=", "<": "<=", ">": ">=",
    "=<": "<=", "=>": ">=", "==": "=", "∓": "±", "＝": "=", "＋": "+", "，": ",", "、": ",", "：": ":",
    "；": ";", "（": "(", "）": ")", "［": "(", "］": ")", "[": "(", "]": ")", "｛": "{", "｝": "}",
    "＊": "*", "／": "/", "\u037e": ";",
}  # fmt: skip
_QUOTES = "“”„‟«»‘’‚'`"
_QUOTED = re.compile(rf"[{_QUOTES}]([^\r\n{_QUOTES}]*)[{_QUOTES}]")
_DOUBLE = re.compile(r"∣∣|¦¦|//|=<|=>|==")
_UNIT_LOOK_ALIKES = str.maketrans({"º": "°", "˚": "°", "℃": "°C"})
_INVISIBLE = re.compile("[\u00ad\u034f\u061c\u180e\u200b-\u200f\u202a-\u202e\u2060-\u206f\ufeff]+")
_OTHER_SPACE = re.compile("[\u1680\u2000-\u200a\u2028\u2029\u205f\u3000\x0b\x0c\x1c-\x1f\x85]+")
_WORD_WITH_OTHERS = re.compile(r"[\w.\u0300-\u036f]+")

# A line that can only be the beginning of a statement, wherever brackets may stand open.
_STATEMENT_LINE = re.compile(
    r"""[ \t]*(?:
        (?:let|branch|source|coupling|cable|amplifier|contact|reading|drive|place|chain|require|allow)
        [ \t]+[A-Za-z_][\w.-]*[ \t]*[:=]
      | (?:case|stock)[ \t]+\w+[ \t]*\{ | under[ \t]+test[ \t]*\{ | assembly[ \t]+\w+[ \t]*\(
      | (?:title|include)[ \t]*" | (?:sweep|edge|temperature|nodal)[ \t]+[0-9] | step[ \t]+over[ \t]
    )""",
    re.VERBOSE,
)
_FIRST_WORD = re.compile(r"[ \t]*(\w+)")
_PIECES = frozenset(("let", "branch", "coupling", "cable", "amplifier", "place", "chain"))
_OUTSIDE_CASE = frozenset(("nodal", "title", "include", "case"))
FIRST_VERSION = re.compile(r"\ufeff?(?:\s|#[^\r\n]*)*nodal[ \t]+([0-9]+)(?![\w.])")
"""The version at the head of a text."""


def character_name(char: str) -> str:
    """ "en dash", "U+0007": what a message calls a character."""
    name = unicodedata.name(char, "")
    return name.lower() if name else f"U+{ord(char):04X}"


class Lexer:
    """Reads one text; `lexemes` and `faults` (offsets of what was reported, ascending) are the result."""

    def __init__(self, text: str, path: str, collector: Collector) -> None:
        self.text = text
        self.path = path
        self.collector = collector
        self.lexemes: list[Lexeme] = []
        self.faults: list[int] = []
        self._open: list[Lexeme] = []
        self._parentheses = 0
        self._braces_match = text.count("{") == text.count("}")
        self.too_deep = False

    def run(self) -> list[Lexeme]:
        """All lexemes. Stops short where brackets nest too deeply (`too_deep`)."""
        text, path, emit = self.text, self.path, self.lexemes.append
        position, end = 0, len(text)
        if text.startswith("\ufeff"):
            position = 1
        match = _MASTER.match
        hidden = _INVISIBLE.search(text, position) is not None
        while position < end and not self.too_deep:
            found = match(text, position)
            if found is None:
                position = self._strange(position)
                continue
            kind = found.lastgroup
            start, position = position, found.end()
            if kind == "space":
                if hidden:
                    self._check_hidden(start, position)
            elif kind == "word":
                word = found.group()
                if (
                    position < end
                    and not text[position].isascii()
                    and _WORD_WITH_OTHERS.match(text, position)
                ):
                    position = self._strange_name(start)
                else:
                    emit(Lexeme(DOTTED if "." in word else WORD, word, Span(path, start, position)))
            elif kind == "double":
                position = self._strange(start)
            elif kind == "symbol":
                self._symbol(found.group(), start, position)
            elif kind == "newline":
                self._newline(start, position)
            elif kind == "text":
                self._check_hidden(start, position)
                emit(Lexeme(TEXT, text[start + 1 : position - 1], Span(path, start, position)))
            else:
                position = self._number(found)
        self._finish()
        return self.lexemes

    def fault_between(self, start: int, end: int) -> bool:
        """Whether something was reported in this stretch of text."""
        at = bisect_left(self.faults, start)
        return at < len(self.faults) and self.faults[at] < end

    def _report(
        self, code: str, start: int, end: int, related: tuple[tuple[Span, str], ...] = (), **arguments: str
    ) -> None:
        self.faults.append(start)
        if len(self.faults) > 1 and self.faults[-2] > start:
            self.faults.sort()
        self.collector.add(code, Span(self.path, start, end), related=related, **arguments)

    def _emit(self, type: str, start: int, end: int, text: str | None = None) -> None:
        self.lexemes.append(
            Lexeme(type, self.text[start:end] if text is None else text, Span(self.path, start, end))
        )

    # Brackets and newlines

    def _symbol(self, symbol: str, start: int, end: int) -> None:
        if symbol == ";" and not self._parentheses:
            if self.lexemes and self.lexemes[-1].type != END:
                self._emit(END, start, end)
            return
        lexeme = Lexeme(SYMBOLS[symbol], symbol, Span(self.path, start, end))
        if symbol in "({":
            if symbol == "{":
                self._close_parentheses(lexeme)
            self._open.append(lexeme)
            self._parentheses += symbol == "("
            if len(self._open) > MAX_DEPTH:
                self._report("too-deep", start, end, limit=str(MAX_DEPTH))
                self.too_deep = True
                return
        elif symbol == ")":
            if not self._parentheses:
                self._report("nothing-to-close", start, end, bracket=symbol, opener="(")
                lexeme.type = BAD
            else:
                self._open.pop()
                self._parentheses -= 1
        elif symbol == "}":
            self._close_parentheses(lexeme)
            if not self._open:
                self._report("nothing-to-close", start, end, bracket=symbol, opener="{")
                return
            self._open.pop()
        self.lexemes.append(lexeme)

    def _close_parentheses(self, before: Lexeme | None) -> None:
        """Give up the parentheses that stand open where none can; the statement goes with them."""
        if not self._parentheses:
            return
        while self._open and self._open[-1].text == "(":
            opener = self._open.pop()
            self._parentheses -= 1
        self._report("unclosed", opener.span.start, opener.span.end, bracket="(", closer=")")
        place = before.span.start if before else len(self.text)
        self._emit(BAD, place, place, "")

    def _newline(self, start: int, end: int) -> None:
        if (self._open and _STATEMENT_LINE.match(self.text, end)) and (
            self._parentheses or not self._braces_match
        ):
            if self._parentheses:
                self._close_parentheses(Lexeme(END, "\n", Span(self.path, start, end)))
            self._close_braces(start, end)
        if not self._parentheses:
            last = self.lexemes[-1].type if self.lexemes else END
            if last not in _GOES_ON and last != END:
                self._emit(END, start, end)

    def _close_braces(self, start: int, end: int) -> None:
        """Give up a brace where the next line cannot stand inside it, in a file with too few closing ones."""
        if self._braces_match:
            return
        next_word = _FIRST_WORD.match(self.text, end)
        assert next_word is not None  # called where a statement begins on the next line
        while self._open and not _stands_inside(next_word.group(1), self._statement_word(self._open[-1])):
            opener = self._open.pop()
            self._report("unclosed", opener.span.start, opener.span.end, bracket="{", closer="}")
            self._emit("RBRACE", start, start, "}")

    def _statement_word(self, opener: Lexeme) -> str:
        """The word that begins the statement in which a brace opens."""
        at = bisect_left(self.lexemes, opener.span.start, key=lambda lexeme: lexeme.span.start)
        while at and self.lexemes[at - 1].type not in (END, "LBRACE", "RBRACE"):
            at -= 1
        return self.lexemes[at].text

    def _finish(self) -> None:
        if self.too_deep:
            return
        self._close_parentheses(None)
        end = len(self.text)
        while self._open:
            opener = self._open.pop()
            self._report("unclosed", opener.span.start, opener.span.end, bracket="{", closer="}")
            self._emit("RBRACE", end, end, "}")

    # Numbers

    def _number(self, found: re.Match[str]) -> int:
        """Emit the number that `found` begins; returns where to go on."""
        text, start = self.text, found.start()
        digits, gap, unit, tail = found["number"], found["gap"], found["unit"], found["tail"]
        digits_end = found.end("number")
        if unit is None:
            end, canonical = digits_end, ""
            if digits_end < len(text) and (text[digits_end].isalnum() or text[digits_end] == "_"):
                return self._bad_number_word(start, digits_end)
        else:
            verdict, canonical, length = _read_unit(unit, bool(gap), tail)
            end = found.start("unit") + length if length else digits_end
            if verdict == "look-alike":
                wrong = re.search("[º˚℃]", unit)
                assert wrong is not None
                at = found.start("unit") + wrong.start()
                char = wrong.group()
                fix = char.translate(_UNIT_LOOK_ALIKES)
                self._report("look-alike", at, at + 1, found=char, what=character_name(char), fix=f'"{fix}"')
            elif verdict == "letters" and (fixed := _letter_for_point(digits, unit, tail)):
                end = found.end()
                fix = f"write {fixed[0]} {fixed[1]}{self._or_name()}"
                why = "has a letter for a point"
                self._report("number-form", start, end, found=text[start:end], why=why, fix=fix)
                self.lexemes.append(Lexeme(NUMBER, fixed[0], Span(self.path, start, end), fixed[1]))
                return end
            elif verdict == "letters":
                return self._bad_number_word(start, digits_end)
            elif verdict in ("prefix", "unknown"):
                return self._bad_unit(found, verdict)
        if _PLAIN_NUMBER.fullmatch(digits) is None:
            plain = self._bad_digits(start, end, digits, canonical)
            if plain is None:
                self._emit(BAD, start, end)
                return end
            digits = plain
        self.lexemes.append(Lexeme(NUMBER, digits, Span(self.path, start, end), canonical))
        return end

    def _or_name(self) -> str:
        """The hint to give where a name may have been meant."""
        last = self.lexemes[-1] if self.lexemes else None
        if last and (last.type in ("COLON", "COMMA") or (last.type == WORD and last.text in KEYWORDS)):
            return "; a name begins with a letter"
        return ""

    def _bad_digits(self, start: int, end: int, digits: str, unit: str) -> str | None:
        """Report a number that is not written as numbers are; returns how it should be, if that can be
        told."""
        text = self.text
        written = text[start:end]
        mantissa = re.split("[eE]", digits, maxsplit=1)[0]
        exponent = digits[len(mantissa) :]
        suffix = f" {unit}" if unit else ""
        plain = None
        if mantissa.startswith("."):
            plain, why = f"0{digits}", "has no digit before the point"
            help = f"write {plain}{suffix}"
        elif mantissa.count(".") == 2 and mantissa.endswith(".") and _PLAIN_NUMBER.fullmatch(mantissa[:-1]):
            plain, why = f"{mantissa[:-1]}{exponent}", "has a point too many"
            help = f"write {plain}{suffix}"
        elif mantissa.endswith(".") and _PLAIN_NUMBER.fullmatch(mantissa[:-1]):
            plain, why = f"{mantissa[:-1]}.0{exponent}", "has no digit after the point"
            help = f"write {plain}{suffix} or {mantissa[:-1]}{exponent}{suffix}"
        elif mantissa.count(",") == 1 and not set(mantissa) & set("._'"):
            plain, why = digits.replace(",", "."), "has a comma in it"
            help = f"write {plain}{suffix}"
            whole, _, rest = mantissa.partition(",")
            if len(rest) == 3 and len(whole) <= 3 and whole != "0":
                help += f", or {whole}{rest}{exponent}{suffix} if the comma separates thousands"
            help += "; in a list put a space after the comma"
        elif "." not in mantissa.rstrip(".") or mantissa.count(".") == 1:
            joined = re.sub("[,_']", "", digits)
            plain, why = (joined, "has separators in it") if _PLAIN_NUMBER.fullmatch(joined) else (None, "")
            help = f"write {joined}{suffix}"
        if plain is None:
            why, help = "has more than one point", "write digits, one point and digits, as in 4.7"
        self._report("number-form", start, end, found=written, why=why, fix=help)
        return plain

    def _bad_number_word(self, start: int, end: int) -> int:
        """A number that runs into a word: 2_x, 3ж."""
        word = re.compile(r"[\w.]+").match(self.text, start)
        end = max(end, word.end() if word else end)
        why = "is neither a number nor a name"
        fix = "a number is digits, at most one point, then a unit; a name begins with a letter"
        self._report("number-form", start, end, found=self.text[start:end], why=why, fix=fix)
        self._emit(BAD, start, end)
        return end

    def _bad_unit(self, found: re.Match[str], verdict: str) -> int:
        start, end = found.start(), found.end()
        written = " ".join(self.text[start:end].split())
        word = self.text[found.start("unit") : end]
        digits = found["number"]
        nearest = nearest_unit(f"{digits} {word}")
        if verdict == "prefix" and nearest:
            unit = nearest.removeprefix(digits).strip()
            kinds = {"Ω": " for a resistor", "F": " for a capacitor", "H": " for an inductor"}
            fix = f"write {digits} {unit}{kinds.get(unit[-1], '')}"
            self._report("missing-unit", start, end, found=written, fix=fix)
        else:
            unit = nearest.removeprefix(digits).strip() if nearest else ""
            fix = f"write {digits} {unit}" if unit else "the units are Ω S F H Hz s m V A W K °C ° % ppm dB"
            fix += "" if found["gap"] else self._or_name()
            self._report("unknown-unit", found.start("unit"), end, unit=word, number=written, fix=fix)
        if unit and _PLAIN_NUMBER.fullmatch(digits):
            self.lexemes.append(Lexeme(NUMBER, digits, Span(self.path, start, end), unit))
        else:
            self._emit(BAD, start, end)
        return end

    # Characters

    def _strange(self, start: int) -> int:
        """Report what no lexeme begins with; returns where to go on."""
        text = self.text
        char = text[start]
        if char == '"':
            line = re.compile(r"[^\r\n]*").match(text, start)
            end = line.end() if line else start + 1
            self._report("unclosed-text", start, end)
            self._emit(TEXT, start, end, text[start + 1 : end].strip())
            return end
        if quoted := _QUOTED.match(text, start):
            self._report("look-alike", start, start + 1, found=char, what=character_name(char), fix="'\"'")
            self._emit(TEXT, start, quoted.end(), quoted.group(1))
            return quoted.end()
        if hidden := _INVISIBLE.match(text, start):
            self._report_hidden(hidden.start(), hidden.end())
            return hidden.end()
        if space := _OTHER_SPACE.match(text, start):
            code = f"U+{ord(char):04X}"
            self._report(
                "look-alike", start, space.end(), found=code, what=character_name(char), fix="a space"
            )
            return space.end()
        double = _DOUBLE.match(text, start)
        spelling = double.group() if double else char
        if fix := _LOOK_ALIKES.get(spelling):
            end = start + len(spelling)
            shown = {"∥": '"∥" or "||"', "--": '"--" for series, "-" for minus'}.get(fix, f'"{fix}"')
            self._report("look-alike", start, end, found=spelling, what=_called(spelling), fix=shown)
            self._symbol("-" if fix == "--" and self._after_sign() else fix, start, end)
            return end
        if char.isalpha() and char not in "°ºΩ\u2126µ\u03bcª":
            return self._strange_name(start)
        fix = unicodedata.normalize("NFKC", char)
        if fix != char and fix.isascii() and fix.isprintable() and fix.strip():
            self._report(
                "look-alike", start, start + 1, found=char, what=character_name(char), fix=f'"{fix}"'
            )
        else:
            shown = char if char.isprintable() else f"U+{ord(char):04X}"
            self._report("unknown-character", start, start + 1, found=shown, what=character_name(char))
        self._emit(BAD, start, start + 1)
        return start + 1

    def _after_sign(self) -> bool:
        """Whether an operator here could only be a sign, or stand between two numbers of arithmetic."""
        return not self.lexemes or self.lexemes[-1].type in _GOES_ON or self.lexemes[-1].type == "LPAR"

    def _strange_name(self, start: int) -> int:
        """A name with letters that names cannot have; it goes on as the name it is."""
        word = _WORD_WITH_OTHERS.match(self.text, start)
        assert word is not None  # called where a letter stands
        name = word.group().rstrip(".")
        end = start + len(name)
        names = str.maketrans({"ß": "ss", "\u03bc": "u", "µ": "u", "Ω": "Ohm", "\u2126": "Ohm"})
        plain = unicodedata.normalize("NFKD", name.translate(names))
        plain = "".join(char for char in plain if char.isascii())
        wrong = next(char for char in name if not char.isascii())
        shown = f"U+{ord(wrong):04X}" if unicodedata.combining(wrong) else wrong
        whole = len(plain) >= len(unicodedata.normalize("NFC", name)) and plain[0].isalpha()
        fix = f"write {plain}" if whole else "names are made of the letters a to z and A to Z, digits and _"
        self._report("name-form", start, end, found=name, char=shown, what=character_name(wrong), fix=fix)
        self._emit(WORD, start, end)
        return end

    def _check_hidden(self, start: int, end: int) -> None:
        for hidden in _INVISIBLE.finditer(self.text, start, end):
            self._report_hidden(hidden.start(), hidden.end())

    def _report_hidden(self, start: int, end: int) -> None:
        char = self.text[start]
        self._report("hidden-character", start, end, found=f"U+{ord(char):04X}", what=character_name(char))


def _stands_inside(word: str, block: str) -> bool:
    """Whether a statement that begins with `word` may stand in the braces of one that begins with `block`."""
    if block == "case":
        return word not in _OUTSIDE_CASE
    if block == "under":
        return word in _PIECES or word in ("source", "stock", "assembly")
    return block == "assembly" and word in _PIECES


def _called(spelling: str) -> str:
    return character_name(spelling) if len(spelling) == 1 else "two characters"


@lru_cache(maxsize=4096)
def _read_unit(unit: str, spaced: bool, tail: str) -> tuple[str, str, int]:
    """What the letters after a number are: (verdict, canonical unit, how many of them belong to the unit).

    Verdicts: "unit", "none" (a word of the grammar follows), "look-alike" (a unit but for one character),
    "prefix" (a prefix alone), "letters" (digits go on behind them, as in 4k7), "unknown".
    """
    base = unit.partition("/")[0]
    if spaced and base in _FOLLOWING and not tail:
        return "none", "", 0
    plain = unit.translate(_UNIT_LOOK_ALIKES)
    verdict = "unit" if plain == unit else "look-alike"
    if not tail:
        if (whole := scan_unit(plain)) is not None:
            return verdict, whole, len(unit)
        if (alone := scan_unit(base.translate(_UNIT_LOOK_ALIKES))) is not None and "/" in unit:
            return verdict, alone, len(base)
        if unit in _PREFIX_ALONE:
            return "prefix", "", 0
    if "/" in unit and (alone := scan_unit(base.translate(_UNIT_LOOK_ALIKES))) is not None:
        return verdict, alone, len(base)  # divided by a name that begins with letters of a unit: 1 V/R1
    if not spaced and tail and tail[0].isdigit():
        return "letters", "", 0
    return "unknown", "", 0


def _letter_for_point(digits: str, unit: str, tail: str) -> tuple[str, str] | None:
    """4k7 -> ("4.7", "kΩ"), 3n3 -> ("3.3", "nF"), 10V5 -> ("10.5", "V")."""
    rest = re.fullmatch(r"([0-9]+)([A-Za-zΩµ]*)", tail)
    if rest is None or not digits.isdigit():
        return None
    letters = {"R": "Ω", "r": "Ω", "K": "kΩ", "v": "V"}.get(unit, unit) + rest.group(2)
    known = scan_unit(letters) or (nearest_unit(letters) if letters in _PREFIX_ALONE else None)
    return (f"{digits}.{rest.group(1)}", known) if known else None
