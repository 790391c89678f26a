"""Designs out of git: which file of which tree is meant, and what is said where there is none."""

from __future__ import annotations

import json
import os
import subprocess
from pathlib import Path

import pytest
from support.repositories import PROBE, STOCK, Repository, run

from nodal import revisions
from nodal.language.diagnostics import DesignError

FILE = "my designs/probe.nodal"


def capacitance(word: str) -> float:
    """Of the cable, F/m: it stands in the included file."""
    part = revisions.load(word).network().network.part("flex")
    return part.capacitance.nominal


def codes(word: str) -> list[str]:
    with pytest.raises(DesignError) as caught:
        revisions.load(word)
    return [found.code for found in caught.value.diagnostics]


def test_includes_come_from_the_same_revision(probe: Repository) -> None:
    probe.replace("lib/stock.nodal", "100 pF", "90 pF")
    probe.git("add", "-A")
    probe.replace("lib/stock.nodal", "90 pF", "80 pF")
    assert capacitance(f"HEAD:{FILE}") == 100e-12
    assert capacitance(f":{FILE}") == 90e-12
    assert capacitance(f":0:{FILE}") == 90e-12
    assert capacitance(FILE) == 80e-12


@pytest.mark.parametrize("revision", ["HEAD", "main-line", "v1", "HEAD^{/first}", "HEAD~0", "feature/a", "@"])
def test_whatever_git_takes_for_a_revision(probe: Repository, revision: str) -> None:
    for name in ("main-line", "feature/a"):
        probe.git("branch", name)
    probe.git("tag", "-am", "one", "v1")
    assert capacitance(f"{revision}:{FILE}") == 100e-12
    assert revisions.load(f"{revision}:{FILE}").path == f"{revision}:{FILE}"


