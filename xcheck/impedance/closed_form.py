"""Closed forms of all ports of recognised stages, evaluated with their real loads and sources."""

from dataclasses import dataclass

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.impedance.formulas import written
from xcheck.impedance.surroundings import Outside, Surroundings, neighbours
from xcheck.impedance.types import ClosedForm
from xcheck.stages.types import AmplifierResponse, Partition, Port, Stage
from xcheck.topologies import classify, forms
from xcheck.topologies.forms import Places
from xcheck.topologies.network import GROUND, Joined, Network, Pair, mesh
from xcheck.topologies.sketch import network_of, still_nodes

NO_FORM = ("unclassified", "comparator", "schmitt-trigger")
DEFAULT_BAND = (10.0, 10e3)
MOST_UPSTREAM = 50
"""Stages looked through for a common source; a longer chain counts as having one."""


@dataclass(frozen=True)
class Forms:
    """by_subject: the closed form of each port, or the reason why there is none; neighbours: ohm, shape (F,), what
    each port looks out into."""

    by_subject: dict[str, ClosedForm | str]
    neighbours: dict[str, Complex]


def closed_forms(partition: Partition, frequency: Real, band: tuple[float, float] = DEFAULT_BAND) -> Forms:
    """The closed forms on a frequency grid (Hz, shape (F,)); single numbers are quoted at mid band."""
    return _Evaluation(partition, frequency, band).run()


