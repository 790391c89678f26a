"""Designs out of git: `REVISION:path` and `:path` (the index), their includes from the same tree.

Everything is read through `git` itself, so that its own rules hold: what a revision may be called, which
repository the working folder belongs to, who may read it. Nothing is written.
"""

from __future__ import annotations

import os
import posixpath
import subprocess
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import NoReturn

from nodal import design
from nodal.language.codes import make
from nodal.language.diagnostics import Collector, DesignError, Diagnostic
from nodal.language.files import Outside, Unusable
from nodal.language.parse import MAX_BYTES, decode

_LINK, _SUBMODULE = "120000", "160000"
_FILES = ("100644", "100755")
_MOST_LINKS = 40
"""Links followed for one file; a circle of them ends here."""


# Asking git


def git(*arguments: str, literal: bool = False) -> subprocess.CompletedProcess[bytes]:
    """Run git in the working folder and give what it said, whatever its status.

    `literal`: paths are paths, no patterns. Raises DesignError (no-git) where there is none to run.
    """
    environment = {**os.environ, "LC_ALL": "C", "GIT_OPTIONAL_LOCKS": "0"}
    if literal:
        environment["GIT_LITERAL_PATHSPECS"] = "1"
    try:
        return subprocess.run(
            ["git", *arguments], stdin=subprocess.DEVNULL, capture_output=True, env=environment, check=False
        )
    except OSError as error:
        _fail("no-git", reason=error.strerror or str(error))


def _text(output: bytes) -> str:
    return os.fsdecode(output).rstrip("\n")


def folder() -> str:
    """The working folder as seen from the top of its repository, "" or with a stroke at its end.

    Raises DesignError (no-repository) outside one.
    """
    answer = git("rev-parse", "--show-prefix")
    if answer.returncode:
        reason = _text(answer.stderr).partition("\n")[0].removeprefix("fatal: ")
        _fail("no-repository", reason=reason)
    return _text(answer.stdout)


def _fail(code: str, **arguments: str) -> NoReturn:
    raise DesignError([make(code, None, arguments=arguments)], {})


# Trees


@dataclass(frozen=True, slots=True)
class Entry:
    """What stands at a path of a tree: git's mode and object name."""

    mode: str
    object: str


@dataclass(frozen=True)
class Tree:
    """The files of one revision, or of the index; a `nodal.language.files.Files`. Paths run from the top.

    Labels are `REVISION:path`. `name` is what stands before the colon; `tree` the object name of a tree, ""
    for the index, whose `stage` matters in a merge (2 is ours, 3 theirs).
    """

    name: str
    tree: str = ""
    stage: int = 0
    root: str = "the repository"
    _entries: dict[str, Entry | None] = field(default_factory=dict, compare=False, repr=False)

    def label(self, path: str) -> str:
        return f"{self.name}:{path}"

    def path(self, label: str) -> str:
        return label[len(self.name) + 1 :]

    def beside(self, label: str, target: str) -> str:
        return self.label(_inside(posixpath.join(posixpath.dirname(self.path(label)), target)))

    def key(self, label: str) -> str:
        return self.follow(self.path(label))

    def read(self, label: str, collector: Collector) -> str | None:
        try:
            path = self.follow(self.path(label))
        except Outside:
            reason = "a link leads out of the repository"
            collector.add("unreadable", None, path=label, reason=reason)
            return None
        except Unusable as why:
            collector.add("unreadable", None, path=label, reason=str(why))
            return None
        if path == ".":  # the top itself
            collector.add("is-directory", None, path=label)
            return None
        entry = self.entry(path)
        if entry is None:
            collector.add("not-in-revision", None, path=path, revision=self.words, hint=self.hint(path))
        elif entry.mode == _SUBMODULE:
            collector.add("unreadable", None, path=label, reason="it is another repository")
        elif entry.mode not in _FILES:
            collector.add("is-directory", None, path=label)
        else:
            return blob(entry.object, label, collector)
        return None

    @property
    def words(self) -> str:
        return self.name if self.tree else "the index"

    def hint(self, path: str) -> str:
        """What may have been meant by a path that is not there."""
        here = folder()
        if here and self.entry(here + path) is not None:
            return f"paths run from the top of the repository: write {self.label('./' + path)}"
        if not self.tree and not self.stage and self._entry(path, 2) is not None:
            return f"it is being merged: :2:{path} is ours, :3:{path} theirs"
        return ""

    def follow(self, path: str) -> str:
        """The path that `path` comes to once links are followed, whether or not something stands there.

        Raises Outside where a link leaves the repository, Unusable for a circle of links.
        """
        for _ in range(_MOST_LINKS):
            step = next(self._links(path), None)
            if step is None:
                return path
            link, entry, rest = step
            target = os.fsdecode(git("cat-file", "blob", entry.object).stdout)
            path = _inside(posixpath.join(posixpath.dirname(link), target, rest))
        raise Unusable("it is a circle of links")

    def _links(self, path: str) -> Iterator[tuple[str, Entry, str]]:
        """Links that stand in the way to `path`: (the link, its entry, what comes after it)."""
        entry = self.entry(path)
        if entry is not None and entry.mode != _LINK:
            return
        steps = path.split("/")
        for count in range(1, len(steps) + 1):
            above = "/".join(steps[:count])
            entry = self.entry(above)
            if entry is not None and entry.mode == _LINK:
                yield above, entry, "/".join(steps[count:])

    def entry(self, path: str) -> Entry | None:
        """What stands at a path, None for nothing; of the index, a folder is nothing."""
        if path not in self._entries:
            found = self._entry(path, self.stage)
            if found is None and self.stage:
                found = self._entry(path, 0)
            self._entries[path] = found
        return self._entries[path]

    def _entry(self, path: str, stage: int) -> Entry | None:
        if not path or "\0" in path:
            return None
        if self.tree:
            answer = git("ls-tree", "-z", "--full-tree", self.tree, "--", path, literal=True)
        else:
            answer = git("ls-files", "-s", "-z", "--full-name", "--", f":(top,literal){path}")
        for line in os.fsdecode(answer.stdout).split("\0"):
            head, _, name = line.partition("\t")
            if name == path:
                mode, second, third = head.split(" ")
                if self.tree:
                    return Entry(mode, third)
                if third == str(stage):
                    return Entry(mode, second)
        return None


