"""Findings about what a text means: names, quantities, dimensions, networks, requirements."""

from __future__ import annotations

from nodal.language.codes.row import Code

_FRAME = "nodal 1\nsource s: a to ground = 1 V behind 50 Ω\n"

MEANING: tuple[Code, ...] = (
    Code(
        "unknown-name",
        "error",
        'there is no {what} "{unknown}"',
        "{hint}",
        "A name is used that nothing declares. Names are case-sensitive; nodes "
        "are one namespace, everything declared is another. Inside an assembly "
        "only its own names, its parameters and the values of the file are known.",
        (
            _FRAME + "branch t: a to ground = r_tip",
            _FRAME + "cable c: a, ground to b, ground = 1 m of coax",
            _FRAME + "reading m: tip to ground",
            _FRAME + "drive d: q by 1",
            _FRAME + "require w: bandwith(m) >= 1 MHz",
            _FRAME + "branch t: a to ground = sqr(4) * 1 Ω",
            _FRAME + "branch t: a to ground = wire(100 mm, 1 mm)\ncoupling k: t.C with t.L = 0.1",
        ),
    ),
    Code(
        "duplicate-name",
        "error",
        'the name "{duplicate}" is declared twice',
        "choose another name for one of them",
        "Everything that is declared shares one namespace: values, sources, "
        "branches, stocks, cables, readings and so on. In a case a statement that "
        "bears an existing name replaces it, once a case. Parts of one branch "
        "need different names too.",
        (
            _FRAME + "let x = 1 Ω\nbranch x: a to ground = x",
            _FRAME + "branch t: a to ground = 1 Ω as top ∥ 2 Ω as top",
        ),
    ),
    Code(
        "let-cycle",
        "error",
        "this value refers to itself: {names}",
        "give one of them a value that does not depend on the others",
        "A `let` may use other lets in any order, but not itself, directly or through others.",
        (_FRAME + "let p = 2 * q\nlet q = p\nbranch t: a to ground = p * 1 Ω",),
    ),
    Code(
        "dotted-let",
        "error",
        '"{name_}" has a dot: arguments of a place are set in a case',
        "write `case NAME {{ let {name_} = VALUE }}`, or give the argument where the assembly is used",
        "`let place.argument = VALUE` overrides an argument that was given where "
        "the assembly is used, in one case.",
        (_FRAME + "let n.skew = 1 %",),
    ),
    Code(
        "wrong-dimension",
        "error",
        "expected {expected}, found {found}",
        "",
        "Arithmetic and every place of a value are checked for dimensions: only "
        "like quantities add, a branch takes resistances (Ω), conductances (S), "
        "capacitances (F) and inductances (H). A percentage is a plain number, "
        "and a plain number has no unit.",
        (
            _FRAME + "branch t: a to ground = 1 kΩ + 1 pF",
            _FRAME + "branch t: a to ground = 3 V",
            _FRAME + "branch t: a to ground = 9 MΩ ± 3 pF",
            _FRAME + "branch t: a to ground = 9 MΩ ± 0.1",
            _FRAME + "sweep 1 s to 2 Hz, 10 per decade",
        ),
    ),
    Code(
        "unit-not-for-arithmetic",
        "error",
        "{unit} takes no part in arithmetic",
        "write the number itself, or a ratio or kelvins in place of it",
        "Decibels and degrees Celsius are scales, not amounts: adding or "
        "multiplying them means different things to different people, so the "
        "language does neither.",
        (
            _FRAME + "temperature 20 °C + 3 °C",
            _FRAME + "let g = 2 * 3 dB\nbranch t: a to ground = g * 1 Ω",
        ),
    ),
    Code(
        "division-by-zero",
        "error",
        "this divisor is zero",
        "",
        "The value after `/` is exactly zero.",
        (_FRAME + "let z = 0\nbranch t: a to ground = 1 Ω / z",),
    ),
    Code(
        "negative-root",
        "error",
        "the square root of a negative value",
        "",
        "The argument of `sqrt` is below zero.",
        (_FRAME + "branch t: a to ground = sqrt(-4) * 1 Ω",),
    ),
    Code(
        "overflow",
        "error",
        "this value is too large to compute with",
        "",
        "The result is beyond the largest floating-point number, about 1.8e308 in SI units.",
        (
            _FRAME + "branch t: a to ground = 1e400 Ω",
            _FRAME + "branch t: a to ground = 1e200 Ω * 1e200",
        ),
    ),
    Code(
        "underflow",
        "error",
        "this number is too small to compute with",
        "write 0 if that is meant",
        "The number is not zero but below the smallest floating-point number, about 5e-324 in SI units.",
        (_FRAME + "branch t: a to ground = 1e-400 Ω",),
    ),
    Code(
        "formula-too-long",
        "error",
        "written out, this value takes more than {limit} operations on toleranced values",
        "remove tolerances from values that only repeat others",
        "Lets that each use another several times grow without bound when they "
        "are written out, as they have to be where tolerances take part.",
        (
            _FRAME
            + "let x0 = 1 Ω ± 1 %\n"
            + "".join(f"let x{i} = x{i - 1} + x{i - 1}\n" for i in range(1, 20))
            + "branch t: a to ground = x19",
        ),
    ),
    Code(
        "negative-value",
        "error",
        "{what} is {value}; it has to be {bound}",
        "",
        "Values of parts, lengths, times and the like are not negative: a passive "
        "part below zero ohm, farad or henry is a mistake here.",
        (
            _FRAME + "branch t: a to ground = -1 Ω",
            _FRAME + "branch t: a to ground = 1 pF - 2 pF",
            _FRAME + "stock k { capacitance 1 pF/m }\ncable c: a, ground to b, ground = -1 m of k",
            _FRAME + "reading m: a to ground times 0",
        ),
    ),
    Code(
        "beyond-one",
        "error",
        "{what} is above 1",
        "write a fraction between 0 and 1",
        "The velocity of a cable is a fraction of that of light; the shield's coupling is 1 at most.",
        (_FRAME + "stock k { impedance 50 Ω; velocity 1.2 }\ncable c: a, ground to b, ground = 1 m of k",),
    ),
    Code(
        "network-in-arithmetic",
        "error",
        "{sign} joins parts, and cannot stand inside arithmetic or a value",
        "multiply the values of the parts instead",
        "`∥` and `--` make networks of parts. A network is no quantity: it cannot "
        "be multiplied, added, named by `let` or given to a function.",
        (
            _FRAME + "branch t: a to ground = 2 * (4 MΩ -- 1 pF)",
            _FRAME + "let z = 1 Ω ∥ 1 pF\nbranch t: a to ground = z",
        ),
    ),
    Code(
        "qualifier-in-arithmetic",
        "error",
        "`{word}` qualifies a whole value and cannot stand inside arithmetic",
        "give the qualified value a name with `let`, and use the name",
        "Tolerance, trim, ratings, drift, loss and names belong to a value as it "
        "stands at its place. A toleranced `let` can take part in arithmetic: its "
        "spread goes along.",
        (_FRAME + "branch t: a to ground = 2 * (1 Ω ± 1 %)",),
    ),
    Code(
        "qualified-in-arithmetic",
        "error",
        'arithmetic would lose what "{text}" is qualified by besides ±',
        "qualify the result instead",
        "A `let` with trim, ratings, drift or loss keeps them where its name "
        "stands alone. What they would be after arithmetic is not defined.",
        (_FRAME + "let x = 1 Ω rated 5 V\nbranch t: a to ground = 2 * x",),
    ),
    Code(
        "qualifier-twice",
        "error",
        "{word} is given twice",
        "keep one of them",
        "Each qualifier may follow a value once; a `let` brings its own along.",
        (
            _FRAME + "branch t: a to ground = 1 Ω ± 1 % ± 2 %",
            _FRAME + "branch t: a to ground = 1 Ω rated 5 V and 6 V",
        ),
    ),
    Code(
        "qualifier-misplaced",
        "error",
        "`{word}` cannot qualify this value",
        "",
        "Which qualifiers a value takes depends on where it stands: a part takes "
        "all, `loss` only a capacitor, a `let` all but `as`; lengths, fields, "
        "arguments and amplitudes take `±`, and a sweep or a limit none (`=` in a "
        "requirement takes `±`).",
        (
            _FRAME + "branch t: a to ground = 1 Ω loss 0.1",
            _FRAME + "let x = 1 Ω as top\nbranch t: a to ground = x",
            _FRAME + "reading m: a to ground\nrequire w: gain(m) at 1 Hz <= 1 ± 1 %",
        ),
    ),
    Code(
        "negative-tolerance",
        "error",
        "a tolerance below zero",
        "write its half-width: ± 1 %",
        "`±` is followed by the half-width of the interval, zero or more.",
        (_FRAME + "branch t: a to ground = 1 Ω ± -1 %",),
    ),
    Code(
        "percent-of-zero",
        "error",
        "a percentage of zero is zero",
        "write the half-width with its unit",
        "A relative tolerance of a value that is zero allows nothing.",
        (_FRAME + "reading m: a to ground\nrequire w: phase(m) at 1 Hz = 0 ° ± 1 %",),
    ),
    Code(
        "trim-reversed",
        "error",
        "the trim range runs from {low} down to {high}",
        "write the smaller end first",
        "`trim` is followed by the lower and the upper end of the range.",
        (_FRAME + "branch t: a to ground = 9 pF trim 10 pF to 8 pF",),
    ),
    Code(
        "trim-misses-value",
        "error",
        "the trim range from {low} to {high} does not contain the value, {value}",
        "",
        "A part that can be trimmed is set somewhere within its range.",
        (_FRAME + "branch t: a to ground = 20 pF trim 5 pF to 10 pF",),
    ),
    Code(
        "wrong-arguments",
        "error",
        "{function} takes {wanted}, not {found}",
        "",
        "The function is given too few or too many values.",
        (
            _FRAME + "branch t: a to ground = sqrt(4, 9) * 1 Ω",
            _FRAME + "branch t: a to ground = wire(100 mm)",
        ),
    ),
    Code(
        "short-wire",
        "error",
        "the {label} is {length}, less than five diameters of the wire ({limit})",
        "the formulas hold for thin wire: write the inductance itself",
        "The inductance formulas of wire, rectangle and circle assume a wire that "
        "is thin against its length or the loop.",
        (_FRAME + "branch t: a to ground = wire(4 mm, 1 mm)",),
    ),
    Code(
        "inner-node",
        "error",
        '"{node}" is a node inside a branch or an assembly: it can be read, not connected to',
        "split the branch in two and name the node, or read it with `reading`",
        "Nodes inside, such as `tip.1` or `column.7.bottom`, are there to be "
        "looked at; connecting to them would change what the branch or assembly "
        "says it is.",
        (_FRAME + "branch t: a to ground = 1 Ω -- 1 pF\nbranch u: t.1 to ground = 1 Ω",),
    ),
    Code(
        "unknown-let",
        "error",
        'there is no value or argument "{unknown}" to set',
        "{hint}",
        "Values can be set from outside by the names that `let` gives them, and "
        "arguments of places as place.argument.",
    ),
    Code(
        "override-form",
        "error",
        'the value given for "{name_}" is no single value',
        "write a number with its unit, as in 12 mm",
        "A value set from outside is written as in a `let` statement.",
    ),
    Code(
        "source-outside",
        "error",
        'the source "{source}" stands outside `under test`',
        "move it into the braces of `under test`",
        "Where a file says what is under test, that is the whole circuit before "
        "it is touched, its sources included.",
        (_FRAME + "under test { branch u: a to ground = 1 kΩ }",),
    ),
    Code(
        "source-network",
        "error",
        "a source in {unit} stands `{right}` a network, not `{wrong}`",
        "write `{right}`",
        "A voltage source has its impedance in series (`behind`), a current "
        "source in parallel (`shunted by`).",
        (_FRAME + "source i: b to ground = 1 A behind 50 Ω",),
    ),
    Code(
        "source-twice",
        "error",
        'the source "{source}" stands twice in this drive',
        "keep one of them, with the sum of the weights",
        "A drive gives each source one weight.",
        (_FRAME + "drive d: s by 1, s by 2",),
    ),
    Code(
        "mixed-drive",
        "error",
        'the source "{source}" is in {unit}, the others of this drive in {other}',
        "make two drives",
        "Results are per unit of a drive, so the sources that move together must "
        "all be in volts or all in amperes.",
        (_FRAME + "source i: a to ground = 1 A\ndrive d: s by 1, i by 1",),
    ),
    Code(
        "coupling-without-inductor",
        "error",
        '"{word}" is no inductor and has none in it',
        "couple inductors: BRANCH.L",
        "Magnetic coupling is between two inductors, named as parts (`tip.L`) or "
        "by a branch that holds just one.",
        (_FRAME + "branch t: a to ground = 1 Ω\nbranch u: a to ground = 1 nH\ncoupling k: t with u = 0.1",),
    ),
    Code(
        "coupling-ambiguous",
        "error",
        'there are several inductors in "{word}": {names}',
        "name the one you mean",
        "A branch can be named in a coupling only if it holds a single inductor.",
        (
            _FRAME + "branch t: a to ground = 1 nH -- 2 nH\nbranch u: a to ground = 1 "
            "nH\ncoupling k: t with u = 0.1",
        ),
    ),
    Code(
        "coupling-itself",
        "error",
        '"{inductor}" cannot be coupled to itself',
        "",
        "A coupling takes two different inductors.",
        (_FRAME + "branch t: a to ground = 1 nH\ncoupling k: t.L with t = 0.1",),
    ),
    Code(
        "coupling-twice",
        "error",
        "{first} and {second} are coupled twice",
        "keep one of the couplings",
        "Two inductors have one mutual inductance.",
        (
            _FRAME + "branch t: a to ground = 1 nH\nbranch u: a to ground = 1 nH\ncoupling "
            "k: t with u = 0.1\ncoupling m: u with t = 0.2",
        ),
    ),
    Code(
        "coupling-beyond-one",
        "error",
        "the coupling is {found}, and cannot be beyond {limit}",
        "",
        "The mutual inductance of two coils is at most the geometric mean of "
        "their inductances: a coefficient of 1.",
        (_FRAME + "branch t: a to ground = 1 nH\nbranch u: a to ground = 1 nH\ncoupling k: t with u = 1.1",),
    ),
    Code(
        "field-twice",
        "error",
        'the field "{field}" is given twice',
        "keep one of them",
        "Each field of a stock or an amplifier may be given once.",
        (
            _FRAME + "stock k { resistance 1 Ω/m; resistance 2 Ω/m }\ncable c: a, ground to "
            "b, ground = 1 m of k",
        ),
    ),
    Code(
        "field-clash",
        "error",
        "{first} and {second} cannot both be given",
        "keep one of them",
        "Impedance and velocity give the inductance and the capacitance; an "
        "attenuation gives the skin effect; an amplifier has a gain or a "
        "transconductance.",
        (
            _FRAME + "stock k { impedance 50 Ω; velocity 0.7; inductance 250 nH/m }\ncable "
            "c: a, ground to b, ground = 1 m of k",
        ),
    ),
    Code(
        "missing-field",
        "error",
        "{given} needs {missing}",
        "",
        "Impedance and velocity belong together; an amplifier needs a gain or a transconductance.",
        (
            _FRAME + "stock k { impedance 50 Ω }\ncable c: a, ground to b, ground = 1 m of k",
            _FRAME + "amplifier u: a, ground to b, ground { delay 1 ns }",
        ),
    ),
    Code(
        "field-form",
        "error",
        "this field is not written as it should be",
        "write {form}",
        "Most fields have one value; skin, attenuation and common_mode have a "
        "value and the frequency it holds at, poles and zeros a list of "
        "frequencies, each with `q` for a pair.",
        (_FRAME + "stock k { skin 1 Ω/m }\ncable c: a, ground to b, ground = 1 m of k",),
    ),
    Code(
        "attenuation-too-small",
        "error",
        "the other losses alone attenuate by {least} at this frequency",
        "give a larger attenuation, or less resistance, conductance or loss",
        "The skin effect is worked out such that the whole attenuation at the "
        "frequency is the one given; it can only add to the other losses.",
        (
            _FRAME + "stock k { impedance 50 Ω; velocity 0.7; resistance 10 Ω/m; "
            "attenuation 0.1 dB/m at 1 MHz }\ncable c: a, ground to b, ground = 1 "
            "m of k",
        ),
    ),
    Code(
        "shield-without-fields",
        "error",
        "the shield ends on different nodes, {near} and {far}, but the stock "
        '"{stock}" says nothing about a shield',
        "give the stock shield_resistance or shield_inductance, or end the shield on one node",
        "A cable whose shield joins two nodes is a conductor between them. "
        "Without its resistance or inductance it would be a short.",
        (_FRAME + "stock k { capacitance 1 pF/m; resistance 1 Ω/m }\ncable c: a, ground to b, e = 1 m of k",),
    ),
    Code(
        "too-many-zeros",
        "error",
        "more zeros than poles",
        "give as many poles as zeros",
        "The gain of an amplifier cannot grow without bound with frequency. A pair counts as two.",
        (_FRAME + "amplifier u: a, ground to b, ground { gain 1; zeros 1 MHz }",),
    ),
    Code(
        "misplaced",
        "error",
        "{kind} cannot stand {where}",
        "{fix}",
        "Under test stand the parts of the circuit; in an assembly parts, values "
        "and uses of other assemblies; in a case all but cases, includes and the "
        "title; `omit` only in a case; in `case nominal` requirements only, "
        "because it is the file as it is.",
        (
            _FRAME + "omit s",
            _FRAME + "assembly x(p to q) { reading m: p to q }",
            _FRAME + 'case x { include "y.nodal" }',
            _FRAME + "case nominal { let x = 1 }",
        ),
    ),
    Code(
        "given-twice",
        "error",
        "`{kind}` is given twice",
        "keep one of them",
        "A design has one title, one sweep, one edge or step, and one temperature; a case may have its own.",
        (_FRAME + "sweep 1 Hz to 2 Hz, 3 per decade\nsweep 1 Hz to 3 Hz, 3 per decade",),
    ),
    Code(
        "range-reversed",
        "error",
        "the range from {low} to {high} is empty",
        "write the lower frequency first",
        "A sweep or range of frequencies runs upward.",
        (_FRAME + "sweep 2 Hz to 1 Hz, 3 per decade",),
    ),
    Code(
        "outside-window",
        "error",
        "{time} is beyond the time watched, {window}",
        "watch for longer: `over TIME`",
        "The edge, and the time at which the top is read, lie within the time watched.",
        (_FRAME + "edge 2 ns over 1 ns",),
    ),
    Code(
        "sweep-too-long",
        "error",
        "the sweep has more than {limit} points",
        "take fewer points per decade",
        "The number of frequencies in a sweep is limited.",
        (_FRAME + "sweep 1 Hz to 1 GHz, 1e9 per decade",),
    ),
    Code(
        "too-many-parts",
        "error",
        "the design has more than {limit} parts",
        "",
        "The number of parts, places and sections of chains is limited. It is "
        "counted before anything is built.",
        (_FRAME + "assembly x(p to q) { branch r: p to q = 1 Ω }\nchain c: 1000000000 of x(a to ground)",),
    ),
    Code(
        "too-much-text",
        "error",
        "the assemblies used here have more than {limit} characters, each counted as often as it is used",
        "make the assemblies shorter, or use them less often",
        "What assemblies say is worked out anew for every place, and for every section of a chain that "
        "differs from the others. The length of all that is limited, so that a short text cannot ask for "
        "endless work.",
        (
            _FRAME
            + "assembly x(p to q) { branch r: p to q = 1 Ω"
            + " + 0 Ω" * 2000
            + " }\n"
            + "assembly y(p to q) { "
            + "; ".join(f"place u{i}: x(p to q)" for i in range(40))
            + " }\n"
            + "assembly z(p to q) { "
            + "; ".join(f"place u{i}: y(p to q)" for i in range(40))
            + " }\n"
            + "place c: z(a to ground)",
        ),
    ),
    Code(
        "too-many-nodes",
        "error",
        "the assemblies used here are connected by more than {limit} nodes",
        "",
        "The nodes by which places and sections of chains are connected are counted, each as often as it is "
        "named. Their number is limited.",
        (
            _FRAME
            + "assembly x("
            + ", ".join(f"p{i}" for i in range(60))
            + " to "
            + ", ".join(f"q{i}" for i in range(60))
            + ") { branch r: p1 to q1 = 1 Ω }\nchain c: 100000 of x("
            + ", ".join(["a"] * 60)
            + " to "
            + ", ".join(["b"] * 60)
            + ")",
        ),
    ),
    Code(
        "require-without-tolerance",
        "error",
        "`=` needs a tolerance",
        "write = VALUE ± TOLERANCE",
        "Computed figures are never exactly equal to a number; say how near is near enough.",
        (_FRAME + "reading m: a to ground\nrequire w: gain(m) at 1 Hz = 1",),
    ),
    Code(
        "figure-arguments",
        "error",
        "{figure} is not asked about in this way",
        "write {form}",
        "Each figure takes certain arguments, in this order; what stands in "
        "brackets may be left out. `nodal explain` of a figure's name is in the "
        "reference.",
        (_FRAME + "reading m: a to ground\nrequire w: gain() at 1 Hz >= 1",),
    ),
    Code(
        "figure-argument-kind",
        "error",
        "{wanted} is expected here",
        "",
        "Readings, contacts and drives are given to figures by name.",
        (_FRAME + "reading m: a to ground\nrequire w: gain(3 Hz) at 1 Hz >= 1",),
    ),
    Code(
        "figure-range",
        "error",
        "{figure} takes {form}",
        "",
        "Figures of one frequency need `at` or a range, over which their extreme "
        "counts; figures of a range take one or the whole sweep; figures of an "
        "edge take neither.",
        (
            _FRAME + "reading m: a to ground\nrequire w: gain(m) >= 1",
            _FRAME + "reading m: a to ground\nrequire w: bandwidth(m) at 1 Hz >= 1 Hz",
        ),
    ),
    Code(
        "figure-without-drive",
        "error",
        "{figure} takes no drive",
        "leave `with` out",
        "The impedance seen at a contact and the noise of a reading do not depend "
        "on which source moves; rejection names its drives itself.",
        (_FRAME + "require w: impedance(s) with s at 1 Hz >= 1 Ω",),
    ),
    Code(
        "which-drive",
        "error",
        "several sources stand in the file, and nothing says which of them moves",
        "write `with DRIVE`, or declare a drive; there are: {names}",
        "With several sources the first `drive` is the default; without any drive "
        "each requirement says which one it is about.",
        (_FRAME + "source t: b to ground = 1 V\nreading m: a to ground\nrequire w: gain(m) at 1 Hz >= 1",),
    ),
    Code(
        "not-a-formal-node",
        "error",
        '"{node}" cannot be a node of an assembly\'s own',
        "write a plain name; ground is the same everywhere",
        "The nodes in an assembly's parentheses are its own names for what it is connected to.",
        (_FRAME + "assembly x(ground to q) { branch r: ground to q = 1 Ω }",),
    ),
    Code(
        "wrong-nodes-of-use",
        "error",
        "{assembly} has {wanted} {where}, here it has {found}",
        "",
        "An assembly is used with as many nodes before `to`, after `to` and after `with` as it declares.",
        (_FRAME + "assembly x(p to q) { branch r: p to q = 1 Ω }\nplace u: x(a, b to ground)",),
    ),
    Code(
        "argument-twice",
        "error",
        'the argument "{argument}" is given twice',
        "keep one of them",
        "Each parameter of an assembly takes one value.",
        (
            _FRAME + "assembly x(p to q; v) { branch r: p to q = v }\nplace u: x(a to "
            "ground; v = 1 Ω, v = 2 Ω)",
        ),
    ),
    Code(
        "argument-missing",
        "error",
        'the argument "{argument}" of {assembly} is missing',
        "write {argument} = VALUE after the `;`",
        "A parameter without a default has to be given wherever the assembly is used.",
        (_FRAME + "assembly x(p to q; v) { branch r: p to q = v }\nplace u: x(a to ground)",),
    ),
    Code(
        "assembly-recursion",
        "error",
        "this assembly uses itself: {names}",
        "",
        "An assembly may be built from others, but not from itself.",
        (_FRAME + "assembly x(p to q) { place y: x(p to q) }",),
    ),
    Code(
        "assembly-too-deep",
        "error",
        "assemblies nest more than {limit} deep here",
        "",
        "Assemblies within assemblies are limited in depth.",
        (
            _FRAME
            + "".join(f"assembly x{i}(p to q) {{ place y: x{i + 1}(p to q) }}\n" for i in range(60))
            + "assembly x60(p to q) { branch r: p to q = 1 Ω }",
        ),
    ),
    Code(
        "section-count",
        "error",
        "a chain of {count} sections",
        "write a whole number, 1 or more",
        "A chain has a whole number of sections.",
        (
            _FRAME + "assembly x(p to q) { branch r: p to q = 1 Ω }\nchain c: 2.5 of x(a to ground)",
            _FRAME + "assembly x(p to q) { branch r: p to q = 1 Ω }\nchain c: 0 of x(a to ground)",
        ),
    ),
    Code(
        "chain-ends",
        "error",
        "{assembly} has {left} before `to` and {right} after it, and cannot be chained",
        "",
        "In a chain the nodes after `to` are joined with those before `to` of the "
        "next section, so there must be as many.",
        (
            _FRAME + "assembly x(p, q to r) { branch u: p to r = 1 Ω; branch v: q to r = 1 "
            "Ω }\nchain c: 2 of x(a, b to ground)",
        ),
    ),
    Code(
        "include-outside",
        "error",
        '"{target}" is outside {root}',
        "",
        "Included files stay inside the repository, or the folder of the first "
        "file where that is in none; symbolic links are followed before this is "
        "checked.",
        (_FRAME + 'include "../../../../../../../../../../../../../../../../../../etc/x.nodal"',),
    ),
    Code(
        "include-loop",
        "error",
        "this file includes itself: {names}",
        "",
        "A file may not include itself, directly or through others.",
    ),
    Code(
        "include-too-deep",
        "error",
        "includes nest more than 100 deep here",
        "",
        "Includes within includes are limited in depth.",
    ),
    Code(
        "include-unreadable",
        "error",
        '"{target}" cannot be included: {reason}',
        "",
        "The included file cannot be opened or is no text.",
        (_FRAME + 'include "no_such_file.nodal"',),
    ),
    Code(
        "spread-below-zero",
        "warning",
        "the tolerance lets this value fall below zero, to {lowest}",
        "write a narrower tolerance, or silence this with `allow spread-below-zero: {allowed}`",
        "No resistance, capacitance, inductance or length is negative. The nominal value is used as it "
        "stands; what spreads values would take negative ones too.",
        (
            _FRAME + "branch c: a to ground = 1 pF ± 2 pF",
            _FRAME + "let x = 1 pF ± 60 %\nbranch c: a to ground = 2 * x - 1 pF",
            _FRAME + "stock k { capacitance 1 pF/m ± 2 pF/m }\ncable c: a, ground to b, ground = 1 m of k\n"
            "branch r: b to ground = 1 Ω",
        ),
    ),
    Code(
        "unused-let",
        "warning",
        'the value "{unused}" is not used',
        "use it, delete it, or write: allow unused-let: {unused}",
        "A named value that nothing uses is often a misspelling elsewhere.",
        (_FRAME + "let x = 1 Ω",),
    ),
    Code(
        "unused-stock",
        "warning",
        'the stock "{unused}" is not used',
        "use it, delete it, or write: allow unused-stock: {unused}",
        "No cable is cut from this stock.",
        (_FRAME + "stock k { capacitance 1 pF/m }",),
    ),
)
