"""Op-amps that are no instance: chains of controlled sources judged by their gain, or told by a directive."""

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Coupling, Device, Element, Passive
from xcheck.stages.chains import MINUS, OUTPUT, PLUS, Chain, Surroundings, chain_of, chains
from xcheck.stages.directives import PinDirective, port_directives
from xcheck.stages.macromodel import LEAST_GAIN, gain_element
from xcheck.stages.model import LinearModel, bench, open_loop
from xcheck.stages.nodes import Held
from xcheck.stages.types import Amplifier, OpenLoop


@dataclass(frozen=True)
class _Judged:
    """What a chain is: its gain at DC from PLUS, its model, and which of its elements the gain hangs on."""

    gain: float
    open_loop: OpenLoop
    gain_index: int


def bare_amplifiers(
    circuit: Circuit, claimed: Collection[str], held: Held, directives: Mapping[str, PinDirective]
) -> list[Amplifier]:
    """The amplifiers among the elements that belong to none yet. held: nodes that do not move at AC."""
    ports = {*circuit.boundary, *(node for node, _ in port_directives(circuit))}
    around = Surroundings.of(circuit.elements, claimed, held.still, held.quiet, ports)
    bench_of = _Bench()
    found: list[Amplifier] = []
    taken: set[str] = set()
    instances = {i.name for i in circuit.instances}
    for name, told in directives.items():
        element = circuit.by_name.get(name)
        if name in instances or name in claimed or not isinstance(element, (Controlled, Device)):
            continue
        amplifier = _told(element, told, around, bench_of)
        if amplifier is not None and taken.isdisjoint(amplifier.elements):
            found.append(amplifier)
            taken.update(amplifier.elements)
    for chain in chains(around):
        names = [e.name for e in chain.members]
        judged = bench_of.judge(chain) if taken.isdisjoint(names) else None
        if judged is not None and abs(judged.gain) >= LEAST_GAIN:
            taken.update(names)
            found.append(_amplifier(chain, judged, ()))
    return found


class _Bench:
    """Judges chains, alike ones once."""

    def __init__(self) -> None:
        self.known: dict[tuple[object, ...], _Judged | None] = {}

    def judge(self, chain: Chain) -> _Judged | None:
        """What a chain is on the bench; None where its elements alone have no solution or no gain."""
        key = _key(chain.inner)
        if key not in self.known:
            try:
                self.known[key] = _judge(chain.inner)
            except (np.linalg.LinAlgError, KeyError):
                self.known[key] = None
        return self.known[key]


def _key(elements: Sequence[Element]) -> tuple[object, ...]:
    """The same for elements that differ in names only."""
    numbers: dict[str, object] = {GROUND: GROUND, PLUS: PLUS, MINUS: MINUS, OUTPUT: OUTPUT}

    def number(node: str) -> object:
        return numbers.setdefault(node, len(numbers))

    pieces: list[object] = []
    for element in elements:
        pieces += [type(element).__name__, *(number(n) for n in element.nodes)]
        if isinstance(element, Passive):
            pieces += [element.kind, element.value]
        elif isinstance(element, Controlled):
            pieces.append(element.kind)
            pieces += [(t.gain, number(t.positive), number(t.negative), number(t.source)) for t in element.terms]
        elif isinstance(element, Coupling):
            pieces += [element.inductors, element.factor]
    return tuple(pieces)


def _judge(inner: tuple[Element, ...]) -> _Judged | None:
    model = LinearModel(bench(inner, [PLUS, MINUS]), PLUS, MINUS, OUTPUT)
    at_dc = model.at_dc()
    plus, minus = float(at_dc.gain_plus[0].real), float(at_dc.gain_minus[0].real)
    if not np.isfinite([plus, minus]).all() or plus * minus >= 0:
        return None
    if plus < 0:
        model = LinearModel(model.bench, MINUS, PLUS, OUTPUT)
    name = gain_element(inner, [PLUS, MINUS, OUTPUT], (PLUS, MINUS), OUTPUT)
    return _Judged(plus, open_loop(model), [e.name for e in inner].index(name))


def _amplifier(chain: Chain, judged: _Judged, told: tuple[str, ...]) -> Amplifier:
    plus, minus = (chain.plus, chain.minus) if judged.gain > 0 else (chain.minus, chain.plus)
    named = ", ".join(e.name for e in chain.members)
    gain = f"{abs(judged.gain):.4g}"
    words = f"structure: gain {gain} from (`{plus}`, `{minus}`) to `{chain.output}`, by {named}"
    return Amplifier(
        name=chain.first.name, subckt="", non_inverting=plus, inverting=minus, output=chain.output,
        positive_supply=None, negative_supply=None, evidence=(words, *told),
        elements=tuple(e.name for e in chain.members), gain_element=chain.inner[judged.gain_index].name,
        open_loop=judged.open_loop, place=chain.first.origin.card.place(),
    )  # fmt: skip


def _told(element: Controlled | Device, told: PinDirective, around: Surroundings, bench_of: _Bench) -> Amplifier | None:
    """The amplifier that a directive makes of a source, whatever its gain."""
    plus, minus, output = (told.roles[role] for role in ("in+", "in-", "out"))
    words = (f"directive at {told.place}: in+ `{plus}`, in- `{minus}`, out `{output}`",)
    chain = chain_of(around, element.name, plus, minus, output) if isinstance(element, Controlled) else None
    judged = bench_of.judge(chain) if chain is not None else None
    if chain is not None and judged is not None:
        return _amplifier(chain, judged, words)
    reason = element.reason if isinstance(element, Device) else "its gain cannot be read"
    members = chain.members if chain is not None else (element,)
    return Amplifier(
        name=element.name, subckt="", non_inverting=plus, inverting=minus, output=output, positive_supply=None,
        negative_supply=None, evidence=words, elements=tuple(e.name for e in members), gain_element=element.name,
        open_loop=OpenLoop({}, None, exact=False, reason=f"no linear model is known for `{element.name}` ({reason})"),
        place=element.origin.card.place(),
    )  # fmt: skip
