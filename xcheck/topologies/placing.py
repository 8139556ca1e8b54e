"""From the drawing of a stage to the places of its closed form at one port, and to the ideal value there."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from xcheck.circuit.arrays import Complex
from xcheck.errors import XcheckError
from xcheck.stages.types import Side
from xcheck.topologies.branches import Branch, in_parallel
from xcheck.topologies.drawing import Drawing
from xcheck.topologies.expression import Expression, quantity
from xcheck.topologies.forms import Core, Places
from xcheck.topologies.network import GROUND, Links
from xcheck.topologies.topology import Symbols, Topology


class NotPlaced(XcheckError):
    """A port that no closed form fits; says why. Always caught on the way to an answer."""


@dataclass(frozen=True)
class PortView:
    """A stage as seen from one port. node, side: the port's; sources: at the other inputs, what they look out into
    (none for nothing); held: other inputs that a source holds; stiff: those and inputs that an amplifier's output
    drives; load: outside the output, for an input."""

    drawing: Drawing
    node: str
    side: Side
    held: frozenset[str]
    stiff: frozenset[str]
    sources: Mapping[str, Branch]
    load: Branch | None


@dataclass(frozen=True)
class _Nodes:
    """The nodes that matter to a form: of the amplifier, and the port's."""

    n: str
    p: str
    o: str
    x: str


def closed_form(view: PortView, topology: Topology, core: Core, at: int) -> Expression | None:
    """The closed form at the port, in the topology's own letters; None where it is infinite (an input that draws no
    current) or zero (an output). Raises NotPlaced."""
    nodes = _nodes(view)
    network = view.drawing.network.grounded(view.held)
    for node, source in view.sources.items():
        network.add(source, node, GROUND)
    links = network.reduced({nodes.n, nodes.p, nodes.o, nodes.x, GROUND})
    _check(links, nodes)
    if view.side == "output":
        places = _at_output(links, nodes, core, topology.at_output, at)
        form = topology.output_form
    elif _leads_to_n(links, nodes):
        places = _at_input(links, nodes, nodes.n, view.load, core, topology.at_inverting, at)
        form = topology.inverting_form
    else:
        places = _at_input(links, nodes, nodes.p, view.load, core, topology.at_non_inverting, at)
        form = topology.non_inverting_form
    open_p = places.bias is None and core.zic_plus is None and core.zid is None and places.across is None
    if open_p and not places.bias_grounded and form is not topology.non_inverting_form:
        raise NotPlaced("nothing holds the non-inverting input")
    return form(places)


def ideal(view: PortView) -> tuple[Complex, str]:
    """The ideal amplifier's value (ohm, shape (F,), inf where infinite) and in words: its output holds still, its
    inverting input follows the other one, and neither draws current. Sources that amplifiers drive have no
    impedance."""
    nodes = _nodes(view)
    shape = view.drawing.network.frequency.shape
    links = view.drawing.network.reduced({nodes.n, nodes.p, nodes.o, nodes.x, GROUND})
    if view.side == "output" or nodes.x == nodes.n:
        return np.zeros(shape, dtype=np.complex128), "zero"
    grounded = set(view.stiff)
    without = {nodes.o}
    (grounded if _leads_to_n(links, nodes) else without).add(nodes.n)
    network = view.drawing.network.grounded(grounded - {nodes.x}, without - {nodes.x, GROUND})
    for node, source in view.sources.items():
        if node not in grounded:
            network.add(source, node, GROUND)
    found = network.reduced({nodes.x, GROUND}).between(nodes.x, GROUND)
    if found is None:
        return np.full(shape, np.inf, dtype=np.complex128), "infinite"
    return found.impedance, found.text


def _nodes(view: PortView) -> _Nodes:
    d = view.drawing
    n, p, o = (GROUND if node in view.held else node for node in (d.inverting, d.non_inverting, d.output))
    return _Nodes(n, p, o, view.node)


def _leads_to_n(links: Links, nodes: _Nodes) -> bool:
    if nodes.x in (nodes.n, nodes.p):
        return nodes.x == nodes.n
    return links.between(nodes.x, nodes.n) is not None


def _check(links: Links, nodes: _Nodes) -> None:
    """Refuses what is not the circuit of the forms."""
    n, p, o = nodes.n, nodes.p, nodes.o
    if n == p:
        raise NotPlaced("both inputs are on one node")
    if GROUND in (n, o):
        raise NotPlaced("the inverting input or the output does not move")
    if p not in (GROUND, o) and links.between(p, o) is not None:
        raise NotPlaced("there is positive feedback")
    if n != o and links.between(n, o) is None:
        raise NotPlaced("there is no feedback")


def _at_output(links: Links, nodes: _Nodes, core: Core, s: Symbols, at: int) -> Places:
    n, p, o, x = nodes.n, nodes.p, nodes.o, nodes.x
    if x != o:
        raise NotPlaced("the port is a node further on")
    return Places(
        core=core,
        own=None,
        shunt=None,
        leg=None if n == o else _expression(s.leg, links.between(n, GROUND), at),
        bias=_expression(s.bias, links.between(p, GROUND), at),
        bias_grounded=p == GROUND,
        feedback=None if n == o else _expression(s.feedback, links.between(n, o), at),
        across=None if p == GROUND else _expression("Zx", links.between(n, p), at),
        load=_expression(s.shunt, links.between(o, GROUND), at),
    )


def _at_input(
    links: Links, nodes: _Nodes, pin: str, load: Branch | None, core: Core, s: Symbols, at: int
) -> Places:  # fmt: skip
    n, p, o, x = nodes.n, nodes.p, nodes.o, nodes.x
    direct = x == pin
    if not direct:
        if links.between(x, o) is not None:
            raise NotPlaced("the port is tied to the output")
        if links.between(x, n) is not None and p != GROUND and links.between(x, p) is not None:
            raise NotPlaced("the port leads to both inputs")
        if pin == GROUND or links.between(x, pin) is None:
            raise NotPlaced("the port leads to no input of the amplifier")
    inner = links.between(o, GROUND)
    loads = [branch for branch in (inner, load) if branch is not None]
    return Places(
        core=core,
        own=None if direct else _expression(s.own, links.between(x, pin), at),
        shunt=None if direct else _expression(s.shunt, links.between(x, GROUND), at),
        leg=None if n == o else _expression(s.leg, links.between(n, GROUND), at),
        bias=_expression(s.bias, links.between(p, GROUND), at),
        bias_grounded=p == GROUND,
        feedback=None if n == o else _expression(s.feedback, links.between(n, o), at),
        across=None if p == GROUND else _expression("Zx", links.between(n, p), at),
        load=_expression("ZL", in_parallel(*loads) if len(loads) == 2 else loads[0] if loads else None, at),
    )


def _expression(symbol: str, branch: Branch | None, at: int) -> Expression | None:
    return None if branch is None else quantity(symbol, branch.impedance, at, meaning=branch.meaning)