class _Evaluation:
    def __init__(self, partition: Partition, frequency: Real, band: tuple[float, float]) -> None:
        self.partition = partition
        self.frequency = frequency
        self.middle = int(np.argmin(np.abs(np.log(frequency / np.sqrt(band[0] * band[1])))))
        self.surroundings = Surroundings(partition, frequency)
        self.stages = {stage.name: stage for stage in partition.stages}
        self.topology = {s.name: classify(partition, s, band=band).topology for s in partition.stages}
        self.responses: dict[int, AmplifierResponse] = {}
        self.outer: dict[str, Outside] = {}
        self.found: dict[str, ClosedForm | str] = {}
        self.busy: set[str] = set()
        self.driver = {p.node: s.name for s in partition.stages for p in s.ports if p.side == "output"}

    def run(self) -> Forms:
        # outputs first and in deck order, inputs from the end of the chain: each then finds what it looks out
        # into already known, and a long chain needs no deep recursion
        ports = [port for stage in self.partition.stages for port in stage.ports]
        for port in (p for p in ports if p.side == "output"):
            self.form(port)
        for port in reversed([p for p in ports if p.side == "input"]):
            self.form(port)
        for port in ports:
            self.outside(port)
        ordered = {port.subject: self.found[port.subject] for port in ports}
        return Forms(ordered, neighbours(self.partition, self.outer))

    def impedance(self, port: Port) -> Complex | None:
        """A port's impedance by closed form, None where it has none or is being worked out."""
        if port.subject in self.busy or len(self.busy) > 60:
            return None
        form = self.form(port)
        return form.value if isinstance(form, ClosedForm) else None

    def outside(self, port: Port) -> Outside:
        if port.subject not in self.outer:
            self.outer[port.subject] = self.surroundings.outside(port, self.impedance)
        return self.outer[port.subject]

    def form(self, port: Port) -> ClosedForm | str:
        if port.subject not in self.found:
            self.busy.add(port.subject)
            self.found[port.subject] = self._work_out(self.stages[port.stage], port)
            self.busy.discard(port.subject)
        return self.found[port.subject]

    def _work_out(self, stage: Stage, port: Port) -> ClosedForm | str:
        topology = self.topology[stage.name]
        if topology in NO_FORM:
            return f"no closed form: the topology is {topology}"
        amplifier = stage.amplifiers[0]
        model = amplifier.open_loop.model
        if model is None:
            return f"no closed form: {amplifier.open_loop.reason}"
        left_out = frozenset(self._left_out(stage, port))
        network = network_of(self.partition, stage, left_out)
        if isinstance(network, str):
            return f"no closed form: {network}"
        premises = [amplifier.open_loop.reason] if not amplifier.open_loop.exact else []
        premises += self._soft_nodes(stage)
        shunts, ground_too, dropped = self._sources(stage, port)
        if dropped:
            # a source of unknown impedance can change everything behind it: no number is better than a wrong one
            return f"no closed form: {'; '.join(dropped)}"
        if self._reconverges(stage):
            premises.append("two inputs come from one stage, and are taken as independent")
        drawn = self._draw(stage, port, network, shunts, ground_too)
        if isinstance(drawn, str):
            return f"no closed form: {drawn}"
        places, side, links = drawn
        if side != "output":
            load = self._load(stage, premises)
            places = _with_load(places, load)
        if id(model) not in self.responses:
            self.responses[id(model)] = model.response(self.frequency)
        response = self.responses[id(model)]
        value = _EVALUATE[side](response, places)
        rule, rule_text = _rule(side, places, links)
        formula, numbers = written(
            side, response, places, links, value, self.middle, float(self.frequency[self.middle])
        )
        return ClosedForm(formula, numbers, value, rule, rule_text, not premises, tuple(premises))

    def _reconverges(self, stage: Stage) -> bool:
        """Whether two inputs are driven, directly or through other stages, by one and the same stage."""
        driven = [d for p in stage.ports if p.side == "input" for d in [self.driver.get(p.node)] if d is not None]
        if len(driven) < 2:
            return False
        seen: set[str] = set()
        for first in dict.fromkeys(driven):
            upstream: set[str] = set()
            waiting = [first]
            while waiting:
                name = waiting.pop()
                if name in upstream:
                    continue
                upstream.add(name)
                if len(upstream) > MOST_UPSTREAM:
                    return True
                ports = self.stages[name].ports
                waiting += [d for p in ports if p.side == "input" for d in [self.driver.get(p.node)] if d is not None]
            if upstream & seen:
                return True
            seen |= upstream
        return len(driven) != len(set(driven))

    def _soft_nodes(self, stage: Stage) -> list[str]:
        """Rails and references that the drawing takes as ground although they move a little, where it matters."""
        soft = {n for n in self.partition.references if n not in self.partition.ac_ground}
        if not soft:
            return []
        circuit = self.partition.circuit
        still = soft | set(self.partition.ac_ground)
        own = [circuit.by_name[name] for a in stage.amplifiers for name in a.elements]
        outer = [circuit.by_name[name] for name in stage.elements]
        pins = {n for a in stage.amplifiers for n in (a.inverting, a.non_inverting)}
        used = {n for e in own if not set(e.nodes) <= still for n in e.nodes if n in soft}
        used |= {n for e in outer for n in e.nodes if n in soft} | (pins & soft)
        return [f"{n} taken as AC ground" for n in sorted(used)]

    def _left_out(self, stage: Stage, port: Port) -> set[str]:
        """Elements of the stage that are outside at this port: a source's series element."""
        inside = {t.element for t in port.inside}
        names = set(stage.elements)
        return {e.name for e, _ in self.surroundings.at.get(port.node, ()) if e.name in names and e.name not in inside}

    def _sources(self, stage: Stage, port: Port) -> tuple[dict[str, Complex], set[str], list[str]]:
        """Source impedances at the stage's other inputs: admittances to ground, nodes that sources hold, and what
        could not be counted."""
        shunts: dict[str, Complex] = {}
        held: set[str] = set()
        dropped: list[str] = []
        for other in stage.ports:
            if other.side != "input" or other.node == port.node or self._left_out(stage, other):
                continue
            if other.node in self.partition.ac_ground:
                held.add(other.node)
                continue
            seen = self.outside(other)
            shunts[other.node] = seen.admittance
            if seen.dropped:
                dropped.append(f"not counted at {other.node}: {seen.dropped}")
        return shunts, held, dropped

    def _load(self, stage: Stage, premises: list[str]) -> Complex:
        for port in stage.ports:
            if port.side == "output" and port.node == stage.amplifiers[0].output:
                seen = self.outside(port)
                if seen.dropped:
                    premises.append(f"not counted as load: {seen.dropped}")
                return seen.admittance
        premises.append("the load is not known")
        return np.zeros(self.frequency.shape, dtype=np.complex128)

    def _draw(
        self, stage: Stage, port: Port, network: Network, shunts: dict[str, Complex], held: set[str]
    ) -> "tuple[Places, str, _Links] | str":
        amplifier = stage.amplifiers[0]
        ground = still_nodes(self.partition, stage.ports) | held

        def name(node: str) -> str:
            return GROUND if node in ground and node != port.node else node

        grounded = Network()
        for pair, branch in network.branches.items():
            a, b = (name(node) for node in sorted(pair))
            for part in branch.members if hasattr(branch, "members") else (branch,):
                grounded.add(part, a, b)  # type: ignore[arg-type]  # only parallel parts stand between two nodes here
        n, p, o, x = name(amplifier.inverting), name(amplifier.non_inverting), name(amplifier.output), port.node
        terminals = list(dict.fromkeys((n, p, o, x, GROUND)))
        kept = [*terminals, *(node for node in shunts if node not in ground)]
        links = _Links(mesh(grounded.reduced(kept), terminals, self.frequency, {
            node: y for node, y in shunts.items() if node not in ground
        }), self.frequency.shape)  # fmt: skip
        return _sort_places(links, n, p, o, x, port.side)


