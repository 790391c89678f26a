"""Old states of files as git hands them to a diff driver: a copy under another name, alone in a folder.

What it includes is not beside it there. Git tells the copy's content and, at best, its path, not the
revision that it shows; so the tree where that content stands is looked for: in history, in the index, in the
work tree.
"""

from __future__ import annotations

import os
import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from nodal.design import Design, loads
from nodal.language import syntax
from nodal.language.diagnostics import Collector, DesignError
from nodal.language.files import Disk, Files, Unusable
from nodal.language.parse import parse, read
from nodal.revisions import Tree, git

_COPY_FOLDER = "git-blob-"
_COPY_PREFIX = re.compile(r"[A-Za-z0-9]{6}_(?=.)")
"""How git names copies: `git-blob-a1B2c3/NAME`, before 2.37 `a1B2c3_NAME`."""
_SHORT = 8
_CHANGE = re.compile(r"\n?:[0-7]+ [0-7]+ ([0-9a-f]+) ([0-9a-f]+) [A-Z][0-9]*")


@dataclass(frozen=True, slots=True)
class Home:
    """Where a text stands: what messages call it, the files around it, and which those are, in words."""

    label: str
    files: Files
    words: str


class Nowhere:
    """The files around a text of which nothing is known: none."""

    root = "the repository"

    def beside(self, label: str, target: str) -> str:
        raise Unusable("git does not say where this state of the file stood")

    def key(self, label: str) -> str:
        return label

    def read(self, label: str, collector: Collector) -> str | None:
        return None


@dataclass(frozen=True, slots=True)
class Old:
    """A file that git handed over. `design` or `error` is there; `home` where something is included."""

    text: str
    design: Design | None
    error: DesignError | None = None
    home: Home | None = None
    shared: bool = False
    """It has neither source nor reading of its own and is no design: a file for others to include."""


def load(file: str, *, path: str | None = None, name: str | None = None, newest: bool = False) -> Old:
    """What git hands over as `file`, with the files it includes found.

    `path` (from the top of the repository) and `name` (of the object) are known to external drivers only;
    `newest` asks for the latest tree that holds the file; else that of the commit that brought it in is
    taken.
    """
    collector = Collector()
    text = read(file, collector)
    if text is None:
        return Old("", None, DesignError(collector.found, collector.sources))
    label = path or _plain_name(file)
    home = None
    statements = list(_statements(text, label))
    if any(isinstance(statement, syntax.Include) for statement in statements):
        home = _home(file, path, name, newest)
        label = home.label
    try:
        return Old(text, loads(text, label, files=home.files if home else None), None, home)
    except DesignError as error:
        measured = any(isinstance(statement, syntax.Source | syntax.Reading) for statement in statements)
        lacking = all(found.code == "no-source" for found in error.diagnostics if found.severity == "error")
        return Old(text, None, error, home, shared=lacking and not measured)


def _plain_name(file: str) -> str:
    return _COPY_PREFIX.sub("", os.path.basename(file), count=1) if _copied(file) else file


def _copied(file: str) -> bool:
    """Whether a file is a copy that git made rather than one of the work tree."""
    folder = os.path.basename(os.path.dirname(file))
    return folder.startswith(_COPY_FOLDER) or bool(
        os.path.isabs(file) and _COPY_PREFIX.match(os.path.basename(file))
    )


def _statements(text: str, label: str) -> Iterator[syntax.Statement]:
    for statement in parse(text, label, Collector()).statements:
        yield statement
        if isinstance(statement, syntax.UnderTest):
            yield from statement.body


def _home(file: str, path: str | None, name: str | None, newest: bool) -> Home:
    if not _copied(file):
        return Home(file, Disk(file), "the work tree")
    named = _plain_name(file)
    spec = f":(top,literal){path}" if path else f":(top,glob)**/{_escaped(named)}"
    for object_name in [name] if name else _object_names(file, named):
        for home in _homes(object_name, spec, newest):
            return home
    found = [path] if path else [entry_path for _, entry_path in _staged(spec)]
    top = git("rev-parse", "--show-toplevel")
    if found and top.returncode == 0:
        beside = os.path.relpath(os.path.join(os.fsdecode(top.stdout).rstrip("\n"), found[0]))
        return Home(beside, Disk(beside), "the work tree")
    return Home(named, Nowhere(), "nowhere: git knows no such file")


def _escaped(name: str) -> str:
    return re.sub(r"([*?\[\]\\])", r"\\\1", name)


def _object_names(file: str, named: str) -> Iterable[str]:
    """Names that the content of a copy may have: as it stands, and as git would store it."""
    answers = [
        git("hash-object", "--no-filters", "--", file),
        git("hash-object", f"--path={named}", "--", file),
    ]
    return dict.fromkeys(os.fsdecode(answer.stdout).strip() for answer in answers if not answer.returncode)


def _homes(name: str, spec: str, newest: bool) -> Iterator[Home]:
    """Trees that hold the object, the one to take first."""
    if newest:
        head = git("rev-parse", "--verify", "--quiet", "HEAD")
        if head.returncode == 0:
            commit = os.fsdecode(head.stdout).strip()
            yield from (_at(commit, path) for _, path in _staged(spec) if _holds(commit, path, name))
        yield from _in_index(name, spec)
        for commit, before, _, path in _history(name, spec):
            parent = git("rev-parse", "--verify", "--quiet", f"{commit}^")
            if before == name and parent.returncode == 0:
                yield _at(os.fsdecode(parent.stdout).strip(), path)
    introduced = [(commit, path) for commit, _, after, path in _history(name, spec) if after == name]
    if introduced:
        yield _at(*introduced[-1])
    yield from _in_index(name, spec)


def _at(commit: str, path: str) -> Home:
    tree = Tree(commit[:_SHORT], f"{commit}^{{tree}}")
    return Home(tree.label(path), tree, f"commit {commit[:_SHORT]}")


def _in_index(name: str, spec: str) -> Iterator[Home]:
    index = Tree("")
    for staged, path in _staged(spec):
        if staged == name:
            yield Home(index.label(path), index, "the index")


def _holds(commit: str, path: str, name: str) -> bool:
    entry = Tree(commit, f"{commit}^{{tree}}").entry(path)
    return entry is not None and entry.object == name


def _staged(spec: str) -> list[tuple[str, str]]:
    """(object, path) of files in the index."""
    lines = os.fsdecode(git("ls-files", "-s", "-z", "--full-name", "--", spec).stdout).split("\0")
    entries = (line.partition("\t") for line in lines if line)
    return [(head.split(" ")[1], path) for head, _, path in entries]


def _history(name: str, spec: str) -> Iterator[tuple[str, str, str, str]]:
    """(commit, object before, object after, path) where the object came in or went, newest first."""
    answer = git(
        "-c", "log.showSignature=false", "log", "--all", "--reflog", "--topo-order", "--no-renames", "-m",
        "--raw", "-z", "--no-abbrev", "--format=%x01%H", f"--find-object={name}", "--", spec,
    )  # fmt: skip
    commit = ""
    change: re.Match[str] | None = None
    for word in os.fsdecode(answer.stdout).split("\0"):
        if word.startswith("\x01"):
            commit = word[1:].strip()
        elif change is not None:
            yield commit, change[1], change[2], word
            change = None
        else:
            change = _CHANGE.fullmatch(word)
