"""Hypothesis strategies that make random networks, flat or as text; needs the `hypothesis` package.

`networks` draws a connected `Network`: a tree over its nodes plus further parts, values log-uniform with
three digits around 1 kΩ, 1 nF and 1 mH (one time constant, 1 µs), and one source or several. `text_of`
writes such a network in the language; expanding the text gives the same network back. `frequencies` draws
frequencies around 159 kHz.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any, Literal

from hypothesis import strategies as st

from nodal.network import Contact, Drive, Network, Reading
from nodal.parts.amplifier import Amplifier, Root
from nodal.parts.base import Part
from nodal.parts.cable import Cable
from nodal.parts.capacitor import Capacitor
from nodal.parts.coupling import Coupling
from nodal.parts.inductor import Inductor
from nodal.parts.resistor import Resistor
from nodal.parts.source import CurrentSource, VoltageSource
from nodal.values import Value

Kind = Literal[
    "resistor", "capacitor", "inductor", "lossy capacitor", "cable", "shielded cable", "coupling", "amplifier"
]

LUMPED: tuple[Kind, ...] = ("resistor", "capacitor", "inductor")
PASSIVE: tuple[Kind, ...] = (*LUMPED, "lossy capacitor", "cable", "shielded cable", "coupling")
EVERY: tuple[Kind, ...] = (*PASSIVE, "amplifier")

OHMS, FARADS, HENRIES, METRES = 1e3, 1e-9, 1e-3, 10.0
CENTRE = 159154.94309189535
"""Hz: where the central values of all parts have the same reactance."""


def _three_digits(centre: float, decades: float) -> st.SearchStrategy[float]:
    limit = round(100 * decades / 2)
    return st.integers(-limit, limit).map(lambda e: float(f"{centre * 10 ** (e / 100):.3g}"))


def values(centre: float, decades: float = 6.0) -> st.SearchStrategy[Value]:
    """A value log-uniform over `decades` around `centre`, with three significant digits."""
    return _three_digits(centre, decades).map(Value)


def frequencies(decades: float = 6.0) -> st.SearchStrategy[float]:
    """Hz, log-uniform over `decades` around `CENTRE`, with three significant digits."""
    return _three_digits(CENTRE, decades)


@st.composite
def networks(
    draw: st.DrawFn,
    kinds: Sequence[Kind] = LUMPED,
    *,
    source: Literal["voltage", "current"] = "voltage",
    ports: int = 1,
    max_nodes: int = 7,
    max_extra: int = 5,
    decades: float = 6.0,
) -> Network:
    """A connected network; `ports` sources of one sort named `port1` … from node `n1` … to ground, each a
    drive.

    Its reading `out` is the voltage between two drawn nodes, `at1` … those of the ports. Kinds that need
    partners (couplings) appear only where they can.
    """
    count = draw(st.integers(max(2, ports + 1), max(max_nodes, ports + 1)), label="nodes")
    nodes = ("ground", *(f"n{i}" for i in range(1, count)))
    ends = [(i, draw(st.integers(0, i - 1))) for i in range(1, count)]
    for _ in range(draw(st.integers(0, max_extra), label="extra parts")):
        a = draw(st.integers(0, count - 1))
        ends.append((a, (a + draw(st.integers(1, count - 1))) % count))
    parts: list[Part] = []
    plain = [kind for kind in kinds if kind not in ("coupling", "amplifier")]
    for number, (a, b) in enumerate(ends):
        parts.append(_part(draw, draw(st.sampled_from(plain)), f"e{number}", a, b, count, decades))
    if "coupling" in kinds:
        parts += _couplings(draw, [part for part in parts if isinstance(part, Inductor)])
    if "amplifier" in kinds and draw(st.booleans(), label="amplifier"):
        # The output gets a node and a resistor of its own, so that it closes no loop of ideal voltages.
        nodes = (*nodes, "stage_out")
        at = [draw(st.integers(0, count - 1)) for _ in range(3)]
        if at[0] == at[1]:
            at[1] = (at[0] + 1) % count
        parts.append(_amplifier(draw, "stage", at[0], at[1], count))
        parts.append(Resistor("stage_load.R", count, at[2], draw(values(OHMS, decades))))
    sources = [f"port{i}" for i in range(1, ports + 1)]
    kind: Any = VoltageSource if source == "voltage" else CurrentSource
    parts += [kind(name, i, 0, Value(1.0), side="test") for i, name in enumerate(sources, 1)]
    first = draw(st.integers(1, count - 1), label="reading")
    second = (first + draw(st.integers(1, count - 1))) % count
    times = Value(draw(st.sampled_from([1.0, 10.0, 0.3])))
    unit = "V" if source == "voltage" else "A"
    return Network(
        nodes=nodes,
        parts=tuple(parts),
        contacts=(Contact("port1", 1, 0),) if ports == 1 else (),
        readings=(
            Reading("out", first, second, times),
            *(Reading(f"at{i}", i, 0) for i in range(1, ports + 1)),
        ),
        drives=tuple(Drive(name, ((name, 1.0),), unit) for name in sources),
        default_drive=sources[0] if ports == 1 else None,
    )


def _part(draw: st.DrawFn, kind: Kind, name: str, a: int, b: int, count: int, decades: float) -> Part:
    if kind == "resistor":
        return Resistor(f"{name}.R", a, b, draw(values(OHMS, decades)))
    if kind == "capacitor":
        return Capacitor(f"{name}.C", a, b, draw(values(FARADS, decades)))
    if kind == "lossy capacitor":
        return Capacitor(
            f"{name}.C", a, b, draw(values(FARADS, decades)), loss=draw(st.sampled_from([1e-4, 0.001, 0.03]))
        )
    if kind == "inductor":
        return Inductor(f"{name}.L", a, b, draw(values(HENRIES, decades)))
    return _cable(draw, kind, name, a, b, count, decades)


def _cable(draw: st.DrawFn, kind: Kind, name: str, a: int, b: int, count: int, decades: float) -> Cable:
    """Impedances around 50 Ω, a few to many wavelengths; its own shield from node to node for "shielded
    cable"."""
    fields: dict[str, Any] = {
        "length": draw(values(METRES, min(decades, 4.0))),
        "inductance": draw(values(250e-9, 1.0)),
        "capacitance": draw(values(100e-12, 1.0)),
    }
    if draw(st.booleans()):
        fields["resistance"] = draw(values(0.1, min(decades, 6.0)))
    if draw(st.booleans()):
        fields["conductance"] = draw(values(1e-6, min(decades, 6.0)))
    if draw(st.booleans()):
        fields["skin"] = (draw(values(1.0, 2.0)).nominal, 1e8)
    if draw(st.booleans()):
        fields["loss"] = draw(st.sampled_from([1e-4, 0.002]))
    near = far = 0
    if kind == "shielded cable":
        near, far = draw(st.integers(0, count - 1)), draw(st.integers(0, count - 1))
        if near == far:
            far = (near + 1) % count
        fields["shield_resistance"] = draw(values(0.01, min(decades, 4.0)))
        fields["shield_inductance"] = draw(values(1e-6, 2.0))
        fields["shield_coupling"] = Value(draw(st.sampled_from([1.0, 0.999, 0.7])))
        # Passive only if the loop's inductance covers what the coupling leaves over.
        stray = fields["shield_inductance"].nominal * 2 * (1 - fields["shield_coupling"].nominal)
        fields["inductance"] = Value(fields["inductance"].nominal + stray)
    return Cable(name, a, near, b, far, **fields)