@dataclass(frozen=True)
class _Links:
    """What lies between terminals, with zeros where nothing does."""

    found: dict[Pair, Joined]
    shape: tuple[int, ...]
    names: dict[str, str] | None = None

    def between(self, a: str, b: str) -> Complex:
        joined = self.found.get(frozenset((a, b))) if a != b else None
        return np.zeros(self.shape, dtype=np.complex128) if joined is None else joined.admittance

    def text(self, a: str, b: str) -> str:
        joined = self.found.get(frozenset((a, b))) if a != b else None
        return "" if joined is None else joined.text


def _sort_places(links: _Links, n: str, p: str, o: str, x: str, side: str) -> "tuple[Places, str, _Links] | str":
    """The places of a form. Which one: the port leads to one input alone, or is the output."""
    y = links.between
    zero, infinite = np.zeros(links.shape, complex), np.full(links.shape, np.inf, dtype=np.complex128)
    if p not in (GROUND, o) and np.any(y(p, o)) and p != n:
        return "there is positive feedback"
    yf = infinite if n == o else y(n, o)
    if not np.any(yf):
        return "there is no feedback"
    yp = infinite if p == GROUND else y(p, GROUND)
    across = zero if p == GROUND else y(n, p)
    yg, y_out = (zero, y(o, GROUND)) if n == o else (y(n, GROUND), y(o, GROUND))
    names = {"f": links.text(n, o), "g": links.text(n, GROUND), "p": links.text(p, GROUND)}
    if side == "output":
        if x != o:
            return "the port is a further node"
        return Places(infinite, zero, yg, yp, across, yf, y_out, zero), "output", _named(links, names)
    to_n, to_p = np.any(y(x, n)) or x == n, np.any(y(x, p)) or x == p
    if np.any(y(x, o)) and x not in (n, o):
        return "the port is tied to the output"
    if to_n and to_p and p != GROUND:
        return "the port leads to both inputs"
    pin = p if to_p and p != GROUND else n if to_n else ""
    if not pin:
        return "the port leads to no input of the amplifier"
    direct = x == pin
    names["1"] = "" if direct else links.text(x, pin)
    y1 = infinite if direct else y(x, pin)
    y_port = zero if direct else y(x, GROUND)
    return Places(y1, y_port, yg, yp, across, yf, y_out, zero), "p" if pin == p else "n", _named(links, names)


def _named(links: _Links, names: dict[str, str]) -> _Links:
    return _Links(links.found, links.shape, names)


def _with_load(places: Places, load: Complex) -> Places:
    return Places(places.y1, places.y_port, places.yg, places.yp, places.y_across, places.yf, places.y_out, load)


_EVALUATE = {"n": forms.inverting_input, "p": forms.non_inverting_input, "output": forms.output}


def _rule(side: str, x: Places, links: _Links) -> tuple[Complex, str]:
    """The ideal amplifier's value: ohm, shape (F,), and in words."""
    names = links.names or {}
    if side == "output":
        return np.zeros(links.shape, dtype=np.complex128), "zero"
    with np.errstate(divide="ignore", invalid="ignore"):
        z1 = np.where(np.isinf(x.y1), 0.0, 1.0 / x.y1)
        behind = np.zeros(links.shape, complex) if side == "n" else np.where(x.yp == 0, np.inf, 1.0 / x.yp)
        inner = np.where(np.isinf(behind), 0.0, 1.0 / (z1 + behind))
        total = x.y_port + inner
        rule = np.where(total == 0, np.inf, 1.0 / total).astype(np.complex128)
    rule = np.where(np.isnan(rule) | np.isinf(total), 0.0, rule).astype(np.complex128)
    words = [names.get("1", "")] + ([names.get("p", "")] if side == "p" else [])
    if np.all(np.isinf(rule)):
        return rule, "infinite"
    return rule, " + ".join(
        f"({w})" if "||" in w and len([v for v in words if v]) > 1 else w for w in words if w
    ) or "zero"
