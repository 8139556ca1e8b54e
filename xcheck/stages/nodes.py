"""Nodes that split a circuit: ground, nodes held by sources, amplifiers' outputs, supply rails."""

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Element, Source
from xcheck.stages.types import Amplifier


def is_signal(source: Source) -> bool:
    """Whether a source has an AC or transient part; `AC 0` says that a signal belongs there, if not now."""
    return source.ac is not None or bool(source.transient)


@dataclass
class Held:
    """Nodes that voltages hold, spread from ground and from outputs through voltage sources and controlled voltages.

    reasons: why each node is held; driver: the flat name of the amplifier or source that holds it; still: nodes that
    do not move at AC, all but the test source being dead; signal: nodes that carry the AC or transient part of a
    source.
    """

    reasons: dict[str, str] = field(default_factory=dict)
    driver: dict[str, str] = field(default_factory=dict)
    still: dict[str, str] = field(default_factory=dict)
    signal: set[str] = field(default_factory=set)

    @property
    def quiet(self) -> set[str]:
        """Nodes that neither move nor carry a signal."""
        return self.still.keys() - self.signal


class _Spread:
    """Spreads what is held from node to node, each source looked at a constant number of times."""

    def __init__(self, elements: Iterable[Element], follow: Callable[[Controlled], bool]) -> None:
        self.held = Held()
        self.touching: dict[str, list[Source | Controlled]] = {}
        for element in elements:
            if isinstance(element, Source) and element.kind == "v":
                for node in element.nodes:
                    self.touching.setdefault(node, []).append(element)
            elif isinstance(element, Controlled) and element.kind in "eh" and follow(element):
                for node in dict.fromkeys((*element.nodes, *element.sensing)):
                    self.touching.setdefault(node, []).append(element)

    def start(self, node: str, reason: str, driver: str = "", *, still: bool = False) -> list[str]:
        """Holds a node, and all that voltage sources tie to it; gives the nodes that were not held before."""
        held = self.held
        if node in held.reasons:
            return []
        held.reasons[node] = reason
        if driver:
            held.driver[node] = driver
        if still:
            held.still[node] = reason
        fresh = [node]
        for one in fresh:
            for source in self.touching.get(one, ()):
                other = self._passes_on(source)
                if other is not None:
                    fresh.append(other)
        return fresh

    def _passes_on(self, source: Source | Controlled) -> str | None:
        """The node that a source holds now, written down with what is known of it; None for none."""
        held = self.held
        free = [n for n in source.nodes if n not in held.reasons]
        if len(free) != 1 or source.nodes[0] == source.nodes[1]:
            return None
        base = source.nodes[1] if free[0] == source.nodes[0] else source.nodes[0]
        if base not in held.reasons:
            return None
        fed_by = [base]
        if isinstance(source, Controlled):
            if any(t.source for t in source.terms) or not all(n in held.still for n in source.sensing):
                return None
            fed_by += source.sensing
        still = all(n in held.still for n in fed_by)
        reason = f"{'voltage' if isinstance(source, Source) else 'controlled'} source {source.name}"
        driver = source.name
        if not still:  # an output shifted by a voltage source
            reason, driver = held.reasons[base], held.driver.get(base, "")
        held.reasons[free[0]] = reason
        if driver:
            held.driver[free[0]] = driver
        if still:
            held.still[free[0]] = reason
        if any(n in held.signal for n in fed_by) or (isinstance(source, Source) and is_signal(source)):
            held.signal.add(free[0])
        return free[0]


def held_still(circuit: Circuit, follow: Callable[[Controlled], bool]) -> Held:
    """Nodes that do not move at AC: ground, and what sources tie to it. A source's own AC part does not count: all
    but the test source are dead. follow: controlled voltages that may pass stillness on."""
    spread = _Spread(circuit.elements, follow)
    spread.start(GROUND, "ground", still=True)
    return spread.held


def stiff_nodes(circuit: Circuit, amplifiers: Sequence[Amplifier]) -> Held:
    """All stiff nodes but references: held still, amplifiers' outputs, other controlled voltages, rails."""
    own = {name for a in amplifiers for name in a.elements}
    spread = _Spread(circuit.elements, lambda e: e.name not in own)
    spread.start(GROUND, "ground", still=True)
    for amplifier in amplifiers:
        spread.start(amplifier.output, f"output of {amplifier.name}", amplifier.name)
    _hold_controlled(spread, [e for e in circuit.elements if isinstance(e, Controlled) and e.name not in own])
    for amplifier in amplifiers:
        for rail in (amplifier.positive_supply, amplifier.negative_supply):
            if rail is not None:
                spread.start(rail, "rail")
    return spread.held


def _hold_controlled(spread: _Spread, loose: Sequence[Controlled]) -> None:
    """Holds the outputs of controlled voltages whose other end is held, stacked ones in turn."""
    at: dict[str, list[Controlled]] = {}
    waiting: list[Controlled] = []
    for element in loose:
        if element.kind in "eh" and element.nodes[0] != element.nodes[1]:
            waiting.append(element)
            for node in element.nodes:
                at.setdefault(node, []).append(element)
    waiting.reverse()
    while waiting:
        element = waiting.pop()
        free = [n for n in element.nodes if n not in spread.held.reasons]
        if len(free) == 1:
            # what it holds may be the other end of the next one
            fresh = spread.start(free[0], f"output of {element.name}", element.name)
            waiting += [e for node in fresh for e in at.get(node, ()) if e is not element]