def _couplings(draw: st.DrawFn, coils: Sequence[Inductor]) -> list[Part]:
    """Pairs of inductors, each in one pair at most."""
    parts: list[Part] = []
    for i in range(0, len(coils) - 1, 2):
        if draw(st.booleans()):
            k = Value(draw(st.sampled_from([0.1, 0.5, 0.9, 0.999])))
            parts.append(Coupling(f"k{i}", coils[i].name, coils[i + 1].name, k, coefficient=True))
    return parts


_SHAPES: tuple[tuple[tuple[Root, ...], tuple[Root, ...]], ...] = (
    ((), ()),
    (((1e6, None),), ()),
    (((1e6, None),), ((2e5, None),)),
    (((1e5, None), (3e6, 0.8)), ((2e5, None),)),
    (((3e6, 0.8),), ((1e6, 5.0),)),
)


def _amplifier(draw: st.DrawFn, name: str, positive: int, negative: int, out: int) -> Amplifier:
    poles, zeros = draw(st.sampled_from(_SHAPES))
    return Amplifier(
        name,
        positive,
        negative,
        out,
        0,
        gain=draw(values(1.0, 4.0)),
        poles=poles,
        zeros=zeros,
        delay=draw(st.sampled_from([0.0, 1e-7])),
    )


def text_of(network: Network) -> str:
    """The network in the language. Holds for what `networks` draws: one part a branch, no inner nodes, no
    split."""
    lines = ["nodal 1"]
    node = network.nodes
    for part in network.parts:
        lines += _statements(part, node)
    lines += [
        f"reading {r.name}: {node[r.a]} to {node[r.b]} times {r.times.nominal!r}" for r in network.readings
    ]
    return "\n".join(lines) + "\n"


