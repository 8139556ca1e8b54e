"""How the circuit is wired: nodes that lead nowhere and inputs that nothing holds.

All of this speaks of what is absent, so it is silent where a part of the deck could not be read: the missing
connection may stand there.
"""

import re
from collections.abc import Iterator
from dataclasses import replace
from difflib import get_close_matches

from xcheck.circuit.elements import GROUND, Controlled, Device, Element, Passive, Source
from xcheck.deck.cards import Card, Field
from xcheck.finding import Finding
from xcheck.place import Place
from xcheck.reviewed import Evidence
from xcheck.rules.graphs import around_amplifiers, declared_ports, held_at_dc, influence, loops, terminals
from xcheck.rules.unread import is_complete, unread_words

GROUND_LIKE = (
    "gnd!",
    "agnd",
    "dgnd",
    "gnda",
    "gndd",
    "sgnd",
    "pgnd",
    "ground",
    "com",
    "common",
    "0v",
    "vss",
    "earth",
)
"""Names that people give to the reference node, by common practice; ngspice knows `0` and `gnd` alone."""

MOST_DANGLING = 100
"""Nodes that are named one by one; a deck with more has one fault, not a hundred."""

OBSERVED = re.compile(r"\b[vi][a-z]*\(\s*([^()\s,]+)(?:\s*,\s*([^()\s,]+))?\s*\)", re.IGNORECASE)
"""`v(out)`, `vdb(out)`, `v(a,b)` on cards that ask for results."""


def ground_missing(evidence: Evidence) -> Iterator[Finding]:
    """No element stands on node 0. A subcircuit reviewed by itself gets its reference through its pins."""
    circuit = evidence.circuit
    if not circuit.elements or circuit.boundary or GROUND in circuit.nodes or not is_complete(evidence):
        return
    likely = [node for node in circuit.nodes if node in GROUND_LIKE]
    advice = "connect the reference node to 0"
    if likely:
        advice = f"`{likely[0]}` is an ordinary node to ngspice; name the reference node 0 or gnd"
    yield Finding(
        "ground-missing",
        "error",
        circuit.elements[0].origin.card.place(),
        "no element is connected to node 0 (or gnd), so no voltage in the deck is defined",
        advice=advice,
    )


def node_dangling(evidence: Evidence) -> Iterator[Finding]:
    """A node with one terminal, unless somebody declared it a port, asks for its voltage, or it is the open
    end of a stage's output.

    An engineer leaves open on purpose: an amplifier's output, a series R, L or C behind one (with shunts to
    ground on the way), a controlled voltage used as a probe, a supply that nothing uses, pins of an instance.
    What is left is a part with one end in the air: mostly a misspelt node.
    """
    if not is_complete(evidence):
        return
    circuit = evidence.circuit
    ends = terminals(circuit)
    on_pins = {node for instance in circuit.instances for _, node in instance.pins}
    undefined = (e for e in circuit.elements if isinstance(e, Device) and e.kind == "x")
    on_pins.update(node for element in undefined for node in element.nodes)
    known = declared_ports(evidence) | observed_nodes(evidence) | on_pins
    inside = {a.name for a in evidence.partition.amplifiers}
    outputs = _OpenEnds(evidence)
    missing = unread_words(evidence)
    found: list[Finding] = []
    more = 0
    for node, on_node in ends.items():
        element, index = on_node[0]
        if len(on_node) > 1 or node in known or inside.intersection(element.origin.path):
            continue
        if _left_on_purpose(element) or outputs.ends_at(node, element):
            continue
        local = node.rpartition(".")[2] if element.origin.path else node
        if local in missing or not _is_own_text(evidence, element):
            continue
        if len(found) < MOST_DANGLING:
            found.append(_dangling(evidence, node, local, element, index))
        else:
            more += 1
    if more:
        found[-1] = replace(found[-1], message=f"{found[-1].message} ({more} more nodes like this follow)")
    yield from found


def _left_on_purpose(element: Element) -> bool:
    match element:
        case Controlled():
            return element.kind in "eh"
        case Device():
            return element.kind in "beh"
        case Source():
            return element.kind == "v" and not element.transient and not element.ac
        case _:
            return False


def _is_own_text(evidence: Evidence, element: Element) -> bool:
    """Inside subcircuits of included libraries an open end is the library's affair."""
    return not element.origin.path or element.origin.card.place().file == evidence.deck.path


