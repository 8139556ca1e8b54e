"""Modified nodal equations of a flat linear circuit: A(s) = G + s C as sparse triplets.

Unknowns are node voltages and branch currents; equations are the current laws of the nodes and the voltage
laws of the branches, in the same order, so equation i belongs to unknown i (Ho, Ruehli and Brennan, The
modified nodal approach to network analysis, IEEE Trans. CAS-22, 1975). All independent sources are dead.
"""

from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import GROUND, Controlled, Coupling, Device, Element, Passive, Source, Term
from xcheck.errors import CallError

Index = NDArray[np.int64]

ZERO_OHM = 1e-3
"""What a resistor written as 0 is, in ohm: ngspice takes it so (seen on version 39)."""

BRANCH_BELOW_OHM = 1e3
"""Resistors below this get a branch current of their own. As a conductance they would drown what hangs on the
node behind them: 1 S and 1e-16 S add up to 1 S in double precision."""

CONDUCTOR, CAPACITOR, CURRENT_SOURCE = range(3)
"""What joins two nodes: a voltage law or a conductance at all frequencies, above DC only, or the output of a
controlled source that gives a current, whatever the voltage."""


@dataclass(frozen=True, slots=True)
class Short:
    """A zero-volt branch whose current is an unknown, flowing from nodes[0] through it to nodes[1]."""

    name: str
    nodes: tuple[str, str]


@dataclass(frozen=True)
class Equations:
    """A(s) = G + s C with N unknowns and E structural entries, each position once.

    unknowns: their names, `v(node)`, `i(element)`, `x(element)` for the output of a controlled source, or
    `v(node,node)`; the first `node_count` are voltages of nodes.
    node: flat node to the index of its voltage, -1 for ground and for what a dead source ties to it.
    branch: element to the index of its current, which is also the index of its voltage law.
    output: controlled source to (unknown, equation) of its output quantity: the unknown is the output less
    the gains times what the source reads, so a unit on the right-hand side adds a unit to the output.
    rows, columns: (E,) positions; conductance (S, or V/A and ratios), capacitance (F, H): (E,).
    paths: (P, 2) pairs of nodes that an element joins, `node_count` for ground, those of the shorts first;
    path_kind: (P,) what the element is, CONDUCTOR, CAPACITOR or CURRENT_SOURCE.
    """

    unknowns: tuple[str, ...]
    node_count: int
    node: Mapping[str, int]
    branch: Mapping[str, int]
    output: Mapping[str, tuple[int, int]]
    rows: Index
    columns: Index
    conductance: Real
    capacitance: Real
    paths: Index
    path_kind: Index

    @property
    def size(self) -> int:
        return len(self.unknowns)

    def values(self, frequency: Real) -> Complex:
        """The entries of A at some frequencies (Hz, shape (F,)), shape (E, F)."""
        s = 2j * np.pi * frequency
        result: Complex = self.conductance[:, None] + s[None, :] * self.capacitance[:, None]
        return result


def assemble(elements: Iterable[Element], shorts: Sequence[Short] = (), explicit: Collection[str] = ()) -> Equations:
    """The equations of a circuit.

    A dead voltage source joins its two nodes, unless a controlled source reads its current: then it is a
    branch of zero volt. Devices are left out. explicit: controlled sources that get an entry in `output`, and
    unknowns of their own for the voltages that they read.
    Raises CallError where a controlled source reads the current of something that has none, or a value is
    no finite number.
    """
    kept = [element for element in elements if not isinstance(element, Device)]
    sensed = {t.source for e in kept if isinstance(e, Controlled) for t in e.terms if t.source}
    build = _Assembly(kept, shorts, sensed)
    for element in kept:
        if isinstance(element, Controlled) and element.name in explicit:
            build.differences(element)
    for short in shorts:
        build.branch_between(short.name, short.nodes)
    inductances: dict[str, float] = {}
    for element in kept:
        if isinstance(element, Passive):
            build.passive(element, inductances)
        elif isinstance(element, (Source, Controlled)) and _has_branch(element, sensed):
            build.branch_between(element.name, element.nodes)
    for element in kept:
        if isinstance(element, Coupling):
            build.coupling(element, inductances)
        elif isinstance(element, Controlled) and (element.terms or element.name in build.branch):
            build.controlled(element, element.name in explicit)
    return build.equations()


