"""The designer's own word in the deck, on pins and on ports.

    * xcheck: amplifier INSTANCE in+=PIN in-=PIN out=PIN [v+=PIN] [v-=PIN]
    * xcheck: port NODE...

INSTANCE is an instance (then PIN is a pin of its subcircuit), a subcircuit (then it speaks of all its instances), or a
controlled source (then PIN is a node). A directive inside a `.subckt` body speaks of all instances of that body.
"""

import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from difflib import get_close_matches
from typing import get_args

from xcheck.circuit.elements import Circuit, Controlled, Device, Instance
from xcheck.deck.cards import Card, Directive
from xcheck.finding import Finding
from xcheck.place import Place
from xcheck.project import Project
from xcheck.stages.pins import SIGNAL, Role

FORM = "write it as `* xcheck: amplifier XU1 in+=PIN in-=PIN out=PIN`, with v+=PIN v-=PIN where there are supplies"
PORT_FORM = "write it as `* xcheck: port NODE`, with nodes of the circuit around it"


@dataclass(frozen=True, slots=True)
class PinDirective:
    """Roles and what has them: pins of the instance's subcircuit, or flat nodes around a bare source."""

    roles: Mapping[Role, str]
    place: Place


def pin_directives(circuit: Circuit) -> tuple[dict[str, PinDirective], tuple[Finding, ...]]:
    """Directives by flat name of the instance or source, and what is wrong with others."""
    found: dict[str, PinDirective] = {}
    findings: list[Finding] = []
    reader = _PinReader(circuit)
    for directive in circuit.directives:
        if directive.words and directive.words[0].lower() == "amplifier":
            told, fault, name = reader.read(directive)
            found.update(told)
            if fault:
                findings.append(Finding("syntax", "error", directive.place, fault, name, advice=FORM))
    return found, tuple(findings)


def project_pins(circuit: Circuit, project: Project) -> tuple[dict[str, PinDirective], tuple[Finding, ...]]:
    """What a project file says of pins, by flat name of the instance, and what of it does not fit the subcircuit."""
    found: dict[str, PinDirective] = {}
    faults: dict[Finding, None] = {}
    place = Place(project.path, 1, 1, 1)
    for instance in circuit.instances:
        stated = project.amplifiers.get(instance.subckt)
        if stated is None or not stated.pins:
            continue
        names = [pin for pin, _ in instance.pins]
        by_place: dict[str | int, str] = {k + 1: name for k, name in enumerate(names)}
        pins = {role: by_place.get(pin, str(pin)) for role, pin in stated.pins.items()}
        strange = [f"{pin}" for pin in pins.values() if pin not in names]
        if strange:
            fault = f"amplifiers.{instance.subckt}.pins: there is no pin `{strange[0]}` (it has {' '.join(names)})"
            faults[Finding("syntax", "error", place, fault, instance.subckt, advice="name a pin of the subcircuit")] = (
                None
            )
        else:
            roles: dict[Role, str] = {role: str(pins[role]) for role in get_args(Role) if role in pins}
            found[instance.name] = PinDirective(roles, place)
    return found, tuple(faults)


def port_directives(circuit: Circuit) -> Iterator[tuple[str, Directive]]:
    """The flat nodes that port directives name, a pin of the body around a directive by the node that it is on."""
    scopes = Scopes(circuit)
    for directive in circuit.directives:
        if directive.words and directive.words[0].lower() == "port":
            for word in directive.words[1:] or ("",):
                for instance in scopes.around(directive):
                    yield local_node(word.lower(), instance), directive


def local_node(name: str, instance: Instance | None) -> str:
    """The flat name of a node as written in the body of an instance, or at the top."""
    if instance is None:
        return name
    return dict(instance.pins).get(name, f"{instance.name}.{name}")


