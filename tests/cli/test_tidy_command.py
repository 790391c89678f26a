"""`nodal tidy`: which files it reads and writes, what it prints, how it ends."""

from __future__ import annotations

import io
import os
import stat
import subprocess
import sys
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from nodal.cli import main
from nodal.language.diagnostics import Collector
from nodal.language.tidy import tidy
from nodal.paths import find

UNTIDY = "nodal 1\nlet  a = 1Ω # why\n"
TIDY = "nodal 1\nlet a = 1 Ω  # why\n"
BROKEN = "nodal 1\nlet  a = 9 M\nlet b = \n"


@pytest.fixture(autouse=True)
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with a tidy, an untidy and a broken file; the working directory."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / "designs" / "shared").mkdir(parents=True)
    (tmp_path / "designs" / "good.nodal").write_text(TIDY, encoding="utf-8")
    (tmp_path / "designs" / "shared" / "untidy.nodal").write_text(UNTIDY, encoding="utf-8")
    (tmp_path / "broken.nodal").write_text(BROKEN, encoding="utf-8")
    return tmp_path


def run(*arguments: str, text: str | bytes | None = None) -> Result:
    result = CliRunner().invoke(main, ["tidy", *arguments], input=text)
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    return result


def test_writes_what_is_not_tidy(here: Path) -> None:
    good = here / "designs" / "good.nodal"
    before = good.stat()
    result = run("designs")
    untidy = here / "designs" / "shared" / "untidy.nodal"
    assert (result.exit_code, result.stdout, result.stderr) == (
        0, f"tidied: {os.path.join('designs', 'shared', 'untidy.nodal')}\n", "",
    )  # fmt: skip
    assert untidy.read_text(encoding="utf-8") == TIDY
    assert (good.stat().st_mtime_ns, good.stat().st_ino) == (before.st_mtime_ns, before.st_ino)
    again = run("designs")
    assert (again.exit_code, again.output) == (0, "")


def test_check_names_the_files_and_writes_nothing(here: Path) -> None:
    result = run("--check", "designs")
    name = os.path.join("designs", "shared", "untidy.nodal")
    assert (result.exit_code, result.stdout) == (1, f"not tidy: {name}\n")
    assert (here / name).read_text(encoding="utf-8") == UNTIDY
    quiet = run("--check", "--quiet", "designs")
    assert (quiet.exit_code, quiet.output) == (1, "")
    good = run("--check", os.path.join("designs", "good.nodal"))
    assert (good.exit_code, good.output) == (0, "")


def test_diff_is_one_that_can_be_applied(here: Path) -> None:
    folder = here / "designs"
    (folder / "shared" / "untidy.nodal").write_text(UNTIDY + "let b=2", encoding="utf-8")
    result = run("--diff", "designs")
    assert result.exit_code == 1
    assert "tidied" not in result.stdout
    assert (folder / "shared" / "untidy.nodal").read_text(encoding="utf-8") == UNTIDY + "let b=2"
    subprocess.run(["git", "apply", "-p0", "-"], input=result.stdout.encode(), cwd=here, check=True)
    assert (folder / "shared" / "untidy.nodal").read_text(encoding="utf-8") == TIDY + "let b = 2\n"
    assert run("--diff", "designs").output == ""


def test_diff_in_color() -> None:
    result = run("--diff", "--color", "always", "designs")
    assert "\x1b[32m+let a = 1 Ω  # why\x1b[0m\n" in result.stdout
    assert "\x1b" not in run("--diff", "designs").stdout


def test_broken_files_are_left_alone_and_all_reported(here: Path) -> None:
    (here / "other.nodal").write_bytes(b"nodal 1\nlet a = \xff\n")
    result = run("broken.nodal", "designs", "other.nodal", "missing.nodal")
    assert result.exit_code == 2
    assert (here / "broken.nodal").read_text(encoding="utf-8") == BROKEN
    assert (here / "other.nodal").read_bytes() == b"nodal 1\nlet a = \xff\n"
    for code in ("missing-unit", "syntax", "not-utf-8", "no-file"):
        assert f"error[{code}]" in result.stderr
    assert (here / "designs" / "shared" / "untidy.nodal").read_text(encoding="utf-8") == TIDY
    assert run("--check", "broken.nodal").exit_code == 2
    assert run("--diff", "broken.nodal").exit_code == 2


