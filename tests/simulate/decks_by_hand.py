"""Decks with ports given by hand, and their impedances by dense nodal equations.

`nodal` is written for these tests alone: it stamps a flat circuit with one frequency at a time into a dense matrix,
parts a node as a port says, and reads the impedance off numpy's solution.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import Circuit, Controlled, Coupling, Device, Passive, Source
from xcheck.deck.cards import Deck
from xcheck.deck.reader import read_text
from xcheck.elaboration import elaborate
from xcheck.place import Place
from xcheck.stages.types import Partition, Port, Side, Stage, Terminal

HERE = Place("deck.cir", 1, 1, 1)
DECADES = 10 ** np.linspace(0, 7, 71)


@dataclass(frozen=True)
class At:
    """A port: its node, the elements inside (all their terminals on the node), or single terminals `name/index`."""

    node: str
    inside: str
    side: Side = "input"
    by_current: bool = False


@dataclass(frozen=True)
class Case:
    """A deck with its ports, by name in the order given."""

    deck: Deck
    circuit: Circuit
    partition: Partition
    ports: dict[str, Port] = field(default_factory=dict)


def case(text: str, *ports: At, subckt: str | None = None) -> Case:
    """A deck (its title line is added) with a stage `s` that has the ports p0, p1, ..."""
    deck = read_text("by hand\n" + text)
    return case_of(deck, *ports, subckt=subckt)


def case_of(deck: Deck, *ports: At, subckt: str | None = None) -> Case:
    circuit = elaborate(deck, subckt)
    wrong = [f for f in (*deck.findings, *circuit.findings) if f.level == "error"]
    assert not wrong, wrong
    made = [_port(circuit, f"p{k}", port) for k, port in enumerate(ports)]
    stage = Stage("s", (), (), tuple(made))
    partition = Partition(circuit, (), (stage,), {}, {"0": "ground"}, {})
    return Case(deck, circuit, partition, {port.subject: port for port in made})


def _port(circuit: Circuit, name: str, at: At) -> Port:
    inside: list[Terminal] = []
    for word in at.inside.split():
        element, _, index = word.partition("/")
        inside += [Terminal(element, int(index))] if index else _all(circuit, element, at.node)
    assert inside, at
    return Port("s", name, at.node, at.side, "signal", tuple(inside), at.by_current, HERE)


def _all(circuit: Circuit, name: str, node: str) -> list[Terminal]:
    element = circuit.by_name[name]
    found = [Terminal(name, k) for k, n in enumerate(element.nodes) if n == node]
    if isinstance(element, (Controlled, Device)) and node in element.sensing:
        found.append(Terminal(name, -1))
    return found


def nodal(case: Case, subject: str, frequency: Real) -> Complex:
    """The impedance of a port, ohm, shape (F,); infinite or NaN where no current flows."""
    voltage, current = driven(case, subject, frequency)
    with np.errstate(divide="ignore", invalid="ignore"):
        return voltage / current


def driven(case: Case, subject: str, frequency: Real) -> tuple[Complex, Complex]:
    """The voltage across a port and the current into it, V and A, shape (F,), with 1 V in series or 1 A into the
    node on the stage's side."""
    port = case.ports[subject]
    circuit = parted(case.circuit, port)
    dead = [replace(e, ac=None) if isinstance(e, Source) else e for e in circuit.elements]
    by_voltage = port.side == "input" and not port.current_driven
    cut = Source("cut", "v", (port.node, "inside"), 0.0, 1.0 if by_voltage else 0.0, "", circuit.elements[0].origin)
    volts, amperes = [], []
    for hertz in frequency:
        x, at, through = solved([*dead, cut], 2j * np.pi * hertz, {} if by_voltage else {"inside": 1.0})
        voltage, current = x[at["inside"]], x[through["cut"]]
        volts.append(voltage)
        amperes.append(current if by_voltage else 1 + current)
    return np.array(volts), np.array(amperes)


