"""The language's grammar and reference, as package data (`nodal.grammar`)."""
