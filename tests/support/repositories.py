"""Git repositories for tests, and the command in them."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

from click.testing import CliRunner, Result

from nodal.cli import main

ROOT = Path(__file__).parents[2]
STOCK = """nodal 1
stock coax { capacitance 100 pF/m; inductance 250 nH/m }
"""
PROBE = """nodal 1
include "../lib/stock.nodal"
source drive: tip to ground = 1 V behind 50 Ω
cable flex: tip, ground to plug, ground = 1 m of coax
branch load: plug to ground = 1 MΩ ± 1 % ∥ 10 pF
reading screen: plug to ground
sweep 1 kHz to 10 MHz, 5 per decade
require light: capacitance(drive) at 1 MHz <= 112 pF
"""


class Repository:
    """A new git repository in a folder, with no settings from outside."""

    def __init__(self, top: Path) -> None:
        self.top = top
        self.git("init", "-q")
        self.git("config", "user.name", "someone")
        self.git("config", "user.email", "someone@example.org")

    def git(self, *arguments: str, folder: str = ".") -> str:
        answer = subprocess.run(
            ["git", *arguments], cwd=self.top / folder, check=True, capture_output=True, text=True
        )
        return answer.stdout

    def write(self, path: str, text: str) -> None:
        (self.top / path).parent.mkdir(parents=True, exist_ok=True)
        (self.top / path).write_text(text)

    def replace(self, path: str, old: str, new: str) -> None:
        text = (self.top / path).read_text()
        assert old in text
        self.write(path, text.replace(old, new))

    def commit(self, message: str = "change") -> str:
        self.git("add", "-A")
        self.git("commit", "-qm", message)
        return self.git("rev-parse", "HEAD").strip()


def run(*arguments: str) -> Result:
    """The command, in this process."""
    result = CliRunner().invoke(main, list(arguments))
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    return result


NODAL = f'"{sys.executable}" -m nodal'
"""The command as git calls it."""
