"""The flat circuit as a deck that ngspice takes: what this program has read, to be held against what ngspice reads.

Operating point and AC response are those of the deck that was read. Waveforms, analyses and commands are left out, and
so is what has no value or no definition; such elements stand there as comments.
"""

import re
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import TypeGuard

from xcheck.circuit.elements import (
    GROUND,
    Behaviour,
    Circuit,
    Controlled,
    Coupling,
    Device,
    Element,
    Passive,
    Source,
    Term,
)
from xcheck.circuit.trees import Binary, Call, Choice, Constant, Name, Node, Unary

_SAFE = re.compile(r"[a-z_][a-z0-9_]*|[1-9][0-9]*")
_CONDITIONS = frozenset(("tnom", "gmin", "reltol", "abstol", "vntol", "scale", "rshunt", "cshunt", "defl", "defw"))
"""Numbers of `.options` that an operating point or an AC response depends on."""


@dataclass
class FlatDeck:
    """text: the deck; nodes, names: what the circuit's nodes and elements are called in it, by flat name. Ground is
    `0`; elements that could not be written have no name."""

    text: str
    nodes: dict[str, str] = field(default_factory=dict)
    names: dict[str, str] = field(default_factory=dict)


def flat_deck(circuit: Circuit) -> FlatDeck:
    """A circuit as a flat deck: linear elements and sources first, then devices and their models."""
    return _Writing(circuit).deck()


def write_flat(circuit: Circuit) -> str:
    """The text of `flat_deck`."""
    return flat_deck(circuit).text


class _Writing:
    def __init__(self, circuit: Circuit) -> None:
        self.circuit = circuit
        self.nodes = _named(dict.fromkeys(circuit.nodes, ""))
        self.nodes[GROUND] = GROUND
        self.names = _named({e.name: _letter(e) for e in circuit.elements})
        self.models: dict[tuple[str, str], str] = {}
        self.model_lines: list[str] = []

    def deck(self) -> FlatDeck:
        lines = ["* flat circuit", f".options temp={_number(self.circuit.temperature)}", *self._conditions()]
        for element in sorted(self.circuit.elements, key=lambda e: isinstance(e, Device)):
            try:
                line = self._device(element) if isinstance(element, Device) else self._linear(element)
            except KeyError:  # it reads the current of something that is not there
                line = ""
            if not line:
                self.names.pop(element.name, None)
            lines.append(line or f"* left out: {_printable(element.name)}")
        lines += [*self.model_lines, ".end", ""]
        return FlatDeck("\n".join(lines), self.nodes, self.names)

    def _conditions(self) -> Iterator[str]:
        for analysis in self.circuit.analyses:
            words = analysis.arguments
            if analysis.kind in ("options", "option", "opt"):
                for key, sign, value in zip(words, words[1:], words[2:], strict=False):
                    if sign == "=" and str(key).lower() in _CONDITIONS and isinstance(value, float):
                        yield f".options {key}={_number(value)}"

    def _at(self, nodes: Iterable[str]) -> str:
        return " ".join(self.nodes[node] for node in nodes)

    def _linear(self, element: Passive | Coupling | Source | Controlled) -> str:
        name = self.names[element.name]
        match element:
            case Passive():
                return f"{name} {self._at(element.nodes)} {_number(element.value)}"
            case Coupling():
                pair = " ".join(self.names[inductor] for inductor in element.inductors)
                return f"{name} {pair} {_number(element.factor)}"
            case Source():
                ac = ""
                if element.ac is not None:
                    ac = f" ac {_number(abs(element.ac))} {_number(_degrees(element.ac))}"
                return f"{name} {self._at(element.nodes)} dc {_number(element.dc)}{ac}"
        return self._controlled(element, name)

    def _controlled(self, element: Controlled, name: str) -> str:
        if name[0] == "b":
            quantity = "v" if element.kind in "eh" else "i"
            terms = [_number(element.offset), *(f"({_number(t.gain)})*{self._term(t)}" for t in element.terms)]
            return f"{name} {self._at(element.nodes)} {quantity}={'+'.join(terms)}"
        term = element.terms[0]
        control = self.names[term.source] if term.source else self._at((term.positive, term.negative))
        return f"{name} {self._at(element.nodes)} {control} {_number(term.gain)}"

    def _term(self, term: Term) -> str:
        if term.source:
            return f"i({self.names[term.source]})"
        return f"v({self.nodes[term.positive]},{self.nodes[term.negative]})"

    def _device(self, device: Device) -> str:
        name = self.names[device.name]
        if device.behaviour is not None:
            return f"{name} {self._at(device.nodes)} {self._behaviour(device.behaviour)}"
        ends = (*device.nodes, *device.sensing)
        pairs = "".join(f" {key}={_number(value)}" for key, value in device.parameters)
        if device.kind == "r" and device.definition is None and device.parameters:
            value, at_ac = (_number(number) for _, number in device.parameters)
            return f"{name} {self._at(ends)} {value} ac={at_ac}"
        if device.kind == "t":
            return f"{name} {self._at(ends)}{pairs}"
        if device.definition is None:
            return ""
        model = self._model(device.definition.type, device.definition.text)
        if device.kind == "a":
            tables = {"node": self.nodes, "source": self.names}
            words = [tables[kind][word] if kind in tables else word for word, kind in device.connections]
            return f"{name} {' '.join(words)} {model}"
        control = f" {self.names[device.control]}" if device.control else ""
        return f"{name} {self._at(ends)}{control} {model}{pairs}"

    def _behaviour(self, behaviour: Behaviour) -> str:
        tree = behaviour.tree
        if _is_table(tree):
            x, *points = (self._tree(argument) for argument in tree.arguments)
            pairs = " ".join(f"({a},{b})" for a, b in zip(points[::2], points[1::2], strict=True))
            return f"table {{{x}}} = {pairs}"
        if behaviour.gives in "rc":
            return f"{behaviour.gives}='{self._tree(tree)}'"
        return f"{behaviour.gives}={self._tree(tree)}"

    def _model(self, kind: str, text: str) -> str:
        text = text.encode("ascii", "replace").decode("ascii")
        known = self.models.get((kind, text))
        if known is None:
            known = self.models[kind, text] = f"m_{len(self.models) + 1}"
            self.model_lines.append(f".model {known} {kind} {text}")
        return known

    def _tree(self, tree: Node) -> str:
        match tree:
            case Constant(value):
                return _number(value) if value >= 0 else f"({_number(value)})"
            case Name(name):
                return name
            case Unary(operator, operand):
                return f"({operator}{self._tree(operand)})"
            case Binary(operator, left, right):
                sign = {"=": "==", "&": "&&", "|": "||", "<>": "!="}.get(operator, operator)
                return f"({self._tree(left)}{sign}{self._tree(right)})"
            case Choice(condition, yes, no):
                # ngspice wants a condition in parentheses of its own where it stands inside another
                return f"(({self._tree(condition)}) ? ({self._tree(yes)}) : ({self._tree(no)}))"
        return self._call(tree)

    def _call(self, tree: Call) -> str:
        if tree.words:
            names = self.nodes if tree.function == "v" else self.names
            return f"{tree.function}({','.join(names[word] for word in tree.words)})"
        return f"{tree.function}({','.join(self._tree(argument) for argument in tree.arguments)})"


