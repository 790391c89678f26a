"""Helpers shared by tests: running a text through the whole pipeline, and reference formulas of their own."""
