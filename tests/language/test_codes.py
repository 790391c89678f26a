"""The table of diagnostics: every example raises its code, in the whole pipeline from text to connections."""

from __future__ import annotations

import pytest

import nodal
from nodal.language.codes import TABLE
from nodal.language.codes.call import CALL
from nodal.language.codes.topology import TOPOLOGY

EXAMPLES = [(row, example) for row in TABLE for example in row.examples]
# No text alone can raise these: they need a file that is missing or no text, other files, or a call.
ELSEWHERE = {
    "no-file", "is-directory", "unreadable", "not-utf-8", "too-long",  # test_read
    "include-loop", "include-too-deep",  # test_reuse
    "unknown-let", "override-form",  # test_expand
}  # fmt: skip


@pytest.mark.parametrize(
    ("row", "text"), EXAMPLES, ids=[f"{row.code}-{i}" for i, (row, _) in enumerate(EXAMPLES)]
)
def test_example(row: nodal.language.codes.Code, text: str) -> None:
    try:
        found = nodal.loads(text).diagnostics
    except nodal.DesignError as error:
        found = error.diagnostics
    mine = [d for d in found if d.code == row.code]
    assert mine
    assert {d.severity for d in mine} == {row.severity}


def test_what_has_no_example() -> None:
    bare = {row.code for row in TABLE if not row.examples} - {row.code for row in CALL}
    assert bare - {row.code for row in TOPOLOGY} == ELSEWHERE
