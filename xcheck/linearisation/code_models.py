"""XSPICE code models that are linear: gain, summer and s_xfer, between voltages.

A transfer function is written as a chain of integrators (controllable canonical form; any text on linear systems),
scaled to its own frequency so that all states are of one size.
"""

import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

from xcheck.circuit.elements import GROUND, Controlled, Device, DeviceModel, Element, Origin, Passive, Term
from xcheck.deck.numbers import read_number
from xcheck.linearisation.semiconductors import NoEquivalent

Pair = tuple[str, str]
MOST_STATES = 30


@dataclass(frozen=True)
class _Ends:
    """What a code model is connected to, in order: groups of voltages, each between two nodes."""

    groups: tuple[tuple[Pair, ...], ...]

    @classmethod
    def of(cls, device: Device) -> "_Ends":
        groups: list[tuple[Pair, ...]] = []
        array: list[Pair] | None = None
        pending: list[str] = []
        mark = "%v"
        for word, kind in device.connections:
            if word == "[":
                array = []
            elif word == "]":
                groups.append(tuple(array or ()))
                array, mark = None, "%v"
            elif kind == "mark":
                mark = word
            else:
                if kind != "node" or mark not in ("%v", "%vd"):
                    raise NoEquivalent("it is connected to something other than voltages")
                pending.append(word)
                if len(pending) == (2 if mark == "%vd" else 1):
                    pair = (pending[0], pending[1] if len(pending) > 1 else GROUND)
                    pending = []
                    if array is None:
                        groups.append((pair,))
                        mark = "%v"
                    else:
                        array.append(pair)
        if pending or array is not None:
            raise NoEquivalent("its connections are not known")
        return cls(tuple(groups))


def code_model(device: Device) -> Iterator[Element]:
    """The linear elements of a code model, named after it. Raises NoEquivalent."""
    model = device.definition
    make = MODELS.get(model.type) if model is not None else None
    if model is None or make is None:
        raise NoEquivalent("no equivalent is known for its code model")
    ends = _Ends.of(device)
    if len(ends.groups) != 2 or len(ends.groups[1]) != 1:
        raise NoEquivalent("its connections are not those of one input and one output")
    yield from make(device, model, ends.groups[0], ends.groups[1][0])


def _gain(device: Device, model: DeviceModel, inputs: Sequence[Pair], output: Pair) -> Iterator[Element]:
    terms = (Term(model.get("gain", 1.0), *inputs[0]),)
    yield Controlled(device.name, "e", output, terms, 0.0, _part_of(device))


def _summer(device: Device, model: DeviceModel, inputs: Sequence[Pair], output: Pair) -> Iterator[Element]:
    weights = _array(model, "in_gain") or [1.0] * len(inputs)
    if len(weights) != len(inputs):
        raise NoEquivalent("it has not one gain for each input")
    scale = model.get("out_gain", 1.0)
    terms = tuple(Term(scale * weight, *pair) for weight, pair in zip(weights, inputs, strict=True))
    yield Controlled(device.name, "e", output, terms, 0.0, _part_of(device))


def _transfer(device: Device, model: DeviceModel, inputs: Sequence[Pair], output: Pair) -> Iterator[Element]:
    """gain N(s/w)/D(s/w), coefficients of the highest power first, w = denormalized_freq."""
    numerator, denominator = _array(model, "num_coeff"), _array(model, "den_coeff")
    while denominator and denominator[0] == 0:
        denominator.pop(0)
    while numerator and numerator[0] == 0:
        numerator.pop(0)
    order = len(denominator) - 1
    if not denominator or not 0 < len(numerator) <= len(denominator) or order > MOST_STATES:
        raise NoEquivalent("its numerator is of a higher order than its denominator, or a polynomial is missing")
    own = model.get("denormalized_freq", 1.0) or 1.0
    last = next(abs(a) for a in reversed(denominator) if a)
    pace = (last / abs(denominator[0])) ** (1 / order) if order else 1.0
    # p = s/(w pace): the coefficient of p^k is that of (s/w)^k times pace^k
    lead = denominator[0] * pace**order
    a = [c * pace ** (order - k) / lead for k, c in enumerate(denominator)]
    padded = [0.0] * (order + 1 - len(numerator)) + numerator
    b = [c * pace ** (order - k) / lead for k, c in enumerate(padded)]
    origin = _part_of(device)
    state = [f"{device.name}:x{k}" for k in range(order)]  # x0 is the last integral, d x_k = x_(k+1)
    rate = own * pace
    for k in range(order):
        yield Passive(f"{device.name}:c{k}", "c", (state[k], GROUND), 1.0 / rate, origin)
        if k + 1 < order:
            terms: tuple[Term, ...] = (Term(1.0, state[k + 1]),)
        else:
            terms = (Term(1.0, *inputs[0]), *(Term(-a[order - j], state[j]) for j in range(order) if a[order - j]))
        yield Controlled(f"{device.name}:g{k}", "g", (GROUND, state[k]), terms, 0.0, origin)
    scale = model.get("gain", 1.0)
    # what the numerator has of the denominator's order goes straight through
    out = [Term(scale * (b[order - j] - b[0] * a[order - j]), state[j]) for j in range(order)]
    if b[0]:
        out.append(Term(scale * b[0], *inputs[0]))
    yield Controlled(device.name, "e", output, tuple(t for t in out if t.gain), 0.0, origin)


def _part_of(device: Device) -> Origin:
    """The origin of what stands for a device: its nodes are not in the order of the device's."""
    return replace(device.origin, device=device.name)


def _array(model: DeviceModel, name: str) -> list[float]:
    """The numbers of an array parameter, [] where it is not there. Raises NoEquivalent."""
    found = re.search(rf"\b{name}\s*=\s*\[([^\]]*)\]", model.text, re.IGNORECASE)
    if found is None:
        return []
    numbers = [read_number(word) for word in re.split(r"[\s,]+", found.group(1).strip()) if word]
    if any(n is None for n in numbers):
        raise NoEquivalent(f"`{name}` is no list of numbers")
    return [n.value for n in numbers if n is not None]


MODELS: Mapping[str, Callable[[Device, DeviceModel, Sequence[Pair], Pair], Iterator[Element]]] = {
    "gain": _gain, "summer": _summer, "s_xfer": _transfer,
}  # fmt: skip
