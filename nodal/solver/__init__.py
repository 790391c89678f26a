"""See DEVELOPERS.md, "How the code is laid out"."""
