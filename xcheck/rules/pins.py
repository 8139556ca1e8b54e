"""Amplifiers whose pins are on nodes that their roles do not allow."""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from itertools import permutations

from xcheck.circuit.elements import GROUND, Source
from xcheck.finding import Finding
from xcheck.place import Place
from xcheck.reviewed import Evidence
from xcheck.rules.graphs import around_amplifiers
from xcheck.stages.supplies import SupplyLevels
from xcheck.stages.types import Amplifier

Roles = Mapping[str, str]
"""Role ('in+', 'in-', 'out', 'v+', 'v-') to flat node."""


def roles_of(amplifier: Amplifier) -> dict[str, str]:
    """The nodes of an amplifier by role; supplies that it has none of are left out."""
    found = {"in+": amplifier.non_inverting, "in-": amplifier.inverting, "out": amplifier.output}
    if amplifier.positive_supply is not None:
        found["v+"] = amplifier.positive_supply
    if amplifier.negative_supply is not None:
        found["v-"] = amplifier.negative_supply
    return found


def place_on(evidence: Evidence, amplifier: Amplifier, node: str) -> Place:
    """Where an amplifier's card names a node; the card itself where that is not found."""
    instance = next((i for i in evidence.circuit.instances if i.name == amplifier.name), None)
    element = evidence.circuit.by_name.get(amplifier.name)
    nodes: tuple[str, ...] = ()
    if instance is not None:
        nodes, card = tuple(n for _, n in instance.pins), instance.origin.card
    elif element is not None:
        nodes, card = element.nodes, element.origin.card
    if node in nodes and len(card.fields) > nodes.index(node) + 1:
        return card.place(card.fields[nodes.index(node) + 1])
    return amplifier.place


@dataclass(frozen=True)
class _Misfit:
    """What of an amplifier's pins cannot be, in words; better: the roles that would fit all of it, None for none."""

    words: tuple[str, ...]
    better: Roles | None


def misfits(evidence: Evidence) -> dict[str, _Misfit]:
    """By amplifier's name: pins on nodes that their roles do not allow."""
    levels = Levels(evidence)
    found: dict[str, _Misfit] = {}
    for amplifier in evidence.partition.amplifiers:
        roles = roles_of(amplifier)
        words = _against(roles, levels)
        if words:
            on_rail = any(levels.held(roles[role]) and levels.level(roles[role]) for role in ("in+", "in-", "out"))
            misplaced = levels.held(roles["out"]) or on_rail
            found[amplifier.name] = _Misfit(words, _better(roles, levels) if misplaced else None)
    return found


class Levels:
    """What the sources outside the amplifiers hold, and what a resistor or inductor feeds from there."""

    def __init__(self, evidence: Evidence) -> None:
        around = replace(evidence.circuit, elements=around_amplifiers(evidence.partition))
        self._supplies = SupplyLevels(around)

    def held(self, node: str) -> bool:
        """Whether a voltage source itself holds a node; ground is held."""
        return self._supplies.held(node)

    def level(self, node: str) -> float | None:
        """The DC level of a node, None where no source holds or feeds it."""
        return self._supplies.level(node)

    def tied(self, a: str, b: str) -> bool:
        """Whether passives tie two nodes."""
        return self._supplies.tied(a, b)


def _against(roles: Roles, levels: Levels) -> tuple[str, ...]:
    """What speaks against some roles."""
    words = []
    if levels.held(roles["out"]):
        words.append(f"the output is on `{roles['out']}`, which a source holds")
    unfed = [role for role in ("v+", "v-") if role in roles and levels.level(roles[role]) is None]
    words += [f"{role} is on `{roles[role]}`, which no source feeds" for role in unfed]
    high, low = (levels.level(roles[r]) if r in roles else None for r in ("v+", "v-"))
    if high is not None and low is not None and high == low and roles["v+"] != roles["v-"]:
        words.append("both supplies are at one level")
    return tuple(words)


