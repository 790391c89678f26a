"""Findings about the text itself: files, characters, numbers, brackets, the shape of statements."""

from __future__ import annotations

from nodal.language.codes.row import Code

TEXT: tuple[Code, ...] = ()
