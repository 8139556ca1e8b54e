"""Op-amps whose subcircuit the deck does not define: found by the part that they are named after, and its pins."""

from collections.abc import Mapping

from xcheck.circuit.elements import Circuit, Device
from xcheck.finding import Finding
from xcheck.parts.catalogue import Part, find
from xcheck.stages.supplies import SupplyLevels
from xcheck.stages.types import Amplifier, OpenLoop

COMMON_ORDER = ("in+", "in-", "v+", "v-", "out")
"""Of the five pins of a single op-amp's subcircuit (common practice)."""
OTHER_ORDERS = (
    ("in+", "in-", "out", "v+", "v-"), ("in-", "in+", "v+", "v-", "out"), ("in+", "in-", "v-", "v+", "out"),
    ("out", "in-", "in+", "v+", "v-"), ("out", "in+", "in-", "v+", "v-"), ("v+", "v-", "in+", "in-", "out"),
    ("out", "v-", "in+", "in-", "v+"), ("in+", "v-", "in-", "out", "v+"),
)  # fmt: skip
"""Others that are met, among them those of five-pin packages."""
THREE = ("in+", "in-", "out")


def missing_amplifiers(circuit: Circuit, levels: SupplyLevels) -> tuple[list[Amplifier], list[Finding]]:
    """The op-amps among instances of undefined subcircuits, and where their pins are uncertain."""
    amplifiers: list[Amplifier] = []
    findings: list[Finding] = []
    for element in circuit.elements:
        if not isinstance(element, Device) or element.kind != "x" or element.reason != "undefined":
            continue
        part = find(element.model)
        if part is None or part.kind != "voltage-feedback":
            continue
        found, doubt = _sections(element, part, levels)
        amplifiers += found
        if doubt:
            findings.append(
                Finding(
                    "amplifier-pins-uncertain", "warning", element.origin.card.place(),
                    f"`{element.model}` is defined nowhere, and {doubt}", element.name,
                    advice="include its model, or define a subcircuit with the part's values",
                )
            )  # fmt: skip
    return amplifiers, findings


def _sections(device: Device, part: Part, levels: SupplyLevels) -> tuple[list[Amplifier], str]:
    """The amplifiers of a part, and what is doubtful about its pins."""
    by_number = _by_package(device, part)
    if by_number:
        return by_number, ""
    nodes = device.nodes
    if len(nodes) == len(THREE):
        return [_amplifier(device, part, dict(zip(THREE, nodes, strict=True)), "three nodes")], ""
    if len(nodes) != len(COMMON_ORDER):
        return [], f"its {len(nodes)} nodes are none of the package's"
    usual = dict(zip(COMMON_ORDER, nodes, strict=True))
    if _fits(usual, levels):
        return [_amplifier(device, part, usual, "the usual order in+ in- v+ v- out")], ""
    fitting = [roles for order in OTHER_ORDERS if _fits(roles := dict(zip(order, nodes, strict=True)), levels)]
    # inputs exchanged fit the supplies as well: then the one with its output fed back to the inverting input
    fitting = [r for r in fitting if levels.tied(r["out"], r["in-"])] or fitting
    if len(fitting) == 1:
        return [_amplifier(device, part, fitting[0], "the order that fits the supplies")], ""
    return [
        _amplifier(device, part, usual, "the usual order")
    ], "its nodes fit no order of pins: in+ in- v+ v- out is assumed"


def _by_package(device: Device, part: Part) -> list[Amplifier]:
    """By the package's own pin numbers, where the instance has as many nodes as the package pins."""
    most = {1: 8, 2: 8, 4: 14}.get(part.sections, 0)
    if not part.pinout or len(device.nodes) != most:
        return []
    found = []
    at = {role: device.nodes[int(number) - 1] for number, role in part.pinout.items()}
    for section in range(1, part.sections + 1):
        mark = "" if part.sections == 1 else str(section)
        roles = {
            "in+": at[f"in{mark}+"],
            "in-": at[f"in{mark}-"],
            "out": at[f"out{mark}"],
            "v+": at["v+"],
            "v-": at["v-"],
        }
        name = device.name if part.sections == 1 else f"{device.name}.{section}"
        found.append(_amplifier(device, part, roles, "the package's pin numbers", name))
    return found


def _fits(roles: Mapping[str, str], levels: SupplyLevels) -> bool:
    """Whether the supplies are at the supply pins and the output is at none."""
    high, low, out = (levels.level(roles[role]) for role in ("v+", "v-", "out"))
    if high is None or low is None or high <= low:
        return False
    return out is None and roles["in+"] != roles["in-"]


def _amplifier(device: Device, part: Part, roles: Mapping[str, str], how: str, name: str = "") -> Amplifier:
    told = ", ".join(f"{role} `{roles[role]}`" for role in COMMON_ORDER if role in roles)
    return Amplifier(
        name=name or device.name, subckt=device.model, non_inverting=roles["in+"], inverting=roles["in-"],
        output=roles["out"], positive_supply=roles.get("v+"), negative_supply=roles.get("v-"),
        evidence=(f"catalogue: `{device.model}` is defined nowhere; {part.name} by its name, pins by {how}: {told}",),
        elements=(device.name,), gain_element=device.name,
        open_loop=OpenLoop({}, None, exact=False, reason=f"the deck does not define `{device.model}`"),
        place=device.origin.card.place(),
    )  # fmt: skip
