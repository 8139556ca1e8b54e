"""Op-amps written straight into a deck: a controlled source, or a chain of them through R, C and buffers.

A chain begins at a source that senses one or two nodes, runs through lags (R and C to ground) and buffers that
nothing else touches, and ends at the last source's own output, or behind a series resistor where nothing else
hangs on that output: then the resistor is the amplifier's output resistance.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from xcheck.circuit.elements import GROUND, Controlled, Element, Passive
from xcheck.stages.macromodel import LEAST_GAIN


@dataclass
class Wiring:
    """Terminals and sensing terminals by node."""

    ends: dict[str, list[Element]] = field(default_factory=dict)
    senses: dict[str, list[Controlled]] = field(default_factory=dict)

    @classmethod
    def of(cls, elements: Sequence[Element]) -> "Wiring":
        """The wiring of some elements."""
        made = cls()
        for element in elements:
            for node in element.nodes:
                made.ends.setdefault(node, []).append(element)
            if isinstance(element, Controlled):
                for node in element.sensing:
                    made.senses.setdefault(node, []).append(element)
        return made


@dataclass(frozen=True, slots=True)
class Chain:
    """An op-amp in bare elements: its elements in order of the signal, inputs, output node and gain at DC."""

    elements: tuple[Element, ...]
    plus: str
    minus: str
    output: str
    gain: float


def chain_from(first: Controlled, wiring: Wiring, still: Mapping[str, str]) -> Chain | None:
    """The op-amp that begins at a controlled source, None where none does. still: nodes at AC ground."""
    weights = _input_weights(first)
    if weights is None:
        return None
    plus, minus, factor = weights
    members: list[Element] = [first]
    gain = factor
    source = first
    while True:
        hop = _hop(source, wiring, still)
        if hop is None:
            return None
        gain *= hop.gain
        members += hop.members
        if hop.next is None:
            break
        source = hop.next
        gain *= sum(t.gain * ((t.positive == hop.node) - (t.negative == hop.node)) for t in source.terms)
        members.append(source)
        if len(members) > 1000:
            return None
    if abs(gain) <= LEAST_GAIN:
        return None
    if source.kind in "gf" and not _fed_back(hop.node, (plus, minus), wiring):
        # a transconductance with a load resistor has much gain too; feedback is what makes an op-amp of it
        return None
    if gain < 0:
        plus, minus = minus, plus
    across = [
        e for e in wiring.ends.get(plus, ())
        if isinstance(e, Passive) and e.kind in "rc" and set(e.nodes) == {plus, minus} and GROUND not in e.nodes
    ]  # fmt: skip
    return Chain((*members, *across), plus, minus, hop.node, abs(gain))


def _input_weights(source: Controlled) -> tuple[str, str, float] | None:
    """The one or two nodes that a source senses, as plus and minus with a common factor: positive factor, or a
    negative one to be turned round later."""
    weights: dict[str, float] = {}
    for term in source.terms:
        if term.source:
            return None
        for node, sign in ((term.positive, 1.0), (term.negative, -1.0)):
            if node != GROUND:
                weights[node] = weights.get(node, 0.0) + sign * term.gain
    weights = {node: weight for node, weight in weights.items() if weight}
    if len(weights) == 1:
        ((node, weight),) = weights.items()
        return (node, GROUND, weight)
    if len(weights) == 2:
        (a, one), (b, two) = weights.items()
        if one * two < 0 and abs(one + two) < 1e-2 * abs(one):
            return (a, b, one)
    return None


def _fed_back(output: str, inputs: tuple[str, str], wiring: Wiring) -> bool:
    """Whether an output is an input, or one element away from it."""
    beside = {n for e in wiring.ends.get(output, ()) if isinstance(e, Passive) for n in e.nodes}
    return any(node in beside or node == output for node in inputs if node != GROUND)


@dataclass(frozen=True, slots=True)
class _Hop:
    """From a source to the node that the next one senses, or to the output: gain so far, elements passed."""

    node: str
    gain: float
    members: tuple[Element, ...]
    next: Controlled | None


def _hop(source: Controlled, wiring: Wiring, still: Mapping[str, str]) -> _Hop | None:
    ends = [(node, sign) for node, sign in zip(source.nodes, (1.0, -1.0), strict=True) if node not in still]
    if len(ends) != 1:
        return None
    node, sign = ends[0]
    if source.kind in "gf":
        return _through_current(source, node, -sign, wiring, still)
    others = [e for e in wiring.ends.get(node, ()) if e is not source]
    sensing = wiring.senses.get(node, [])
    if not others and len(sensing) == 1 and _is_buffer(sensing[0], node):
        return _Hop(node, sign, (), sensing[0])
    if len(others) == 1 and not sensing and isinstance(others[0], Passive) and others[0].kind == "r":
        series = others[0]
        behind = series.nodes[0] if series.nodes[1] == node else series.nodes[1]
        if behind in still:
            return _Hop(node, sign, (), None)
        shunts = _shunts(behind, series, wiring, still)
        next_source = wiring.senses.get(behind, [])
        if shunts is not None and shunts and len(next_source) == 1 and _is_buffer(next_source[0], behind):
            load = sum(1.0 / e.value for e in shunts if e.kind == "r")
            return _Hop(behind, sign / (1.0 + series.value * load), (series, *shunts), next_source[0])
        return _Hop(behind, sign, (series,), None)
    return _Hop(node, sign, (), None)


def _through_current(
    source: Controlled, node: str, sign: float, wiring: Wiring, still: Mapping[str, str]
) -> _Hop | None:
    shunts = _shunts(node, source, wiring, still)
    sensing = wiring.senses.get(node, [])
    if shunts and len(sensing) == 1 and _is_buffer(sensing[0], node):
        siemens = sum(1.0 / e.value for e in shunts if e.kind == "r")
        return _Hop(node, sign / siemens if siemens else sign * 1e15, tuple(shunts), sensing[0])
    # a current source straight into the output: the first resistor to ground beside it is its output resistance
    for element in wiring.ends.get(node, ()):
        if isinstance(element, Passive) and element.kind == "r" and any(n in still for n in element.nodes):
            return _Hop(node, sign * element.value, (element,), None)
    return None


def _shunts(node: str, known: Element, wiring: Wiring, still: Mapping[str, str]) -> list[Passive] | None:
    """The R and C from a node to AC ground, None where anything else but `known` touches the node."""
    found: list[Passive] = []
    for element in wiring.ends.get(node, ()):
        if element is known:
            continue
        if not isinstance(element, Passive) or element.kind == "l" or not any(n in still for n in element.nodes):
            return None
        found.append(element)
    return found


def _is_buffer(source: Controlled, node: str) -> bool:
    """Whether a source only passes the node's voltage on: it senses nothing else, with little gain."""
    return source.sensing == (node,) and all(abs(t.gain) <= LEAST_GAIN and not t.source for t in source.terms)