def _inside(path: str) -> str:
    """A path from the top of the repository in its plain form. Raises Outside, and Unusable for no path."""
    if "\0" in path:
        raise Unusable("it is no usable path")
    path = posixpath.normpath(path)
    if path == ".." or path.startswith(("/", "../")):
        raise Outside
    return path


def blob(name: str, label: str, collector: Collector) -> str | None:
    """The text of an object; None where it cannot be had, with the reason in `collector`."""
    size = git("cat-file", "-s", name)
    if size.returncode == 0 and int(size.stdout) > MAX_BYTES:
        collector.add("too-long", None, path=label)
        return None
    content = git("cat-file", "blob", name)
    if content.returncode:
        reason = _text(content.stderr).partition("\n")[0].removeprefix("fatal: ")
        collector.add("unreadable", None, path=label, reason=reason)
        return None
    return decode(content.stdout, label, collector)


# What a call names


def split(word: str) -> tuple[str, str] | None:
    """(revision, path) of `REVISION:path`, of `:path` ("", path) or `:2:path` (":2", path).

    None for a path. A file that exists under the whole word is meant as such.
    """
    if os.path.lexists(word) or ":" not in word:
        return None
    if word[:1] == ":" and word[2:3] == ":" and word[1] in "0123":
        return word[:2], word[3:]
    depth = 0
    for position, character in enumerate(word):  # HEAD^{/fix: the tip}:path
        depth += {"{": 1, "}": -1}.get(character, 0)
        if character == ":" and depth <= 0:
            return word[:position], word[position + 1 :]
    return None


def tree(revision: str) -> Tree:
    """The tree of a revision, "" or ":2" for the index. Raises DesignError where there is no such thing."""
    folder()
    if revision[:1] in ("", ":"):
        return Tree(revision, stage=int(revision[1:] or 0))
    answer = None
    if not revision.startswith("-") and "\0" not in revision:
        answer = git("rev-parse", "--verify", "--quiet", "--end-of-options", revision + "^{tree}")
    if answer is None or answer.returncode:
        shallow = git("rev-parse", "--is-shallow-repository").stdout.strip() == b"true"
        hint = "this clone is shallow and lacks older commits: git fetch --unshallow" if shallow else ""
        _fail("unknown-revision", revision=revision, hint=hint)
    return Tree(revision, _text(answer.stdout))


def load(word: str) -> design.Design:
    """The design that a path, `REVISION:path` or `:path` means. Raises DesignError with all that is wrong.

    As in git itself, a path runs from the top of the repository unless it begins with `./` or `../`.
    """
    named = split(word)
    if named is None:
        return design.load(word)
    revision, path = named
    files = tree(revision)
    if path.startswith(("./", "../")):
        path = posixpath.join(folder(), path)
    try:
        label = files.label(_inside(path))
    except Outside:
        _fail("outside-repository", path=path)
    except Unusable as why:
        _fail("unreadable", path=word, reason=str(why))
    collector = Collector()
    text = files.read(label, collector)
    if text is None:
        raise DesignError(collector.found, collector.sources)
    return design.loads(text, label, files=files)


def load_both(old: str, new: str) -> tuple[design.Design, design.Design]:
    """Two designs. Raises DesignError with all that is wrong with either."""
    loaded: list[design.Design] = []
    found: list[Diagnostic] = []
    sources: dict[str, str] = {}
    for word in (old, new):
        try:
            loaded.append(load(word))
        except DesignError as error:
            found += error.diagnostics
            sources |= error.sources
    if found:
        raise DesignError(found, sources)
    return loaded[0], loaded[1]