def _better(roles: Roles, levels: Levels) -> Roles | None:
    """Another order of the same nodes that nothing speaks against, None where there is none."""
    names = list(roles)
    fitting = []
    there = [level for level in map(levels.level, roles.values()) if level is not None]
    for order in permutations(roles.values()):
        other = dict(zip(names, order, strict=True))
        if not {"v+", "v-"} <= other.keys() or _against(other, levels):
            continue
        high, low = levels.level(other["v+"]), levels.level(other["v-"])
        fed_back = levels.tied(other["out"], other["in-"]) or other["out"] == other["in-"]
        if high is not None and low is not None and (high, low) == (max(there), min(there)) and high > low and fed_back:
            fitting.append(other)
    # output and inverting input look alike from the network: what stays where it is, and a node's name, decide
    return max(fitting, key=lambda f: (sum(f[r] == roles[r] for r in names), "out" in f["out"]), default=None)


def pin_order(evidence: Evidence) -> Iterator[Finding]:
    """An instance whose nodes do not fit the pins that its model declares, while another order of them would."""
    wrong = misfits(evidence)
    for amplifier in evidence.partition.amplifiers:
        misfit = wrong.get(amplifier.name)
        if misfit is None or misfit.better is None or not amplifier.subckt:
            continue
        told = ", ".join(f"{role} {node}" for role, node in misfit.better.items())
        yield Finding(
            "pin-order", "error", amplifier.place,
            f"the nodes of `{amplifier.name}` do not fit the pins of `{amplifier.subckt}`: {'; '.join(misfit.words)} "
            f"(pins by {amplifier.evidence[0].partition(':')[0]})",
            subject=amplifier.name, cause="pins-misordered",
            advice=f"this would fit: {told}; compare the order of the nodes with the model's `.subckt` card",
        )  # fmt: skip


def inputs_tied(evidence: Evidence) -> Iterator[Finding]:
    """Both inputs of an amplifier on one node."""
    for amplifier in evidence.partition.amplifiers:
        node = amplifier.non_inverting
        if node == amplifier.inverting:
            yield Finding(
                "inputs-tied", "error", place_on(evidence, amplifier, node),
                f"both inputs of {amplifier.name} are on `{node}`: nothing drives it but its own offset",
                subject=amplifier.name, advice="one of the two belongs on another node",
            )  # fmt: skip


def output_grounded(evidence: Evidence) -> Iterator[Finding]:
    """An amplifier's output on ground or on a supply."""
    wrong = misfits(evidence)
    rails = {n for a in evidence.partition.amplifiers for n in (a.positive_supply, a.negative_supply) if n is not None}
    levels = Levels(evidence)
    for amplifier in evidence.partition.amplifiers:
        if _is_explained(wrong, amplifier):
            continue
        output = amplifier.output
        on_rail = output in rails and levels.held(output)
        if output == GROUND or on_rail:
            what = "ground" if output == GROUND else f"the supply `{output}`"
            yield Finding(
                "output-grounded", "error", place_on(evidence, amplifier, output),
                f"the output of {amplifier.name} is on {what}", subject=amplifier.name,
                advice="give the output a node of its own",
            )  # fmt: skip


def outputs_tied(evidence: Evidence) -> Iterator[Finding]:
    """Two amplifier outputs, or an output and a source, on one node."""
    wrong = misfits(evidence)
    rails = {n for a in evidence.partition.amplifiers for n in (a.positive_supply, a.negative_supply) if n is not None}
    levels = Levels(evidence)
    first: dict[str, Amplifier] = {}
    for amplifier in evidence.partition.amplifiers:
        output = amplifier.output
        if output == GROUND or _is_explained(wrong, amplifier):
            continue
        other = first.setdefault(output, amplifier)
        held = levels.held(output) and output not in rails
        if other is amplifier and not held:
            continue
        source = f"the voltage source {_holder(evidence, output)}"
        what = source if other is amplifier else f"the output of {other.name}"
        yield Finding(
            "outputs-tied", "error", place_on(evidence, amplifier, output),
            f"the output of {amplifier.name} and {what} are on one node, `{output}`: each wants another voltage there",
            subject=amplifier.name, advice="part them, or put a resistor in each",
        )  # fmt: skip


def _is_explained(wrong: Mapping[str, _Misfit], amplifier: Amplifier) -> bool:
    """Whether `pin-order` says it already."""
    misfit = wrong.get(amplifier.name)
    return misfit is not None and misfit.better is not None and bool(amplifier.subckt)


def _holder(evidence: Evidence, node: str) -> str:
    sources = (e for e in around_amplifiers(evidence.partition) if isinstance(e, Source) and node in e.nodes)
    return next((f"`{e.name}`" for e in sources if e.kind == "v"), "there")
