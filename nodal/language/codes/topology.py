"""Findings about how a network is connected."""

from __future__ import annotations

from nodal.language.codes.row import Code

TOPOLOGY: tuple[Code, ...] = ()
