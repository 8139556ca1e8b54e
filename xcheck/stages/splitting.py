"""Splitting a circuit into stages at its stiff nodes."""

from collections.abc import Sequence

from xcheck.circuit.elements import Circuit
from xcheck.finding import Finding
from xcheck.stages.further import with_further_ports
from xcheck.stages.networks import actives_of, loops_of, networks_of
from xcheck.stages.nodes import stiff_nodes
from xcheck.stages.ports import ports_of
from xcheck.stages.references import add_references, listed, virtual_grounds
from xcheck.stages.shares import shares_of
from xcheck.stages.types import Amplifier, Partition, Stage
from xcheck.stages.wiring import Wiring

DEFAULT_BAND = (10.0, 10e3)
"""Hz, in which a reference node is judged where nobody declared a band."""


def split(
    circuit: Circuit,
    amplifiers: Sequence[Amplifier],
    findings: Sequence[Finding] = (),
    extra_ports: Sequence[str] = (),
    band: tuple[float, float] = DEFAULT_BAND,
) -> Partition:
    """The stages of a circuit with their ports; linear in its size.

    extra_ports: nodes at which to measure besides; band: Hz, in which a reference node is judged. Raises CallError
    for an extra port that is no node of the circuit.
    """
    own = {name for a in amplifiers for name in a.elements}
    outside = [e for e in circuit.elements if e.name not in own]
    held = stiff_nodes(circuit, amplifiers)
    add_references(held, outside, amplifiers, band)
    virtual = virtual_grounds(outside, amplifiers, held)
    networks = networks_of(outside, held.reasons.keys() | virtual.keys())
    actives = actives_of(circuit, amplifiers, held.driver)
    moving = {node: name for node, name in held.driver.items() if node not in held.still}
    loops = loops_of(networks, actives, moving, virtual)
    wiring = Wiring.of(circuit, amplifiers, held, virtual)
    shares = shares_of(networks, loops, amplifiers, wiring)
    stages: list[Stage] = []
    for group, members, others in zip(shares, loops.groups, loops.others, strict=True):
        stage = tuple(amplifiers[k] for k in members)
        stages.append(ports_of("+".join(a.name for a in stage), stage, group, others, wiring))
    stages, more = with_further_ports(stages, extra_ports, networks, loops, wiring)
    return Partition(
        circuit=circuit, amplifiers=tuple(amplifiers), stages=tuple(stages), stiff=held.reasons,
        ac_ground=held.still, driver=held.driver, references=listed(held.reasons), findings=(*findings, *more),
    )  # fmt: skip
