"""Reference nodes and virtual grounds: ordinary nodes that so little moves that they keep stages apart."""

import cmath
import itertools
import math
from collections.abc import Mapping, Sequence

from xcheck.circuit.elements import Controlled, Element, Passive, Source
from xcheck.stages.networks import networks_of
from xcheck.stages.nodes import Held, is_signal
from xcheck.stages.types import Amplifier

STILL_ENOUGH = 0.01
"""A reference's impedance to ground over the least impedance through which stages hang on it."""


def add_references(
    held: Held, outside: Sequence[Element], amplifiers: Sequence[Amplifier], band: tuple[float, float]
) -> None:
    """Marks as held the bias nodes with a reservoir capacitor on which several amplifiers hang, if their impedance to
    ground at the middle of the band (Hz, geometric mean) is small. One reference may feed another: looked at in
    turn until no more are found."""
    at: dict[str, list[Element]] = {}
    for element in outside:
        for node in dict.fromkeys(element.nodes):
            if node not in held.reasons:
                at.setdefault(node, []).append(element)
    left = [n for n, touching in at.items() if any(isinstance(e, Passive) and e.kind == "c" for e in touching)]
    middle = math.sqrt(band[0] * band[1])
    while left:
        quiet_enough = {n for n in left if _rests(n, at[n], held, middle)}
        found = _shared_by_several(quiet_enough, outside, amplifiers, held) if quiet_enough else []
        if not found:
            return
        held.reasons.update(dict.fromkeys(found, "reference"))
        left = [n for n in left if n not in held.reasons]


def _rests(node: str, touching: Sequence[Element], held: Held, hertz: float) -> bool:
    """Whether a node is a bias node (fed at DC from quiet nodes, with a capacitor to one, no signal source on it) that
    what hangs on it hardly moves."""
    quiet = _Quiet(held)
    down = 0j
    reservoir = fed = False
    most = 0.0
    for element in touching:
        if isinstance(element, Passive):
            far = element.nodes[0] if element.nodes[1] == node else element.nodes[1]
            siemens = _admittance(element, hertz) if far != node else 0j
            if far in quiet:
                down += siemens
                reservoir |= element.kind == "c"
                fed |= element.kind != "c"
            elif far in held.signal:
                return False
            else:
                most = max(most, abs(siemens))
        elif (isinstance(element, Source) and (element.kind == "v" or is_signal(element))) or isinstance(
            element, Controlled
        ):
            return False
        else:
            fed = True
    return reservoir and fed and most <= STILL_ENOUGH * abs(down)


def _shared_by_several(
    candidates: set[str], outside: Sequence[Element], amplifiers: Sequence[Amplifier], held: Held
) -> list[str]:
    """Those of the nodes on which inputs of two amplifiers or more hang, straight or through networks."""
    at_node: dict[str, set[str]] = {}
    for amplifier in amplifiers:
        for node in (amplifier.non_inverting, amplifier.inverting):
            at_node.setdefault(node, set()).add(amplifier.name)
    hanging = {n: set(at_node.get(n, ())) for n in candidates}
    for network in networks_of(outside, held.reasons.keys() | candidates):
        named = [at_node[n] for n in network.nodes if n in at_node]
        some = set(itertools.islice((name for names in named for name in names), 3))  # each amplifier has two
        for node in network.edge & candidates:
            hanging[node] |= some
    return [n for n, names in hanging.items() if len(names) > 1]


class _Quiet:
    """Nodes at AC ground without a signal, rails and references, without making the set anew at each question."""

    def __init__(self, held: Held) -> None:
        self.held = held

    def __contains__(self, node: object) -> bool:
        if node in self.held.still:
            return node not in self.held.signal
        return self.held.reasons.get(str(node), "") in ("rail", "reference")


def _admittance(element: Passive, hertz: float) -> complex:
    """Siemens at a frequency in Hz; a value of 0 conducts without limit, or not at all."""
    omega = 2 * math.pi * hertz
    if element.kind == "c":
        return 1j * omega * element.value
    impedance = complex(element.value) if element.kind == "r" else 1j * omega * element.value
    return 1 / impedance if impedance else complex(cmath.inf)


def virtual_grounds(outside: Sequence[Element], amplifiers: Sequence[Amplifier], held: Held) -> dict[str, int]:
    """Inverting inputs that local feedback keeps still, each with the index of its amplifier: the non-inverting input
    is at AC ground or a reference, and a path of elements leads from the amplifier's own output."""
    quiet = _Quiet(held)
    resting = _resting_nodes(outside, held)
    wanted = [
        k
        for k, a in enumerate(amplifiers)
        if a.inverting not in held.reasons and (a.non_inverting in quiet or a.non_inverting in resting)
    ]
    if not wanted:
        return {}
    candidates = {amplifiers[k].inverting for k in wanted}
    beside: dict[str, set[int]] = {}
    for n, network in enumerate(networks_of(outside, held.reasons.keys() | candidates)):
        for node in network.edge:
            if node in candidates or node in held.driver:
                beside.setdefault(node, set()).add(n)
    found: dict[str, int] = {}
    for k in wanted:
        a = amplifiers[k]
        if not beside.get(a.inverting, set()).isdisjoint(beside.get(a.output, set())):
            found.setdefault(a.inverting, k)
    return _through_meters(found, outside, held)


def _through_meters(found: dict[str, int], outside: Sequence[Element], held: Held) -> dict[str, int]:
    """The same with the nodes that voltage sources tie to a virtual ground."""
    ties: dict[str, list[str]] = {}
    for element in outside:
        if isinstance(element, Source) and element.kind == "v" and not any(n in held.reasons for n in element.nodes):
            a, b = element.nodes
            ties.setdefault(a, []).append(b)
            ties.setdefault(b, []).append(a)
    waiting = list(found)
    while waiting:
        node = waiting.pop()
        for other in ties.get(node, ()):
            if other not in found:
                found[other] = found[node]
                waiting.append(other)
    return found


def _resting_nodes(elements: Sequence[Element], held: Held) -> set[str]:
    """Nodes of networks that only quiet nodes surround and nothing drives, such as a bias compensation resistor's."""
    quiet = _Quiet(held)
    driven = {n for e in elements if isinstance(e, (Source, Controlled)) for n in e.nodes}
    driven -= held.reasons.keys()
    return {
        node
        for network in networks_of(elements, held.reasons)
        if network.edge and all(n in quiet for n in network.edge) and network.nodes.isdisjoint(driven)
        for node in network.nodes
    }


def listed(reasons: Mapping[str, str]) -> tuple[str, ...]:
    """Rails and references, which a report lists."""
    return tuple(node for node, why in reasons.items() if why in ("rail", "reference"))