def _has_branch(element: Source | Controlled, sensed: Collection[str]) -> bool:
    """Whether it is a voltage source that is controlled, or whose current is read."""
    if isinstance(element, Source):
        return element.kind == "v" and element.name in sensed
    return element.kind in "eh" and (bool(element.terms) or element.name in sensed)


def _joins(element: Source | Controlled, sensed: Collection[str]) -> bool:
    """Whether it holds its nodes a constant voltage apart, and nobody asks for its current."""
    return element.kind in "veh" and not _has_branch(element, sensed)


class _Assembly:
    """Collects the entries; positions may be written many times and add up."""

    def __init__(self, elements: Sequence[Element], shorts: Sequence[Short], sensed: Collection[str]) -> None:
        self.node = _joined_nodes(elements, shorts, sensed)
        self.node_count = 1 + max(self.node.values(), default=-1)
        self.names = [""] * self.node_count
        for name, index in self.node.items():
            if index >= 0 and not self.names[index]:
                self.names[index] = f"v({name})"
        self.branch: dict[str, int] = {}
        self.output: dict[str, tuple[int, int]] = {}
        self.difference: dict[tuple[int, int], tuple[int, float]] = {}
        self.rows: list[int] = []
        self.columns: list[int] = []
        self.static: list[float] = []
        self.dynamic: list[float] = []
        self.paths: list[tuple[int, int]] = []
        self.path_kind: list[int] = []

    def add(self, row: int, column: int, static: float, dynamic: float = 0.0) -> None:
        if row >= 0 and column >= 0:
            self.rows.append(row)
            self.columns.append(column)
            self.static.append(static)
            self.dynamic.append(dynamic)

    def join(self, a: int, b: int, kind: int) -> None:
        self.paths.append((a if a >= 0 else self.node_count, b if b >= 0 else self.node_count))
        self.path_kind.append(kind)

    def unknown(self, name: str) -> int:
        self.names.append(name)
        return len(self.names) - 1

    def differences(self, element: Controlled) -> None:
        """Makes an unknown of every voltage between two moving nodes that an explicit source reads. What lies
        across the pair is then written with it: behind much loop gain the two voltages are one to many digits,
        and their difference, taken later, would be rounding."""
        for term in element.terms:
            pair = (self.node[term.positive], self.node[term.negative])
            if term.source or min(pair) < 0 or pair[0] == pair[1] or pair in self.difference:
                continue
            own = self.unknown(f"v({term.positive},{term.negative})")
            for column, sign in ((pair[0], 1.0), (pair[1], -1.0), (own, -1.0)):
                self.add(own, column, sign)
            self.difference[pair] = (own, 1.0)
            self.difference[pair[1], pair[0]] = (own, -1.0)

    def voltage(self, a: int, b: int) -> tuple[tuple[int, float], ...]:
        """The unknowns that make up the voltage from a to b, each with its sign."""
        return (self.difference[a, b],) if (a, b) in self.difference else ((a, 1.0), (b, -1.0))

    def branch_between(self, name: str, nodes: tuple[str, str]) -> int:
        """A branch current from nodes[0] to nodes[1] through the element, V(nodes[0]) - V(nodes[1]) = 0."""
        index = self.unknown(f"i({name})")
        self.branch.setdefault(name, index)
        a, b = (self.node[n] for n in nodes)
        for node, sign in ((a, 1.0), (b, -1.0)):
            self.add(node, index, sign)
        for column, sign in self.voltage(a, b):
            self.add(index, column, sign)
        self.join(a, b, CONDUCTOR)
        return index

    def admittance(self, nodes: tuple[str, str], static: float, dynamic: float) -> None:
        a, b = (self.node[n] for n in nodes)
        if a == b:
            return
        for column, sign in self.voltage(a, b):
            self.add(a, column, sign * static, sign * dynamic)
            self.add(b, column, -sign * static, -sign * dynamic)
        if static or dynamic:
            self.join(a, b, CONDUCTOR if static else CAPACITOR)

    def passive(self, element: Passive, inductances: dict[str, float]) -> None:
        value = element.value
        if element.kind == "c":
            self.admittance(element.nodes, 0.0, value)
        elif element.kind == "l":
            index = self.branch_between(element.name, element.nodes)
            self.add(index, index, 0.0, -value)
            inductances.setdefault(element.name, value)
        elif abs(value) < BRANCH_BELOW_OHM:
            if self.node[element.nodes[0]] != self.node[element.nodes[1]]:
                index = self.branch_between(element.name, element.nodes)
                self.add(index, index, -(value or ZERO_OHM))
        else:
            self.admittance(element.nodes, 1.0 / value, 0.0)

    def coupling(self, element: Coupling, inductances: Mapping[str, float]) -> None:
        try:
            (a, la), (b, lb) = ((self.branch[name], inductances[name]) for name in element.inductors)
        except KeyError as missing:
            raise CallError(f"{element.name} couples {missing.args[0]}, which is no inductor of the circuit") from None
        mutual = element.factor * float(np.sqrt(la * lb))
        self.add(a, b, 0.0, -mutual)
        self.add(b, a, 0.0, -mutual)

    def controlled(self, element: Controlled, explicit: bool) -> None:
        a, b = (self.node[n] for n in element.nodes)
        voltage = element.kind in "eh"
        reads = [pair for term in element.terms for pair in self.control(element, term)]
        into: list[tuple[int, float]]  # equations that the output quantity enters, and with which factor
        into = [(self.branch[element.name], -1.0)] if voltage else [(a, 1.0), (b, -1.0)]
        if explicit and voltage and a >= 0 > b and all(column != a for column, _ in reads):
            self.output[element.name] = (a, self.branch[element.name])
        elif explicit:
            own = self.unknown(f"x({element.name})")
            self.output[element.name] = (own, own)
            for row, sign in into:
                self.add(row, own, sign)
            self.add(own, own, 1.0)
            into = [(own, -1.0)]
        for column, gain in reads:
            for row, sign in into:
                self.add(row, column, sign * gain)
        across = [{self.node[t.positive], self.node[t.negative]} for t in element.terms if not t.source]
        if not voltage:  # a current set by the voltage across it is a conductance, until it is killed
            self.join(a, b, CONDUCTOR if {a, b} in across and not explicit else CURRENT_SOURCE)

    def control(self, element: Controlled, term: Term) -> tuple[tuple[int, float], ...]:
        """The unknowns that a term reads, each with its gain."""
        if not term.source:
            pair = self.voltage(self.node[term.positive], self.node[term.negative])
            return tuple((column, sign * term.gain) for column, sign in pair)
        if term.source not in self.branch:
            raise CallError(f"{element.name} reads the current of {term.source}, which is no voltage source here")
        return ((self.branch[term.source], term.gain),)

    def equations(self) -> Equations:
        size = len(self.names)
        keys = np.array(self.rows, dtype=np.int64) * size + np.array(self.columns, dtype=np.int64)
        places, inverse = np.unique(keys, return_inverse=True)
        static = np.bincount(inverse, np.array(self.static), len(places)).astype(np.float64)
        dynamic = np.bincount(inverse, np.array(self.dynamic), len(places)).astype(np.float64)
        wrong = np.flatnonzero(~np.isfinite(static + dynamic))
        if wrong.size:
            raise CallError(f"a value at {self.names[int(places[wrong[0]]) % size]} is no finite number")
        return Equations(
            unknowns=tuple(self.names),
            node_count=self.node_count,
            node=self.node,
            branch=self.branch,
            output=self.output,
            rows=places // size,
            columns=places % size,
            conductance=static,
            capacitance=dynamic,
            paths=np.array(self.paths, dtype=np.int64).reshape(-1, 2),
            path_kind=np.array(self.path_kind, dtype=np.int64),
        )


def _joined_nodes(elements: Sequence[Element], shorts: Sequence[Short], sensed: Collection[str]) -> dict[str, int]:
    """Flat node to unknown, nodes tied by dead voltage sources sharing one, -1 for ground."""
    parent: dict[str, str] = {GROUND: GROUND}

    def root(name: str) -> str:
        while (above := parent.setdefault(name, name)) != name:
            parent[name] = parent.setdefault(above, above)
            name = parent[name]
        return name

    for element in elements:
        for node in element.nodes:
            parent.setdefault(node, node)
        if isinstance(element, Controlled):
            for node in element.sensing:
                parent.setdefault(node, node)
        if isinstance(element, (Source, Controlled)) and _joins(element, sensed):
            a, b = (root(n) for n in element.nodes)
            if a != GROUND:
                a, b = b, a
            parent[b] = a
    for short in shorts:
        for node in short.nodes:
            parent.setdefault(node, node)
    index: dict[str, int] = {GROUND: -1}
    for name in parent:
        index.setdefault(root(name), len(index) - 1)
    return {name: index[root(name)] for name in parent}