def test_standard_input() -> None:
    result = run("-", text=UNTIDY)
    assert (result.exit_code, result.stdout, result.stderr) == (0, TIDY, "")
    windows = run("-", text=UNTIDY.replace("\n", "\r\n").encode())
    assert windows.stdout_bytes == TIDY.replace("\n", "\r\n").encode()
    assert run("-", text=TIDY).stdout == TIDY
    check = run("--check", "-", text=UNTIDY)
    assert (check.exit_code, check.stdout) == (1, "not tidy: <standard input>\n")
    assert run("--check", "-", text=TIDY).exit_code == 0
    broken = run("-", text=BROKEN)
    assert (broken.exit_code, broken.stdout) == (2, "")
    assert "<standard input>:2:10: error[missing-unit]" in broken.stderr


def test_standard_output_is_utf_8_whatever_the_terminal() -> None:
    done = subprocess.run(
        [sys.executable, "-m", "nodal", "tidy", "-"],
        input=UNTIDY.encode(), capture_output=True, check=True,
        env={**os.environ, "PYTHONIOENCODING": "ascii"},
    )  # fmt: skip
    assert done.stdout == TIDY.encode()


def test_permissions_and_links_are_kept(here: Path) -> None:
    target = here / "designs" / "shared" / "untidy.nodal"
    target.chmod(0o640)
    link = here / "link.nodal"
    link.symlink_to(target)
    assert run("link.nodal").exit_code == 0
    assert link.is_symlink()
    assert target.read_text(encoding="utf-8") == TIDY
    assert stat.S_IMODE(target.stat().st_mode) == 0o640
    assert sorted(p.name for p in target.parent.iterdir()) == ["untidy.nodal"]


def test_a_file_that_cannot_be_written_is_told(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(path: str, text: str) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("nodal.cli.replace_file", refuse)
    result = run("designs")
    assert result.exit_code == 2
    assert "error[cannot-write]" in result.stderr
    assert "permission denied" in result.stderr
    assert (here / "designs" / "shared" / "untidy.nodal").read_text(encoding="utf-8") == UNTIDY


def test_calls_that_mean_nothing(here: Path) -> None:
    assert "error[wrong-call]" in run().stderr
    (here / "empty").mkdir()
    result = run("--check", "empty", "designs/good.nodal")
    assert (result.exit_code, result.stdout) == (2, "")
    assert "error[no-designs]: there is no design in empty" in result.stderr


def test_walking(here: Path) -> None:
    for name in (".hidden/x.nodal", "b/z.nodal", "b/y.nodal", "a.nodal.txt", "b/.seen.nodal"):
        (here / name).parent.mkdir(exist_ok=True)
        (here / name).write_text(TIDY, encoding="utf-8")
    collector = Collector()
    assert find(["b/z.nodal", ".", "b", "-"], collector) == [
        "b/z.nodal", "broken.nodal", "b/.seen.nodal", "b/y.nodal", "designs/good.nodal",
        "designs/shared/untidy.nodal", "-",
    ]  # fmt: skip
    assert find([".hidden"], collector) == [".hidden/x.nodal"]
    assert collector.found == []


def test_a_large_file_is_read_once_and_written_whole(here: Path) -> None:
    text = "nodal 1\n" + "".join(f"let x{i}= {i}  # value {i}\n" for i in range(5000))
    (here / "large.nodal").write_text(text, encoding="utf-8")
    assert run("large.nodal").exit_code == 0
    written = (here / "large.nodal").read_text(encoding="utf-8")
    assert written == tidy(text)
    assert io.StringIO(written).readlines()[5000] == "let x4999 = 4999  # value 4999\n"
