"""Findings about the text itself: files, characters, numbers, brackets, the shape of statements."""

from __future__ import annotations

from nodal.language.codes.row import Code

TEXT: tuple[Code, ...] = (
    # Files
    Code(
        "no-file",
        "error",
        "there is no file {path}",
        "check the path; a design is a text file whose name ends in .nodal",
        "The path given names nothing that exists.",
    ),
    Code(
        "is-directory",
        "error",
        "{path} is a directory",
        "name a file in it",
        "One file was wanted and the path is a directory.",
    ),
    Code(
        "unreadable",
        "error",
        "{path} cannot be read: {reason}",
        "",
        "The operating system refused to open or read the file; its reason is shown.",
    ),
    Code(
        "not-utf-8",
        "error",
        "{path} is not UTF-8 text: line {line} holds the byte {byte}",
        "the file seems to be in {guess}; save it as UTF-8",
        "Designs are UTF-8 text. Ω, µ and ± are written differently in other encodings, so a file in one of "
        "them cannot be read reliably. Every editor can save as UTF-8.",
    ),
    Code(
        "too-long",
        "error",
        "{path} is longer than 2 MiB",
        "put repeated pieces in an assembly, or split the design with include",
        "A file of more than 2 MiB (2,097,152 bytes) is refused before it is read: a design is written by "
        "hand, and a limit keeps untrusted text from using up the machine.",
    ),
    Code(
        "empty-file",
        "error",
        "{path} is empty",
        "begin with the line: nodal 1",
        "The file holds no statement: nothing at all, blank lines, or comments alone.",
        ("", "\n\n", "# nothing but a comment\n"),
    ),
    Code(
        "missing-version",
        "error",
        "the file does not begin with its version",
        "write nodal {version} as the first statement",
        "The first statement of every file, included ones too, is the version of the language: nodal 1. "
        "Comments and blank lines may stand before it. It lets a later program read today's files as they "
        "were meant.",
        ('title "x"\n', "let a = 1\nnodal 1\n"),
    ),
    Code(
        "newer-version",
        "error",
        "the file is written in version {version} of the language, this program reads version {known}",
        "update the program, or write the file for version {known}",
        "The file says that it needs a later version of the language than this program knows. Nothing else "
        "in it is looked at, since it may mean something new.",
        ("nodal 2\n", "# later\nnodal 17\nfuture statement\n"),
    ),
    Code(
        "bad-version",
        "error",
        '"{found}" is no version of the language',
        "write nodal {version}",
        "Versions are the whole numbers from 1 on, without a unit.",
        ("nodal 0\n", "nodal 1.0\n", "nodal 1 m\n"),
    ),
    Code(
        "version-again",
        "error",
        "the version stands here again",
        "delete it: it is the first statement of a file, once",
        "A file has one version, before everything else. An included file has its own.",
        ("nodal 1\nlet a = 1\nnodal 1\n",),
    ),
    # Characters
    Code(
        "look-alike",
        "error",
        '"{found}" ({what}) means nothing here',
        "write {fix}",
        "Some characters look like one that the language uses but are another: dashes from a word processor, "
        "typographic quotes, the masculine ordinal º in place of the degree sign °, the double bar ‖ in "
        "place of ∥. They are refused because a reader could not tell them apart.",
        (
            "nodal 1\nbranch a: b to ground = 1 kΩ ‖ 1 pF\n",
            "nodal 1\nbranch a: b to ground = 1 kΩ – 1 pF\n",
            "nodal 1\ntemperature 23 ºC\n",
            "nodal 1\ntitle “Probe”\n",
            "nodal 1\nlet a = 2 × 3\n",
            "nodal 1\nrequire r: gain(x) ≤ 3\n",
            "nodal 1\nlet a =\u20021 V\n",
            "nodal 1\nlet a == 1\n",
        ),
    ),
    Code(
        "hidden-character",
        "error",
        "a hidden character ({found}, {what}) stands here",
        "delete it",
        "Characters that cannot be seen, or that change the direction of writing, can make a text read "
        "differently from what it says. They are refused everywhere, in comments and texts too.",
        (
            "nodal 1\nlet a\u200b = 1\n",
            "nodal 1\n# a comment \u202e drawkcab\n",
            'nodal 1\ntitle "x\u2066y"\n',
        ),
    ),
    Code(
        "unknown-character",
        "error",
        '"{found}" ({what}) means nothing in the language',
        "",
        "The character is no part of a name, a number, an operator or a bracket, and stands outside comments"
        " and texts.",
        ("nodal 1\nlet a = 1 V ?\n", "nodal 1\nlet a = $5\n", "nodal 1\nlet a\x00 = 1\n"),
    ),
    Code(
        "name-form",
        "error",
        '"{found}" is no name: "{char}" ({what}) cannot stand in it',
        "{fix}",
        "Names are made of the letters a to z and A to Z, digits and the underscore, and begin with a letter"
        " or an underscore. Other letters are refused since many look alike.",
        ("nodal 1\nlet größe = 1\n", "nodal 1\nbranch \u0430: b to ground = 1 Ω\n", "nodal 1\nlet R_µ = 1\n"),
    ),
    # Numbers
    Code(
        "number-form",
        "error",
        '"{found}" {why}',
        "{fix}",
        "A number is digits, or digits on both sides of one point, with an exponent if need be: 4, 4.7, "
        "4.7e3. A comma never is a decimal point or a separator of thousands, and a letter never stands for "
        "the point.",
        (
            "nodal 1\nlet a = 1,5 V\n",
            "nodal 1\nlet a = .5 V\n",
            "nodal 1\nlet a = 5. V\n",
            "nodal 1\nlet a = 4k7\n",
            "nodal 1\nlet a = 1,000,000 Ω\n",
            "nodal 1\nlet a = 1.2.3 V\n",
            "nodal 1\nlet a = 1_000\n",
        ),
    ),
    Code(
        "missing-unit",
        "error",
        '"{found}" has no unit',
        "{fix}",
        "A number with an SI prefix needs its unit: 9 MΩ, 10 pF, 270 nH. The unit decides which part it is. "
        "A number alone has no dimension; 1 m is a metre, never a thousandth.",
        (
            "nodal 1\nbranch tip: gate to ground = 9 M ∥ 9.5 pF\n",
            "nodal 1\nlet a = 10 k\n",
            "nodal 1\nlet a = 4.7 n\n",
        ),
    ),
    Code(
        "unknown-unit",
        "error",
        '"{unit}" in "{number}" is no unit',
        "{fix}",
        "The units are Ω (or ohm) S F H Hz s m V A W K °C (or degC) ° (or deg) % ppm dB with SI prefixes, "
        "whose case counts: m is milli, M is mega. A rate may follow: /m /K /V /W /√Hz (or /rtHz).",
        (
            "nodal 1\nbranch a: b to ground = 10 uf\n",
            "nodal 1\nlet a = 3 volts\n",
            "nodal 1\nsweep 1 hz to 1 MHZ, 10 per decade\n",
            "nodal 1\nlet a = 3 xyzzy\n",
        ),
    ),
    # Brackets and texts
    Code(
        "unclosed",
        "error",
        'nothing closes this "{bracket}"',
        'write "{closer}" where it ends',
        "Every opening parenthesis or brace needs its closing one. The place shown is the opening one; where"
        " the closing one should stand is not known.",
        (
            "nodal 1\nbranch a: b to ground = (1 kΩ ∥ 1 pF\nbranch c: b to ground = 1 Ω\n",
            "nodal 1\ncase one {\n  let a = 1\n",
            "nodal 1\nstock s {\n  capacitance 1 pF/m\nlet a = 1\n",
        ),
    ),
    Code(
        "nothing-to-close",
        "error",
        'this "{bracket}" closes nothing',
        'delete it, or write the "{opener}" that it should close',
        "A closing parenthesis or brace stands where none is open.",
        ("nodal 1\nlet a = 1)\n", "nodal 1\nlet a = 1\n}\n"),
    ),
    Code(
        "unclosed-text",
        "error",
        "nothing closes this text",
        "write '\"' where it ends, on the same line",
        "A text runs from one quotation mark to the next on the same line.",
        ('nodal 1\ntitle "Probe\n',),
    ),
    Code(
        "too-deep",
        "error",
        "brackets nest more than {limit} levels deep here",
        "name parts of the expression with let",
        "Parentheses and braces may stand inside one another to a depth of 100. Nothing else in the file is "
        "looked at.",
        ("nodal 1\nlet a = " + "(" * 101 + "1" + ")" * 101 + "\n",),
    ),
    # Statements
    Code(
        "unknown-statement",
        "error",
        'no statement begins with "{found}"',
        "{fix}",
        "The first word of a line says which statement it is. A line goes on from the one before only inside "
        "parentheses, or where that one ends in a comma, a colon, an equals sign or an operator.",
        ("nodal 1\nbrnach a: b to ground = 1 Ω\n", "nodal 1\nhello\n", "nodal 1\nlet a = 1\n  b\n"),
    ),
    Code(
        "syntax",
        "error",
        "expected {expected}, found {found}",
        "{help}",
        "The statement does not go on as such a statement does. The help shows how it reads as a whole; "
        "brackets mark what may be left out.",
        (
            "nodal 1\nlet a 1\n",
            "nodal 1\nbranch a: b to ground = 1 Ω 2 Ω\n",
            "nodal 1\nbranch a b to ground = 1 Ω\n",
            "nodal 1\nbranch a: b to ground =\n",
            "nodal 1\nbranch a: b to ground = 1 Ω\n  ∥ 1 pF\n",
            "nodal 1\nsweep 1 Hz to 1 kHz\n",
            "nodal 1\nstock s {\n  48 pF/m\n}\n",
            "nodal 1\ncase {\n  let a = 1\n}\n",
        ),
    ),
    Code(
        "node-count",
        "error",
        "{what} has {asked} nodes, here it has {given}",
        "write {form}",
        "Sources, branches, contacts and readings stand between two nodes; a cable and an amplifier have two"
        " on each side, the second of which is the reference of the first.",
        (
            "nodal 1\nbranch a: b = 1 Ω\n",
            "nodal 1\nbranch a: b to c to d = 1 Ω\n",
            "nodal 1\ncontact a: b\n",
            "nodal 1\ncable c: a to b = 1 m of s\n",
            "nodal 1\namplifier c: a to b, ground { gain 1 }\n",
            "nodal 1\nreading r: a times 10\n",
        ),
    ),
    Code(
        "dotted-name",
        "error",
        '"{found}" cannot stand here: the name has a dot',
        "choose a name without a dot",
        "A dot leads from a branch or a place to what is inside it: tip.C, p.upper. Such a name can be read "
        "and used, but not declared; it comes into being by itself.",
        ("nodal 1\nbranch a.b: c to ground = 1 Ω\n", "nodal 1\ncase a.b { let x = 1 }\n"),
    ),
)
