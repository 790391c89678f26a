"""Findings about what a text means: names, quantities, dimensions, networks, requirements."""

from __future__ import annotations

from nodal.language.codes.row import Code

MEANING: tuple[Code, ...] = ()
