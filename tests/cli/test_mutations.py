"""Broken files end with status 0 or 2 and never a traceback: random mutations of the shipped circuits.

`NODAL_MUTATIONS=10000 pytest tests/cli/test_mutations.py` tries more than the number below; the mutations are
numbered, and number n is the same in every run as long as the circuits are.
"""

from __future__ import annotations

import os
import random
import re
import shutil
import traceback
from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import CliRunner

from nodal.cli import main

CIRCUITS = sorted((Path(__file__).parents[2] / "circuits").glob("*.nodal"))
COUNT = int(os.environ.get("NODAL_MUTATIONS", "150"))
PARTS = 10
"""The mutations are split into so many tests, for parallel runs and to narrow down a failure."""

TOKEN = re.compile(r"\s+|[A-Za-z_][A-Za-z0-9_]*|[0-9]+(?:\.[0-9]+)?(?:e[-+]?[0-9]+)?|.", re.DOTALL)
NUMBERS = [
    "0",
    "1",
    "-1",
    "1e-300",
    "1e300",
    "1e400",
    "0.5",
    "1e-12",
    "99999999999",
    "00",
    "1,5",
    "4k7",
    ".5",
    "5.",
    "1e",
    "0x10",
]
UNITS = [
    "Ω",
    "F",
    "H",
    "Hz",
    "s",
    "m",
    "V",
    "A",
    "K",
    "%",
    "dB",
    "pF",
    "MΩ",
    "Ω/m",
    "pF/m",
    "nV/√Hz",
    "A/V",
    "ppm",
    "°",
    "uf",
    "M",
    "°C",
]
WORDS = [
    "ground",
    "to",
    "source",
    "branch",
    "behind",
    "cable",
    "of",
    "rated",
    "trim",
    "loss",
    "coupling",
    "omit",
    "case",
    "let",
    "include",
]
MARKS = [
    "∥",
    "--",
    "||",
    "(",
    ")",
    "{",
    "}",
    "±",
    "+-",
    ":",
    ";",
    "=",
    ",",
    "*",
    "/",
    "-",
    "#",
    '"',
    "‖",
    "–",
    "º",
    "\u202e",
    "\t",
    "\r",
    "\0",
    "é",
    "𝛀",
    ".",
]

Mutation = Callable[[random.Random, str], str]


def on_tokens(change: Callable[[random.Random, list[str]], None]) -> Mutation:
    def mutation(rng: random.Random, text: str) -> str:
        tokens = TOKEN.findall(text)
        if tokens:
            change(rng, tokens)
        return "".join(tokens)

    return mutation


def on_lines(change: Callable[[random.Random, list[str]], None]) -> Mutation:
    def mutation(rng: random.Random, text: str) -> str:
        lines = text.splitlines(keepends=True)
        if lines:
            change(rng, lines)
        return "".join(lines)

    return mutation


def delete(rng: random.Random, items: list[str]) -> None:
    items.pop(rng.randrange(len(items)))


def duplicate(rng: random.Random, items: list[str]) -> None:
    at = rng.randrange(len(items))
    items.insert(rng.randrange(len(items) + 1), items[at])


def swap(rng: random.Random, items: list[str]) -> None:
    a, b = rng.randrange(len(items)), rng.randrange(len(items))
    items[a], items[b] = items[b], items[a]


def replace_matching(pattern: str, choices: list[str]) -> Callable[[random.Random, list[str]], None]:
    def change(rng: random.Random, items: list[str]) -> None:
        places = [i for i, item in enumerate(items) if re.fullmatch(pattern, item)]
        if places:
            items[rng.choice(places)] = rng.choice(choices)

    return change


def insert_something(rng: random.Random, items: list[str]) -> None:
    items.insert(rng.randrange(len(items) + 1), rng.choice(WORDS + MARKS + NUMBERS + UNITS))


def swap_names(rng: random.Random, items: list[str]) -> None:
    names = [i for i, item in enumerate(items) if re.fullmatch(r"[A-Za-z_]\w*", item)]
    if names:
        items[rng.choice(names)] = items[rng.choice(names)]


def one_character(rng: random.Random, text: str) -> str:
    at = rng.randrange(len(text) + 1)
    how = rng.randrange(3)
    if how == 0:
        return text[:at] + text[at + 1 :]
    if how == 1:
        return text[:at] + rng.choice([*MARKS, chr(rng.randrange(1, 0x3000))]) + text[at:]
    return text[:at] + text[at + 1 : at + 2] + text[at : at + 1] + text[at + 2 :]


def one_digit(rng: random.Random, text: str) -> str:
    places = [m.start() for m in re.finditer(r"[0-9]", text)]
    if not places:
        return text
    at = rng.choice(places)
    return text[:at] + rng.choice("0123456789") + text[at + 1 :]


def cut_off(rng: random.Random, text: str) -> str:
    return text[: rng.randrange(len(text) + 1)]


MUTATIONS: list[Mutation] = [
    *(on_tokens(change) for change in (delete, duplicate, swap, insert_something, swap_names)),
    *(on_lines(change) for change in (delete, duplicate, swap)),
    on_tokens(replace_matching(r"[0-9].*", NUMBERS)),
    on_tokens(replace_matching(r"[A-Za-zΩµ°%√]+", UNITS)),
    on_tokens(replace_matching(r"\w+|[^\w\s]", MARKS)),
    one_character,
    one_digit,
    cut_off,
]


def mutated(number: int) -> str:
    """Mutation `number`: one to four changes of one of the circuits."""
    rng = random.Random(number)
    text = CIRCUITS[number % len(CIRCUITS)].read_text(encoding="utf-8")
    # Few points: it is the reading of files that is tried, not the speed of the sweep.
    text = re.sub(r"[0-9]+ per decade", "3 per decade", text)
    for _ in range(rng.randint(1, 4)):
        text = rng.choice(MUTATIONS)(rng, text)
    return text


def test_mutations_do_change_the_text() -> None:
    assert CIRCUITS
    whole = {path.read_text(encoding="utf-8") for path in CIRCUITS}
    assert sum(mutated(number) not in whole for number in range(50)) == 50


@pytest.mark.parametrize("part", range(PARTS))
def test_mutations(part: int, tmp_path: Path) -> None:
    shutil.copytree(CIRCUITS[0].parent / "shared", tmp_path / "shared")  # what the circuits include
    failures = []
    for number in range(part, COUNT, PARTS):
        path = tmp_path / f"mutated{number}.nodal"
        path.write_bytes(mutated(number).encode("utf-8"))
        result = CliRunner().invoke(main, ["figures", str(path), "--color", "never"])
        wrong = result.exit_code not in (0, 2)
        crashed = result.exception is not None and not isinstance(result.exception, SystemExit)
        silent = result.exit_code == 2 and "error" not in result.output
        if wrong or crashed or silent:
            trace = (
                "".join(traceback.format_exception(*result.exc_info)[-3:])
                if result.exc_info and crashed
                else result.output[-500:]
            )
            failures.append(f"mutation {number}: status {result.exit_code}\n{trace}")
        path.unlink()
    assert not failures, "\n".join([f"{len(failures)} of {COUNT // PARTS} went wrong", *failures[:10]])
