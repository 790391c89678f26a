"""How each statement reads, in one line: for helps, `nodal explain` and the list of statements."""

from __future__ import annotations

FORMS: dict[str, str] = {
    "nodal": "nodal 1",
    "title": 'title "TEXT"',
    "include": 'include "PATH"',
    "let": "let NAME = VALUE",
    "under": "under test { STATEMENTS }",
    "source": "source NAME: NODE to NODE = 1 V [behind NETWORK]",
    "branch": "branch NAME: NODE to NODE = NETWORK",
    "coupling": "coupling NAME: BRANCH.L with BRANCH.L = VALUE",
    "stock": "stock NAME { FIELDS }",
    "cable": "cable NAME: CORE, SHIELD to CORE, SHIELD = LENGTH of STOCK",
    "amplifier": "amplifier NAME: INPUT, REFERENCE to OUTPUT, REFERENCE { FIELDS }",
    "contact": "contact NAME: NODE to NODE",
    "reading": "reading NAME: NODE to NODE [times FACTOR]",
    "drive": "drive NAME: SOURCE by WEIGHT, SOURCE by WEIGHT",
    "assembly": "assembly NAME(NODES to NODES with NODES; PARAMETERS) { STATEMENTS }",
    "place": "place NAME: ASSEMBLY(NODES to NODES with NODES; PARAMETER = VALUE)",
    "chain": "chain NAME: COUNT of ASSEMBLY(NODES to NODES with NODES; PARAMETER = VALUE)",
    "omit": "omit NAME",
    "case": "case NAME { STATEMENTS }",
    "sweep": "sweep FREQUENCY to FREQUENCY, NUMBER per decade",
    "edge": "edge TIME over TIME [, top at TIME]",
    "step": "step over TIME [, top at TIME]",
    "temperature": "temperature 23 °C",
    "require": "require NAME: FIGURE [with DRIVE] [at FREQUENCY | from FREQUENCY to FREQUENCY] <= VALUE",
    "allow": "allow CODE: NAME",
}
"""First word of each statement -> its form; capitals stand for what the user fills in, brackets for what
may go."""

FIELD_FORMS: dict[str, str] = {
    "stock": "a field and its value, as in: capacitance 100 pF/m",
    "amplifier": "a field and its value, as in: gain 10",
}
"""What stands inside the braces of a stock or an amplifier."""

NODE_COUNTS: dict[str, tuple[int, str]] = {
    "source": (2, "NODE to NODE"),
    "branch": (2, "NODE to NODE"),
    "contact": (2, "NODE to NODE"),
    "reading": (2, "NODE to NODE"),
    "cable": (4, "CORE, SHIELD to CORE, SHIELD"),
    "amplifier": (4, "INPUT, REFERENCE to OUTPUT, REFERENCE"),
}
"""How many nodes each statement names, and how."""
