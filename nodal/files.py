"""Writing files whole or not at all."""

from __future__ import annotations

import contextlib
import os
import stat
import tempfile
from collections.abc import Iterator


def replace_file(path: str, text: str) -> None:
    """Write `text` to a temporary file beside `path` and move it into place; OSError where that fails.

    An existing file keeps its permissions, a link its target; what is no regular file (a pipe) is written to
    as it is.
    """
    target = os.path.realpath(path)
    try:
        mode: int | None = os.stat(target).st_mode
    except FileNotFoundError:
        mode = None
    if mode is not None and not stat.S_ISREG(mode):
        with open(target, "w", encoding="utf-8") as out:
            out.write(text)
        return
    with _temporary_beside(target) as (handle, name):
        with os.fdopen(handle, "w", encoding="utf-8", newline="") as out:
            out.write(text)
            out.flush()
            os.fsync(out.fileno())
        os.chmod(name, stat.S_IMODE(mode) if mode is not None else 0o666 & ~_umask())
        os.replace(name, target)


@contextlib.contextmanager
def _temporary_beside(target: str) -> Iterator[tuple[int, str]]:
    """A new file in the folder of `target`, removed again unless it was moved."""
    handle, name = tempfile.mkstemp(prefix=f".{os.path.basename(target)}.", dir=os.path.dirname(target))
    try:
        yield handle, name
    finally:
        with contextlib.suppress(FileNotFoundError):
            os.unlink(name)


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