def parted(circuit: Circuit, port: Port) -> Circuit:
    """The circuit with the terminals inside a port on a node called `inside`."""
    elements = list(circuit.elements)
    for k, element in enumerate(elements):
        for terminal in port.inside:
            if terminal.element != element.name:
                continue
            if terminal.index >= 0:
                nodes = [*elements[k].nodes]
                nodes[terminal.index] = "inside"
                elements[k] = replace(elements[k], nodes=tuple(nodes))  # type: ignore[arg-type]
            else:
                old = elements[k]
                assert isinstance(old, Controlled)
                elements[k] = replace(
                    old,
                    terms=tuple(
                        replace(
                            t,
                            positive="inside" if t.positive == port.node else t.positive,
                            negative="inside" if t.negative == port.node else t.negative,
                        )
                        for t in old.terms
                    ),
                )
    return replace(circuit, elements=tuple(elements))


def solved(  # noqa: PLR0912  # one branch for each kind of element, in one place to be checked by eye
    elements: Sequence[object], s: complex, injected: Mapping[str, float]
) -> tuple[Complex, dict[str, int], dict[str, int]]:
    """The solution of the nodal equations, and where node voltages and branch currents stand in it. Sources are
    alive with their AC part."""
    nodes: dict[str, int] = {}
    branches: dict[str, int] = {}
    for e in elements:
        sensed = e.sensing if isinstance(e, Controlled) else ()
        for node in (*e.nodes, *sensed):  # type: ignore[attr-defined]
            if node != "0":
                nodes.setdefault(node, len(nodes))
    for e in elements:
        if getattr(e, "kind", "") in ("l", "v", "e", "h"):
            branches[e.name] = len(nodes) + len(branches)  # type: ignore[attr-defined]
    size = len(nodes) + len(branches)
    matrix, right = np.zeros((size, size), dtype=complex), np.zeros(size, dtype=complex)

    def add(row: str | int, column: str | int, value: complex) -> None:
        places = [nodes.get(p) if isinstance(p, str) else p for p in (row, column)]
        if None not in places:
            matrix[places[0], places[1]] += value  # type: ignore[index]

    inductance = {e.name: e.value for e in elements if isinstance(e, Passive) and e.kind == "l"}
    for e in elements:
        if isinstance(e, Coupling):
            mutual = e.factor * np.sqrt(inductance[e.inductors[0]] * inductance[e.inductors[1]])
            for one, other in (e.inductors, e.inductors[::-1]):
                matrix[branches[one], branches[other]] -= s * mutual
            continue
        assert isinstance(e, (Passive, Source, Controlled)), e
        a, b = e.nodes
        if e.name in branches:
            k = branches[e.name]
            for node, sign in ((a, 1), (b, -1)):
                add(node, k, sign)
                add(k, node, sign)
        if isinstance(e, Passive):
            if e.kind == "l":
                matrix[branches[e.name], branches[e.name]] -= s * e.value
            else:
                y = 1 / e.value if e.kind == "r" else s * e.value
                for row, column, sign in ((a, a, 1), (b, b, 1), (a, b, -1), (b, a, -1)):
                    add(row, column, sign * y)
        elif isinstance(e, Source):
            if e.kind == "v":
                right[branches[e.name]] += e.ac or 0
            else:
                for node, sign in ((a, -1), (b, 1)):
                    if node in nodes:
                        right[nodes[node]] += sign * (e.ac or 0)
        else:
            for term in e.terms:
                ends: list[tuple[str | int, int]] = [(term.positive, 1), (term.negative, -1)]
                if term.source:
                    ends = [(branches[term.source], 1)]
                for what, sign in ends:
                    if e.kind in "eh":
                        add(branches[e.name], what, -sign * term.gain)
                    else:
                        add(a, what, sign * term.gain)
                        add(b, what, -sign * term.gain)
    for node, ampere in injected.items():
        right[nodes[node]] += ampere
    return np.linalg.solve(matrix, right), nodes, branches
