"""Supply pins that nothing feeds, or that are fed the wrong way round."""

from collections import defaultdict
from collections.abc import Iterator

from xcheck.circuit.elements import GROUND, Coupling, Device, Passive, Source
from xcheck.finding import Finding
from xcheck.notation import engineering
from xcheck.reviewed import Evidence
from xcheck.rules.graphs import around_amplifiers, reach
from xcheck.rules.pins import Levels, misfits, place_on
from xcheck.rules.unread import is_complete


def supply_missing(evidence: Evidence) -> Iterator[Finding]:
    """A supply pin on a node that no source reaches. A block reviewed alone, and a deck without any source, get their
    supplies from outside."""
    circuit = evidence.circuit
    if circuit.boundary or not is_complete(evidence) or not any(isinstance(e, Source) for e in circuit.elements):
        return
    fed = _fed(evidence)
    explained = misfits(evidence)
    for amplifier in evidence.partition.amplifiers:
        misfit = explained.get(amplifier.name)
        if misfit is not None and misfit.better is not None:
            continue
        for name, node in (("positive", amplifier.positive_supply), ("negative", amplifier.negative_supply)):
            if node is not None and node not in fed:
                yield Finding(
                    "supply-missing", "error", place_on(evidence, amplifier, node),
                    f"the {name} supply of {amplifier.name} is on `{node}`, and no source reaches that node",
                    subject=amplifier.name, advice=f"add a source, such as `V1 {node} 0 5`, or correct the node's name",
                )  # fmt: skip


def _fed(evidence: Evidence) -> set[str]:
    """The nodes that some source reaches through anything but capacitors and ground."""
    edges: dict[str, set[str]] = defaultdict(set)
    starts = {GROUND, *evidence.circuit.boundary, *(a.output for a in evidence.partition.amplifiers)}
    for element in around_amplifiers(evidence.partition):
        nodes = [n for n in element.nodes if n != GROUND]
        if isinstance(element, Passive):
            if element.kind == "c":
                continue
        elif isinstance(element, Device):
            # nobody knows what is in an undefined block; behavioural sources and code models drive what they are on
            if element.kind in "xab" or element.behaviour is not None:
                starts.update(nodes)
        elif not isinstance(element, Coupling):
            starts.update(nodes)
        for node in nodes:
            edges[node].update(nodes)
    return reach(starts, edges)


def supply_reversed(evidence: Evidence) -> Iterator[Finding]:
    """The positive supply below the negative one."""
    levels = Levels(evidence)
    explained = misfits(evidence)
    for amplifier in evidence.partition.amplifiers:
        misfit = explained.get(amplifier.name)
        if misfit is not None and misfit.better is not None:
            continue
        positive, negative = amplifier.positive_supply, amplifier.negative_supply
        if positive is None or negative is None:
            continue
        high, low = levels.level(positive), levels.level(negative)
        if high is not None and low is not None and high < low:
            yield Finding(
                "supply-reversed", "error", place_on(evidence, amplifier, positive),
                f"the positive supply of {amplifier.name}, `{positive}`, is at {engineering(high, 'V')}, below its "
                f"negative supply `{negative}` at {engineering(low, 'V')}",
                subject=amplifier.name, advice="exchange the two nodes, or correct the sign of a source",
            )  # fmt: skip