def _is_table(tree: Node) -> TypeGuard[Call]:
    return isinstance(tree, Call) and tree.function == "table"


def _letter(element: Element) -> str:
    """The letter that ngspice knows an element by."""
    if isinstance(element, Controlled):
        kind = element.kind
        if element.offset or len(element.terms) != 1:
            return "b"
        if bool(element.terms[0].source) != (kind in "fh"):
            return {"e": "h", "h": "e", "f": "g", "g": "f"}[kind]
        return kind
    if isinstance(element, Coupling):
        return "k"
    if isinstance(element, Device) and element.behaviour is not None:
        gives = element.behaviour.gives
        if _is_table(element.behaviour.tree):
            return "e" if gives == "v" else "g"
        return "b" if gives in "vi" else gives
    return element.kind


def _named(letters: Mapping[str, str]) -> dict[str, str]:
    """Names that ngspice takes, by the circuit's: the same where it is safe and begins with the letter wanted ('' for
    any), else the letter and a number."""
    taken = {name for name, letter in letters.items() if _SAFE.fullmatch(name) and name.startswith(letter)}
    found: dict[str, str] = {}
    number = 0
    for name, letter in letters.items():
        if name in taken:
            found[name] = name
            continue
        number += 1
        while f"{letter or 'n'}_{number}" in taken:
            number += 1
        found[name] = f"{letter or 'n'}_{number}"
    return found


def _number(value: float) -> str:
    return repr(float(value))


def _degrees(phasor: complex) -> float:
    import cmath
    import math

    return math.degrees(cmath.phase(phasor))


def _printable(name: str) -> str:
    return "".join(c if (c.isascii() and c.isalnum()) or c in "._" else "?" for c in name)
