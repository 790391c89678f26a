"""Files that cannot be had, or are no text."""

from __future__ import annotations

import io
import sys
from pathlib import Path

import pytest

from nodal.language.diagnostics import Collector, render
from nodal.language.parse import read

TWO_MEBIBYTES = 2_097_152


def read_one(path: Path | str) -> tuple[str | None, list[str], str]:
    collector = Collector()
    text = read(str(path), collector)
    return text, [d.code for d in collector.found], render(collector.found, collector.sources)


def test_a_file(tmp_path: Path) -> None:
    (tmp_path / "a.nodal").write_bytes("nodal 1\r\nlet a = 1 Ω\r\n".encode())
    assert read_one(tmp_path / "a.nodal") == ("nodal 1\r\nlet a = 1 Ω\r\n", [], "")


def test_standard_input(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(
        sys, "stdin", io.TextIOWrapper(io.BytesIO("nodal 1 # Ω".encode()), encoding="latin-1")
    )
    assert read_one("-") == ("nodal 1 # Ω", [], "")


def test_a_missing_path(tmp_path: Path) -> None:
    text, codes, shown = read_one(tmp_path / "none.nodal")
    assert (text, codes) == (None, ["no-file"])
    assert str(tmp_path / "none.nodal") in shown


def test_a_directory(tmp_path: Path) -> None:
    assert read_one(tmp_path)[:2] == (None, ["is-directory"])


def test_a_null_character_in_the_path() -> None:
    assert read_one("a\0b")[:2] == (None, ["unreadable"])


def test_a_path_through_a_file(tmp_path: Path) -> None:
    (tmp_path / "a").write_text("", encoding="utf-8")
    text, codes, shown = read_one(tmp_path / "a" / "b")
    assert (text, codes) == (None, ["unreadable"])
    assert "irectory" in shown  # the system's own reason


@pytest.mark.parametrize(
    ("data", "part"),
    [
        ("nodal 1\n# 9 MΩ".encode("utf-16"), "UTF-16"),
        ("nodal 1\nlet µ = 1".encode("latin-1"), "line 2 holds the byte 0xB5"),
    ],
)
def test_other_encodings(tmp_path: Path, data: bytes, part: str) -> None:
    (tmp_path / "a.nodal").write_bytes(data)
    text, codes, shown = read_one(tmp_path / "a.nodal")
    assert (text, codes) == (None, ["not-utf-8"])
    assert part in shown


def test_a_long_file(tmp_path: Path) -> None:
    (tmp_path / "a.nodal").write_bytes(b"#" * (TWO_MEBIBYTES + 1))
    assert read_one(tmp_path / "a.nodal")[:2] == (None, ["too-long"])
    (tmp_path / "a.nodal").write_bytes(b"#" * TWO_MEBIBYTES)
    assert read_one(tmp_path / "a.nodal")[1] == []
