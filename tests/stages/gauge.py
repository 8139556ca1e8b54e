"""Decks for the tests of this folder: parts of a tide gauge's electronics, and a few ways to look at what was found."""

from xcheck.circuit.elements import Circuit
from xcheck.deck.reader import read_text
from xcheck.elaboration import elaborate
from xcheck.stages import find_amplifiers, split
from xcheck.stages.types import Amplifier, Partition, Port, Stage

OPAMP = """\
* connections: non-inverting input, inverting input, positive supply, negative supply, output
.subckt gaugeamp p n vp vn o
rid p n 3meg
cid p n 2p
rcp p 0 1g
rcn n 0 1g
g1 0 a p n 1m
ra a 0 150meg
ca a 0 100p
e2 b 0 a 0 1
ro b o 60
rq vp vn 20k
.ends gaugeamp
"""
SUPPLIES = "vp vp 0 12\nvn vn 0 -12\n"
AC = ".ac dec 10 1 1meg\n"


def circuit_of(body: str, subckt: str | None = None, title: str = "tide gauge") -> Circuit:
    """The elaborated circuit of a deck's body, which must be free of errors."""
    circuit = elaborate(read_text(f"{title}\n{body}\n.end\n"), subckt)
    assert not [f for f in circuit.findings if f.level == "error"], circuit.findings
    return circuit


def amplifiers_of(body: str, subckt: str | None = None) -> tuple[Amplifier, ...]:
    return find_amplifiers(circuit_of(body, subckt))[0]


def one_amplifier(body: str) -> Amplifier:
    (amplifier,) = amplifiers_of(body)
    return amplifier


def partition_of(body: str, subckt: str | None = None, **options: object) -> Partition:
    circuit = circuit_of(body, subckt)
    amplifiers, findings = find_amplifiers(circuit)
    return split(circuit, amplifiers, findings, **options)  # type: ignore[arg-type]


def board(body: str, **options: object) -> Partition:
    """The partition of a body with the op-amp and the supplies before it."""
    return partition_of(OPAMP + SUPPLIES + body + "\n" + AC, **options)


def names(partition: Partition) -> list[str]:
    return [stage.name for stage in partition.stages]


def stage(partition: Partition, name: str) -> Stage:
    (found,) = [s for s in partition.stages if s.name == name]
    return found


def port(partition: Partition, subject: str) -> Port:
    (found,) = [p for s in partition.stages for p in s.ports if p.subject == subject]
    return found


def ports(partition: Partition, name: str) -> dict[str, str]:
    """Of one stage: 'input signal', 'input reference' or 'output' by port name."""
    return {p.name: "output" if p.side == "output" else f"input {p.kind}" for p in stage(partition, name).ports}


def inside(partition: Partition, subject: str) -> set[str]:
    """Names of the elements inside a port, the amplifiers' inner ones by the amplifier and a star."""
    owner = {n: a.name for a in partition.amplifiers for n in a.elements if a.subckt}
    return {f"{owner[t.element]}.*" if t.element in owner else t.element for t in port(partition, subject).inside}
