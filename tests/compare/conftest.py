"""Repositories for the tests of comparisons."""

from __future__ import annotations

import os
from pathlib import Path

import pytest
from support.repositories import PROBE, ROOT, STOCK, Repository


@pytest.fixture
def repository(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Repository:
    """An empty repository that is the working folder; git reads no settings but its own."""
    for name in [name for name in os.environ if name.startswith("GIT_")]:
        monkeypatch.delenv(name)
    monkeypatch.setenv("GIT_CONFIG_GLOBAL", os.devnull)
    monkeypatch.setenv("GIT_CONFIG_NOSYSTEM", "1")
    monkeypatch.setenv("GIT_CEILING_DIRECTORIES", str(tmp_path.parent))
    monkeypatch.setenv("PYTHONPATH", str(ROOT))
    top = tmp_path / "work"
    top.mkdir()
    monkeypatch.chdir(top)
    return Repository(top)


@pytest.fixture
def probe(repository: Repository) -> Repository:
    """A repository with a design that includes a file of another folder, committed."""
    repository.write("lib/stock.nodal", STOCK)
    repository.write("my designs/probe.nodal", PROBE)
    repository.commit("first")
    return repository