class Scopes:
    """The instances whose body a directive is written in."""

    def __init__(self, circuit: Circuit) -> None:
        self.bodies: dict[int, list[Instance]] = {}
        for instance in circuit.instances:
            self.bodies.setdefault(id(instance.definition), []).append(instance)
        self.around_card: list[Card | None] = [None]
        open_bodies: list[Card] = []
        for card in circuit.deck.cards if circuit.directives else ():
            if card.kind in (".subckt", ".macro"):
                open_bodies.append(card)
            elif card.kind in (".ends", ".eom") and open_bodies:
                open_bodies.pop()
            self.around_card.append(open_bodies[-1] if open_bodies else None)
        self.reviewed_alone = bool(circuit.boundary)

    def around(self, directive: Directive) -> list[Instance | None]:
        """All instances of the body around a directive; [None] at the top, or in a body that is reviewed alone."""
        card = self.around_card[min(directive.cards_before, len(self.around_card) - 1)]
        if card is None:
            return [None]
        instances: list[Instance | None] = list(self.bodies.get(id(card), ()))
        return instances or ([None] if self.reviewed_alone else [])


class _PinReader:
    def __init__(self, circuit: Circuit) -> None:
        self.scopes = Scopes(circuit)
        self.instances = {i.name: i for i in circuit.instances}
        self.by_subckt: dict[str, list[Instance]] = {}
        for instance in circuit.instances:
            self.by_subckt.setdefault(instance.subckt, []).append(instance)
        self.sources = {e.name for e in circuit.elements if isinstance(e, (Controlled, Device))}
        self.nodes = frozenset(circuit.nodes)

    def read(self, directive: Directive) -> tuple[dict[str, PinDirective], str, str]:
        """What a directive tells, by flat name, or what is wrong with it; and the name that it speaks of."""
        text = re.sub(r"\s*=\s*", "=", " ".join(directive.words[1:]).lower())
        name, *words = text.split() or [""]
        pairs = dict(word.split("=", 1) for word in words if "=" in word)
        roles: dict[Role, str] = {role: pairs[role] for role in get_args(Role) if role in pairs}
        if strange := [w for w in words if "=" not in w or w.split("=")[0] not in get_args(Role)]:
            return {}, f"`{strange[0]}` is none of in+=, in-=, out=, v+=, v-=", name
        if missing := [role for role in SIGNAL if role not in roles]:
            return {}, f"in+, in- and out are wanted: no {' and no '.join(missing)} is told", name
        told: dict[str, PinDirective] = {}
        faults: list[str] = []
        for scope in self.scopes.around(directive):
            for target, named, fault in self._targets(name, roles, scope):
                if fault:
                    faults.append(fault)
                else:
                    told[target] = PinDirective(named, directive.place)
        return told, faults[0] if faults else "", name

    def _targets(
        self, name: str, roles: Mapping[Role, str], scope: Instance | None
    ) -> Iterator[tuple[str, Mapping[Role, str], str]]:
        """(flat name, roles, fault) of all that a directive speaks of."""
        prefix = "" if scope is None else f"{scope.name}."
        one = self.instances.get(prefix + name)
        several = [one] if one is not None else self.by_subckt.get(name, [])
        for instance in several:
            pins = dict(instance.pins)
            strange = [p for p in roles.values() if p not in pins]
            fault = f"`{instance.subckt}` has no pin `{strange[0]}` (it has {' '.join(pins)})" if strange else ""
            yield instance.name, roles, fault
        if several:
            return
        if prefix + name in self.sources:
            nodes = {role: local_node(node, scope) for role, node in roles.items()}
            strange = [n for n in nodes.values() if n not in self.nodes]
            yield prefix + name, nodes, f"there is no node `{strange[0]}`" if strange else ""
            return
        near = get_close_matches(name, [n.removeprefix(prefix) for n in self.instances], n=1)
        hint = f" (did you mean `{near[0]}`?)" if near else ""
        yield name, roles, f"there is no instance, subcircuit or controlled source `{name}`{hint}"