def test_a_path_runs_from_the_top_or_from_here(probe: Repository, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(probe.top / "my designs")
    assert capacitance(f"HEAD:{FILE}") == 100e-12
    assert revisions.load("HEAD:./probe.nodal").path == f"HEAD:{FILE}"
    assert revisions.load(":./probe.nodal").path == f":{FILE}"
    monkeypatch.chdir(probe.top / "lib")
    assert capacitance(f"HEAD:../{FILE}") == 100e-12
    monkeypatch.chdir(probe.top / "my designs")
    result = run("compare", "HEAD:probe.nodal", "probe.nodal")
    assert result.exit_code == 2
    assert "there is no file probe.nodal in HEAD" in result.stderr
    assert "write HEAD:./probe.nodal" in result.stderr


def test_a_file_of_that_very_name_is_meant(probe: Repository) -> None:
    probe.write("HEAD:x.nodal", PROBE.replace("../", ""))
    assert capacitance("HEAD:x.nodal") == 100e-12


def test_a_bare_repository_will_do(probe: Repository, monkeypatch: pytest.MonkeyPatch) -> None:
    probe.git("clone", "-q", "--bare", ".", "../bare.git")
    monkeypatch.chdir(probe.top.parent / "bare.git")
    assert capacitance(f"HEAD:{FILE}") == 100e-12


def test_links_are_followed_inside_the_tree(probe: Repository) -> None:
    os.symlink("my designs", probe.top / "linked")
    os.symlink("../lib/stock.nodal", probe.top / "my designs" / "here.nodal")
    probe.replace(FILE, "../lib/stock.nodal", "here.nodal")
    probe.commit()
    (probe.top / "linked").unlink()  # the work tree plays no part
    assert capacitance("HEAD:linked/probe.nodal") == 100e-12
    assert capacitance(":linked/probe.nodal") == 100e-12


def test_links_lead_nowhere_else(probe: Repository) -> None:
    (probe.top.parent / "secret.nodal").write_text(PROBE)
    os.symlink("../secret.nodal", probe.top / "out.nodal")
    os.symlink(str(probe.top.parent / "secret.nodal"), probe.top / "far.nodal")
    os.symlink("round.nodal", probe.top / "round.nodal")
    probe.write("main.nodal", PROBE.replace("../lib/stock.nodal", "out.nodal"))
    probe.commit()
    assert codes("HEAD:out.nodal") == ["unreadable"]
    assert codes(":far.nodal") == ["unreadable"]
    assert codes("HEAD:round.nodal") == ["unreadable"]
    assert "include-outside" in codes("HEAD:main.nodal")


@pytest.mark.parametrize("target", ["../../stock.nodal", "/etc/stock.nodal"])
def test_includes_stay_inside(probe: Repository, target: str) -> None:
    (probe.top.parent / "stock.nodal").write_text(STOCK)
    probe.replace(FILE, "../lib/stock.nodal", target)
    probe.commit()
    assert "include-outside" in codes(f"HEAD:{FILE}")
    assert "include-outside" in codes(f":{FILE}")


def test_an_include_that_the_revision_lacks(probe: Repository) -> None:
    probe.replace(FILE, "lib/stock", "lib/later")
    probe.commit()
    probe.write("lib/later.nodal", STOCK)
    probe.git("add", "lib")
    assert capacitance(FILE) == 100e-12
    assert capacitance(f":{FILE}") == 100e-12
    result = run("compare", f"HEAD:{FILE}", FILE)
    assert result.exit_code == 2
    assert f"HEAD:{FILE}:2:1: error[include-unreadable]" in result.stderr
    assert "there is no file lib/later.nodal in HEAD" in result.stderr


def test_a_file_includes_itself_in_a_revision(probe: Repository) -> None:
    probe.write("lib/stock.nodal", STOCK + 'include "../my designs/probe.nodal"\n')
    probe.commit()
    assert "include-loop" in codes(f"HEAD:{FILE}")


def test_sides_of_a_merge(probe: Repository) -> None:
    probe.git("checkout", "-qb", "theirs")
    probe.replace(FILE, "10 pF", "11 pF")
    probe.commit()
    probe.git("checkout", "-q", "-")
    probe.replace(FILE, "10 pF", "12 pF")
    probe.commit()
    with pytest.raises(subprocess.CalledProcessError):
        probe.git("merge", "-q", "theirs")
    load = {
        stage: revisions.load(f":{stage}:{FILE}").network().network.part("load.C").value.nominal
        for stage in (1, 2, 3)
    }
    assert load == {1: 10e-12, 2: 12e-12, 3: 11e-12}
    result = run("compare", f":{FILE}", f":2:{FILE}")
    assert result.exit_code == 2
    assert f":2:{FILE} is ours" in result.stderr


@pytest.mark.parametrize(
    ("word", "code"),
    [
        ("HEAD:none.nodal", "not-in-revision"),
        (":none.nodal", "not-in-revision"),
        ("HEAD:", "is-directory"),
        ("HEAD:lib", "is-directory"),
        ("HEAD:lib/", "is-directory"),
        ("nothing:probe.nodal", "unknown-revision"),
        ("HEAD~7:probe.nodal", "unknown-revision"),
        ("--all:probe.nodal", "unknown-revision"),
        ("-h:probe.nodal", "unknown-revision"),
        ("HEAD:../probe.nodal", "outside-repository"),
        ("HEAD:/etc/passwd", "outside-repository"),
        ("HEAD:*.nodal", "not-in-revision"),
        (":*.nodal", "not-in-revision"),
        (":(top)lib/stock.nodal", "not-in-revision"),
        ("probe.nodal", "no-file"),
    ],
)
def test_what_is_not_there(probe: Repository, word: str, code: str) -> None:
    assert codes(word) == [code]
    result = run("compare", "--json", "--", word, FILE)
    assert result.exit_code == 2
    assert [found["code"] for found in json.loads(result.stdout)["diagnostics"]] == [code]


def test_mistakes_name_the_revision_and_both_sides_are_told(probe: Repository) -> None:
    probe.replace(FILE, "1 MΩ", "1 M")
    probe.commit()
    probe.replace(FILE, "branch load: plug to ground = 1 M ", "brunch load: plug to ground = 1 MΩ ")
    result = run("compare", f"HEAD:{FILE}", FILE)
    assert result.exit_code == 2
    assert f'HEAD:{FILE}:5:31: error[missing-unit]: "1 M" has no unit' in result.stderr
    assert "1 M ± 1 % ∥ 10 pF" in result.stderr
    assert f"\n{FILE}:5:1: error[unknown-statement]" in result.stderr


def test_no_text_in_a_revision(probe: Repository) -> None:
    (probe.top / "image.nodal").write_bytes(b"\x89PNG\xff")
    (probe.top / "long.nodal").write_bytes(b"#" * (2 * 1024 * 1024 + 1))
    probe.commit()
    assert codes("HEAD:image.nodal") == ["not-utf-8"]
    assert codes("HEAD:long.nodal") == ["too-long"]


def test_another_repository_in_its_place(probe: Repository) -> None:
    head = probe.git("rev-parse", "HEAD").strip()
    probe.git("update-index", "--add", "--cacheinfo", f"160000,{head},module")
    assert codes(":module") == ["unreadable"]


def test_a_shallow_clone_says_so(probe: Repository, monkeypatch: pytest.MonkeyPatch) -> None:
    probe.replace(FILE, "10 pF", "11 pF")
    probe.commit()
    probe.git("clone", "-q", "--depth", "1", f"file://{probe.top}", "../shallow")
    monkeypatch.chdir(probe.top.parent / "shallow")
    result = run("compare", f"HEAD~1:{FILE}", FILE)
    assert result.exit_code == 2
    assert "git fetch --unshallow" in result.stderr


def test_outside_a_repository(probe: Repository, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    assert codes("HEAD:probe.nodal") == ["no-repository"]
    assert codes(":probe.nodal") == ["no-repository"]


def test_without_git(probe: Repository, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("PATH", str(tmp_path))
    assert codes("HEAD:probe.nodal") == ["no-git"]
    assert capacitance(FILE) == 100e-12


def test_before_the_first_commit(repository: Repository) -> None:
    repository.write("lib/stock.nodal", STOCK)
    repository.write(FILE, PROBE)
    repository.git("add", "-A")
    assert codes(f"HEAD:{FILE}") == ["unknown-revision"]
    assert capacitance(f":{FILE}") == 100e-12
