"""Findings about how a network is connected."""

from __future__ import annotations

from nodal.language.codes.row import Code

_FRAME = "nodal 1\nsource s: a to ground = 1 V behind 50 Ω\n"
_SPLIT = "nodal 1\nunder test { source s: a to ground = 1 V behind 50 Ω -- 10 nH as lead\n"

TOPOLOGY: tuple[Code, ...] = (
    Code(
        "no-source",
        "error",
        "no source drives the network",
        "add one, for example `source drive: tip to ground = 1 V behind 50 Ω`",
        "Every result is per volt or per ampere of a source, so a design needs at least one.",
        ("nodal 1\nbranch r: a to ground = 1 Ω",),
    ),
    Code(
        "nothing-there",
        "error",
        'the {what} "{name_}" is on what does not exist: {reason}',
        "correct the name, or add what is missing",
        "Readings and contacts stand at nodes that parts are connected to, couplings between inductors, "
        "drives move "
        "sources.",
    ),
    Code(
        "floating-nodes",
        "error",
        "{nodes} {verb} no path to ground",
        "settle the voltage, for example with a large resistor: `branch leak: {example} to ground = 1 TΩ`",
        "The voltage of a node is its voltage against ground, so some part has to settle it. Nothing is "
        "added behind "
        "your back. An amplifier's input, an open current source and parts of 0 F or 0 S settle nothing; "
        "capacitors do.",
        (
            _FRAME + "branch r: b to c = 1 Ω",
            _FRAME + "branch r: b to ground = 0 F\nbranch t: b to c = 1 Ω",
        ),
    ),
    Code(
        "open-current-source",
        "error",
        'the current of "{source}" has no way back from {nodes}',
        "give it a path, for example `shunted by` a resistor in the source",
        "An ideal current source drives its current whatever the voltage. Where no part carries it back "
        "there is no "
        "solution.",
        ("nodal 1\nsource s: a to ground = 1 A\nbranch r: a to b = 1 Ω",),
    ),
    Code(
        "source-loop",
        "error",
        "ideal voltages in a loop contradict each other: {parts}",
        "put an impedance into the loop: `behind 1 mΩ` in a source, `output 1 mΩ` in an amplifier",
        "Voltage sources without impedance, amplifier outputs without an output network and shorts (0 Ω, 0 "
        "H, 0 m of "
        "cable) must not close a loop: the current in it would have no value.",
        (
            "nodal 1\nsource s: a to ground = 1 V\nsource t: a to ground = 2 V",
            "nodal 1\nsource s: a to ground = 1 V\nbranch r: a to ground = 0 Ω",
            "nodal 1\nsource s: a to ground = 1 V\nbranch r: a to ground = 1 Ω\n"
            "amplifier m: a, ground to a, ground { gain 2 }",
        ),
    ),
    Code(
        "impossible-coupling",
        "error",
        "the couplings among {parts} are too strong together",
        "lower them: no currents may leave the stored energy below zero",
        "Mutual inductances have to form a positive semi-definite matrix with the inductances. Two windings "
        "that are "
        "both tightly coupled to a third are coupled to each other, with the right sign.",
        (
            _FRAME + "branch x: a to ground = 1 µH\nbranch y: a to ground = 1 µH\n"
            "branch z: a to ground = 1 µH\n"
            "coupling xy: x.L with y.L = 0.9\ncoupling yz: y.L with z.L = 0.9\ncoupling zx: z.L with x.L = "
            "-0.9",
        ),
    ),
    Code(
        "impossible-shield",
        "error",
        'the cable "{cable}" has too little inductance for its shield\'s',
        "raise `inductance` to {least} at least, or bring `shield_coupling` nearer to 1",
        "With the shield inductance Ls and the coupling k, the loop's inductance L is at least (1 - k)² Ls; "
        "less would "
        "let the cable yield energy.",
        (
            _FRAME + "stock coax { inductance 10 nH/m; capacitance 100 pF/m; shield_inductance 1 µH/m; "
            "shield_coupling 0.5 }\ncable c: a, ground to b, g = 1 m of coax\nbranch l: b to g = 50 Ω\n"
            "branch e: g to ground = 1 Ω",
        ),
    ),
    Code(
        "sides-meet",
        "error",
        'the circuit under test and the chain meet at "{node}", which is no contact',
        'add a contact there, for example `contact at_{node}: {node} to ground`, or move "{chain}" or '
        '"{test}" to '
        "the other side",
        "What the chain changes is told from the circuit under test alone and the chain alone. The two may "
        "meet at the "
        "nodes of contacts and at ground only.",
        (
            _SPLIT + "branch r: a to b = 1 kΩ\nbranch e: b to ground = 1 kΩ }\ncontact t: a to ground\n"
            "branch p: a to ground = 1 MΩ\nbranch q: b to ground = 1 MΩ",
        ),
    ),
    Code(
        "amplifier-loop",
        "error",
        "{parts} {does} in a loop that has no solution",
        "check what feeds back to the input: the gain around the loop is exactly one, or an output current "
        "has no path",
        "An amplifier whose input follows its own output with a loop gain of exactly one asks for any "
        "voltage or for "
        "none. Real amplifiers have poles, an input and an output network, which you can add.",
        (
            _FRAME + "branch r: a to b = 1 kΩ\namplifier m: b, ground to b, ground { gain 1 }",
            "nodal 1\nsource s: a to ground = 1 V\nbranch r: a to b = 1 kΩ\nbranch q: b to c = 1 kΩ\n"
            "branch e: b to ground = 1 kΩ\namplifier m: b, ground to c, ground { gain 3 }",
        ),
    ),
    Code(
        "dangling-node",
        "warning",
        'only "{part}" touches the node "{node}"',
        "connect it, read it, or silence this with `allow dangling-node: {node}`",
        "A node at which one part ends and nothing is read is often a slip of spelling. An open end that is "
        "meant "
        "can be allowed.",
        (_FRAME + "branch r: a to b = 1 Ω",),
    ),
    Code(
        "shorted-part",
        "warning",
        "{part} is short-circuited: both ends are one node",
        "check the nodes, or remove it",
        "The part has no influence, because its two ends are the same node or joined by 0 Ω, 0 H or 0 m.",
        (
            _FRAME + "branch r: a to ground = 1 Ω\nbranch q: a to a = 1 Ω",
            _FRAME + "branch q: a to b = 1 Ω ∥ 0 Ω\nbranch c: b to ground = 1 pF",
        ),
    ),
    Code(
        "source-shorted",
        "warning",
        'the source "{source}" is short-circuited at its terminals',
        "check the nodes that it stands between",
        "Both terminals of the source are one node, so it drives nothing beyond the impedance behind it.",
        (_FRAME + "branch r: a to ground = 0 Ω",),
    ),
    Code(
        "coupling-across-split",
        "warning",
        '"{coupling}" couples {first} under test with {second} of the chain',
        "if that is meant, silence this with `allow coupling-across-split: {coupling}`",
        "The coupling counts in loaded voltages and readings. The circuit under test alone and the chain "
        "alone are "
        "without it, so undisturbed voltages and impedances at contacts do not show it.",
        (
            _SPLIT + "branch e: a to ground = 1 kΩ }\nbranch p: a to b = 10 nH\n"
            "branch q: b to ground = 1 MΩ\n"
            "coupling k: p.L with s.lead = 0.1",
        ),
    ),
    Code(
        "capacitive-node",
        "note",
        "{nodes} {verb} held by capacitors alone",
        "at 0 Hz the value is the capacitive limit; a leakage resistor would settle it",
        "No part carries direct current to these nodes. Their value at 0 Hz follows from the capacitors "
        "with no net "
        "charge on the island, the limit of ever lower frequencies; a real network would drift with its "
        "leakage.",
        (_FRAME + "branch c: a to b = 1 pF\nbranch d: b to ground = 1 pF",),
    ),
)
