"""Ports at further nodes: asked for by the caller or by the deck, and pins of a reviewed block behind an output."""

from collections.abc import Sequence
from dataclasses import replace

from xcheck.circuit.elements import GROUND
from xcheck.errors import CallError
from xcheck.finding import Finding
from xcheck.stages.directives import PORT_FORM, port_directives
from xcheck.stages.networks import Loops, Network
from xcheck.stages.ports import Pointer, make_port, own_terminals
from xcheck.stages.types import Stage, Terminal
from xcheck.stages.wiring import Wiring, conducts, terminals_of


def with_further_ports(
    stages: Sequence[Stage], wanted: Sequence[str], networks: Sequence[Network], loops: Loops, wiring: Wiring
) -> tuple[list[Stage], tuple[Finding, ...]]:
    """The stages with ports at further nodes, and what is wrong with directives. Raises CallError for a node that the
    caller names and that is not there, or that belongs to no stage."""
    told = list(port_directives(wiring.circuit))
    if not wanted and not told and not wiring.circuit.boundary:
        return list(stages), ()
    further = _Further(list(stages), networks, loops, wiring)
    findings: list[Finding] = []
    for node in wanted:
        fault = further.add(node.lower())
        if fault:
            raise CallError(fault)
    for node, directive in told:
        fault = further.add(node)
        if fault:
            findings.append(Finding("syntax", "error", directive.place, fault, node, advice=PORT_FORM))
    for node in wiring.circuit.boundary:
        if node not in wiring.held.reasons:
            further.add(node)
    return further.stages, tuple(findings)


class _Further:
    def __init__(self, stages: list[Stage], networks: Sequence[Network], loops: Loops, wiring: Wiring) -> None:
        self.stages = stages
        self.wiring = wiring
        by_name = wiring.circuit.by_name
        self.known = frozenset(wiring.circuit.nodes)
        self.home: dict[str, int] = {}
        for k, stage in enumerate(stages):
            for amplifier in stage.amplifiers:
                self.home[amplifier.output] = k
        for k, stage in enumerate(stages):
            names = (*stage.elements, *(n for a in stage.amplifiers for n in a.elements))
            for node in (n for name in names for n in by_name[name].nodes):
                self.home.setdefault(node, k)
        # behind an output, where no stage's own elements are
        for network, groups in zip(networks, loops.drives, strict=True):
            for node in network.nodes if groups else ():
                self.home.setdefault(node, min(groups))

    def add(self, node: str) -> str:
        """Adds a port at a node to the stage that it belongs to; says why not, '' where it did."""
        if node == GROUND or node not in self.known:
            return f"there is no node `{node}` to measure at" if node else "no node is named"
        if any(port.node == node for stage in self.stages for port in stage.ports):
            return ""
        index = self.home.get(node)
        if index is None:
            return f"node `{node}` belongs to no stage and hangs on no amplifier's output"
        stage = self.stages[index]
        by_name = self.wiring.circuit.by_name
        mine = own_terminals([by_name[n] for n in stage.elements], stage.amplifiers, self.wiring).get(node)
        inside = tuple(mine) if mine else self._all_but_currents(node)
        if not inside:
            return f"nothing but current sources is on node `{node}`"
        pointer = Pointer(stage.amplifiers, self.wiring)
        port = make_port(stage.name, node, "output", "signal", inside, pointer)
        self.stages[index] = replace(stage, ports=(*stage.ports, port))
        return ""

    def _all_but_currents(self, node: str) -> tuple[Terminal, ...]:
        on_node = [(e, t) for e in self.wiring.circuit.elements for n, t in terminals_of(e) if n == node]
        return tuple(t for e, t in on_node if t.index < 0 or conducts(e, t.index))