def texts(*arguments: Any, **options: Any) -> st.SearchStrategy[str]:
    """`networks`, written out."""
    return networks(*arguments, **options).map(text_of)


def rescaled(network: Network, impedance: float = 1.0, frequency: float = 1.0) -> Network:
    """The network with every impedance multiplied by `impedance` and every frequency by `frequency` (lumped
    parts without loss, and cables without skin effect or loss of the dielectric)."""
    factor = {
        "resistor": impedance,
        "capacitor": 1 / (impedance * frequency),
        "inductor": impedance / frequency,
    }
    scaled: list[Part] = []
    for part in network.parts:
        if isinstance(part, Resistor | Capacitor | Inductor):
            value = replace(part.value, nominal=part.value.nominal * factor[part.kind])
            scaled.append(replace(part, value=value))
        elif isinstance(part, Cable):
            factors = {
                "resistance": impedance,
                "shield_resistance": impedance,
                "conductance": 1 / impedance,
                "inductance": impedance / frequency,
                "shield_inductance": impedance / frequency,
                "capacitance": 1 / (impedance * frequency),
            }
            held = {name: getattr(part, name) for name in factors}
            scaled.append(
                replace(
                    part,
                    **{
                        name: replace(value, nominal=value.nominal * factors[name])
                        for name, value in held.items()
                        if value
                    },
                )
            )
        else:
            scaled.append(part)
    return replace(network, parts=tuple(scaled))


def _statements(part: Part, node: Sequence[str]) -> list[str]:
    if isinstance(part, VoltageSource | CurrentSource):
        unit = "V" if isinstance(part, VoltageSource) else "A"
        return [f"source {part.name}: {node[part.a]} to {node[part.b]} = {part.value.nominal!r} {unit}"]
    if isinstance(part, Resistor | Capacitor | Inductor):
        unit = {"resistor": "Ω", "capacitor": "F", "inductor": "H"}[part.kind]
        loss = f" loss {part.loss!r}" if isinstance(part, Capacitor) and part.loss else ""
        branch = part.name.partition(".")[0]
        return [f"branch {branch}: {node[part.a]} to {node[part.b]} = {part.value.nominal!r} {unit}{loss}"]
    if isinstance(part, Coupling):
        return [f"coupling {part.name}: {part.first} with {part.second} = {part.value.nominal!r}"]
    if isinstance(part, Cable):
        return _cable_statements(part, node)
    if isinstance(part, Amplifier):
        return [_amplifier_statement(part, node)]
    raise TypeError(f"{part.kind} is not one of the kinds that networks() draws")


def _cable_statements(part: Cable, node: Sequence[str]) -> list[str]:
    units = {
        "resistance": "Ω/m",
        "inductance": "H/m",
        "conductance": "S/m",
        "capacitance": "F/m",
        "shield_resistance": "Ω/m",
        "shield_inductance": "H/m",
        "shield_coupling": "",
    }
    fields = [
        f"{name} {getattr(part, name).nominal!r} {unit}".rstrip()
        for name, unit in units.items()
        if getattr(part, name) is not None and (getattr(part, name).nominal or name == "shield_coupling")
    ]
    if part.skin:
        fields.append(f"skin {part.skin[0]!r} Ω/m at {part.skin[1]!r} Hz")
    if part.loss:
        fields.append(f"loss {part.loss!r}")
    ends = [node[n] for n in part.nodes]
    return [
        f"stock {part.name}_stock {{ {'; '.join(fields)} }}",
        f"cable {part.name}: {ends[0]}, {ends[1]} to {ends[2]}, {ends[3]} = "
        f"{part.length.nominal!r} m of {part.name}_stock",
    ]


def _amplifier_statement(part: Amplifier, node: Sequence[str]) -> str:
    def roots(word: str, given: Sequence[tuple[float, float | None]]) -> list[str]:
        written = ", ".join(f"{f!r} Hz" + (f" q {q!r}" if q else "") for f, q in given)
        return [f"{word} {written}"] if given else []

    fields = [
        f"gain {part.gain.nominal!r}" if part.gain else "gain 0",
        *roots("poles", part.poles),
        *roots("zeros", part.zeros),
    ]
    if part.delay:
        fields.append(f"delay {part.delay!r} s")
    ends = [node[n] for n in part.nodes]
    return f"amplifier {part.name}: {ends[0]}, {ends[1]} to {ends[2]}, {ends[3]} {{ {'; '.join(fields)} }}"
