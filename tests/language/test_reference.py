"""LANGUAGE.md: every example loads, or fails with the code it is marked with, and nothing is left out."""

from __future__ import annotations

import importlib.resources
import re

import pytest

import nodal
from nodal import records
from nodal.figure_names import BY_NAME
from nodal.language import amplifiers, cables
from nodal.language.forms import FORMS

TEXT = importlib.resources.files("nodal.grammar").joinpath("LANGUAGE.md").read_text(encoding="utf-8")
BLOCKS = [
    (m.group(1).strip(), m.group(2))
    for m in re.finditer(r"^```nodal(.*)\n((?:.*\n)*?)^```$", TEXT, re.MULTILINE)
]
RECORDS = re.findall(r"^```toml\n((?:.*\n)*?)^```$", TEXT, re.MULTILINE)
FRAME = next(body for mark, body in BLOCKS if mark == "frame")
EXAMPLES = [(mark, body) for mark, body in BLOCKS if mark != "frame"]


def whole(mark: str, body: str) -> str:
    """An example as a file: behind the frame, unless it is a file itself."""
    return body if body.startswith("nodal ") or mark == "error=missing-version" else FRAME + body


def test_all_fences_are_read() -> None:
    assert 2 * (len(BLOCKS) + len(RECORDS)) == TEXT.count("\n```")
    assert len([mark for mark, _ in EXAMPLES if not mark]) > 25


@pytest.mark.parametrize("body", [body for mark, body in EXAMPLES if not mark])
def test_example(body: str) -> None:
    design = nodal.loads(whole("", body))
    assert [d for d in design.diagnostics if d.severity == "warning"] == []


@pytest.mark.parametrize(("mark", "body"), [(mark, body) for mark, body in EXAMPLES if mark])
def test_example_that_fails(mark: str, body: str) -> None:
    code = re.fullmatch(r"error=([a-z0-9-]+)", mark)
    assert code
    with pytest.raises(nodal.DesignError) as caught:
        nodal.loads(whole(mark, body))
    assert [d.code for d in caught.value.diagnostics if d.severity == "error"] == [code.group(1)]


@pytest.mark.parametrize("text", RECORDS)
def test_example_of_a_record(text: str) -> None:
    record = records.parse(text, "bench_probe.figures.toml")
    assert set(record.entries) == {"nominal", "spring_tip"}
    assert record.tolerance("noise(screen)", "V") == records.Tolerance(0.1, "%")


@pytest.mark.parametrize("word", sorted(FORMS))
def test_every_statement_is_described_and_shown(word: str) -> None:
    assert f"`{FORMS[word]}`" in TEXT
    shown = "".join(FRAME + body for _, body in EXAMPLES)
    assert re.search(rf"(^|[;{{])\s*{word}\b", shown, re.MULTILINE)


def test_every_field_and_figure_is_described() -> None:
    coded = set(re.findall(r"\w+", " ".join(re.findall(r"`([^`\n]+)`", TEXT))))
    assert {*cables.FIELDS, *amplifiers.FIELDS, *BY_NAME} - coded == set()
