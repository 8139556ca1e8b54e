"""`* xcheck: amplifier INSTANCE in+=PIN in-=PIN out=PIN [v+=PIN v-=PIN]`: the designer's own word on pins."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import get_args

from xcheck.circuit.elements import Circuit
from xcheck.finding import Finding
from xcheck.place import Place
from xcheck.stages.pins import Role

FORM = "write it as `* xcheck: amplifier XU1 in+=PIN in-=PIN out=PIN`, with the pins of its subcircuit"


@dataclass(frozen=True, slots=True)
class PinDirective:
    """Roles and the pins of the subcircuit that have them."""

    roles: Mapping[Role, str]
    place: Place


def pin_directives(circuit: Circuit) -> tuple[dict[str, PinDirective], tuple[Finding, ...]]:
    """Directives by flat instance name, and what is wrong with others."""
    found: dict[str, PinDirective] = {}
    findings: list[Finding] = []
    instances = {i.name: i for i in circuit.instances}
    for directive in circuit.directives:
        if not directive.words or directive.words[0].lower() != "amplifier":
            continue
        words = [w.lower() for w in directive.words[1:]]
        name = words[0] if words else ""
        pairs = dict(w.split("=", 1) for w in words[1:] if "=" in w)
        roles: dict[Role, str] = {role: pairs[role] for role in get_args(Role) if role in pairs}
        instance = instances.get(name)
        if instance is None:
            fault = f"no instance `{name}`"
        elif not {"in+", "in-", "out"} <= roles.keys() or len(pairs) != len(words) - 1:
            fault = "in+, in- and out are wanted"
        elif unknown := [p for p in roles.values() if p not in dict(instance.pins)]:
            fault = f"`{instance.subckt}` has no pin `{unknown[0]}` (it has {' '.join(p for p, _ in instance.pins)})"
        else:
            found[name] = PinDirective(roles, directive.place)
            continue
        findings.append(Finding("syntax", "error", directive.place, fault, name, advice=FORM))
    return found, tuple(findings)