def _dangling(evidence: Evidence, node: str, local: str, element: Element, index: int) -> Finding:
    scope = node[: len(node) - len(local)]
    others = [n.removeprefix(scope) for n in evidence.circuit.nodes if n != node and n.startswith(scope)]
    near = get_close_matches(local, [n for n in others if "." not in n], n=1, cutoff=0.7)
    what = "senses" if index < 0 else "ends on"
    advice = "connect it, or declare it with `* xcheck: port " + local + "` if the outside drives or loads it"
    if near:
        advice = f"did you mean `{near[0]}`? Otherwise {advice}"
    return Finding(
        "node-dangling",
        "warning",
        place_of_word(element.origin.card, local),
        f"{element.name} {what} node `{local}`, and nothing else does: no current can flow there"
        if index >= 0
        else f"{element.name} {what} node `{local}`, and nothing else is connected to it",
        subject=element.name,
        advice=advice,
    )


def place_of_word(card: Card, word: str) -> Place:
    """The place of the first field of a card, after its name, that reads so; else of the card."""
    found: list[Field] = [field for field in card.fields[1:] if field.key == word]
    return card.place(found[0] if found else None)


def observed_nodes(evidence: Evidence) -> set[str]:
    """Nodes whose voltage some card asks for (`.save`, `.print`, `.meas`, `.noise` ...)."""
    seen: set[str] = set()
    for card in evidence.deck.cards:
        if card.kind.startswith(".") and card.kind not in (".param", ".func", ".subckt", ".model"):
            for match in OBSERVED.finditer(card.text):
                seen.update(name.lower() for name in match.groups() if name)
    return seen


class _OpenEnds:
    """Which open nodes are the natural end of a stage's output."""

    def __init__(self, evidence: Evidence) -> None:
        partition = evidence.partition
        edges = influence(partition)
        circles = loops(evidence.circuit.nodes, edges)
        self.still = {GROUND, *partition.ac_ground}
        self.outputs = {
            a.output
            for a in partition.amplifiers
            if a.inverting == a.output or (a.inverting in circles and circles[a.inverting] == circles.get(a.output))
        }
        self.inputs = {n for a in partition.amplifiers for n in (a.non_inverting, a.inverting)}
        self.on_node: dict[str, list[Element]] = {}
        for element in around_amplifiers(partition):
            sensing = element.sensing if isinstance(element, (Controlled, Device)) else ()
            for node in (*element.nodes, *sensing):
                self.on_node.setdefault(node, []).append(element)

    def ends_at(self, node: str, element: Element) -> bool:
        """Whether a ladder of series parts, with shunts to ground at its rungs, leads from an amplifier's
        output that has feedback to this open node."""
        passed = 0
        while isinstance(element, Passive):
            passed += 1
            node = element.nodes[1] if element.nodes[0] == node else element.nodes[0]
            if node in self.outputs:
                return True
            if node in self.still or node in self.inputs or passed > len(self.on_node):
                return False
            others = [e for e in self.on_node.get(node, ()) if e is not element]
            series = [e for e in others if not (isinstance(e, Passive) and self.still.intersection(e.nodes))]
            if len(series) != 1:
                return False
            element = series[0]
        return False


def input_without_dc_path(evidence: Evidence) -> Iterator[Finding]:
    """An amplifier's input from which no way at DC leads anywhere: its bias current charges the capacitors
    until the output saturates, and the operating point is undefined. The amplifier's own input resistance
    is no such way."""
    if not is_complete(evidence):
        return
    held = held_at_dc(evidence)
    ends = terminals(evidence.circuit)
    missing = unread_words(evidence)
    for amplifier in evidence.partition.amplifiers:
        pins = (("non-inverting", amplifier.non_inverting), ("inverting", amplifier.inverting))
        for pin, node in pins:
            if node in held or node.rpartition(".")[2] in missing:
                continue
            parts = [e.name for e, index in ends[node] if index >= 0 and e.name not in amplifier.elements]
            only = ", ".join(dict.fromkeys(parts))
            reached = f"only {only}" if only else "nothing"
            yield Finding(
                "input-without-dc-path",
                "error",
                amplifier.place,
                f"the {pin} input of {amplifier.name}, node `{node}`, has no DC path: {reached} connects to "
                "it, and no resistor leads its bias current anywhere",
                subject=amplifier.name,
                advice=_dc_advice(pin, only),
            )


def _dc_advice(pin: str, only: str) -> str:
    if not only:
        return "connect the input; look for a misspelt node"
    if pin == "inverting":
        return "put a resistor across the feedback capacitor, or from another node to this one"
    return "add a bias resistor from the node to ground or to the bias voltage"
