"""Which instances can share a subcircuit's text, and which need a copy of their own."""

from collections.abc import Mapping
from dataclasses import dataclass, field

from xcheck.circuit.elements import Instance
from xcheck.simulate.cuts import Edit, InstancePath, Need, NoCut
from xcheck.simulate.terminals import node_spots

TOP = 0
"""Stands for the scope outside of all subcircuits."""


@dataclass
class Variant:
    """One text of a scope. name: the subcircuit's name in it, '' for the user's own; edits by identity of card."""

    name: str
    need: Need
    edits: dict[int, list[tuple[int, int, str]]] = field(default_factory=dict)


def variants_of(
    needs: Mapping[InstancePath, Need], instances: Mapping[str, Instance], mark: str
) -> dict[int, list[Variant]]:
    """The texts of each scope, by the identity of its `.subckt` card; the user's own name first.

    An instance without needs of its own may have any text that is not for one instance alone: cuts change nothing
    in it. Instances are seen from the inside out, since a copy changes the instance card in the text around it.
    """
    waiting: dict[int, dict[InstancePath, Need]] = {0: {}}
    for path, need in needs.items():
        waiting.setdefault(len(path), {})[path] = Need(dict(need.edits), dict(need.lines), need.alone)
    found: dict[int, list[Variant]] = {}
    for depth in range(max(waiting), 0, -1):
        around = waiting.setdefault(depth - 1, {})
        for path, need in waiting.get(depth, {}).items():
            instance = instances[path[-1]]
            name = _assigned(need, instance, found, mark)
            outer = around.setdefault(path[:-1], Need())
            outer.edits |= _renaming(instance, name)
            outer.alone |= need.alone
    found[TOP] = [Variant("", waiting[0].get((), Need()))]
    for texts in found.values():
        for text in texts:
            for (card, start, end), new in text.need.edits.items():
                text.edits.setdefault(card, []).append((start, end, new))
    return found


def _assigned(need: Need, instance: Instance, found: dict[int, list[Variant]], mark: str) -> str:
    """The name of the text that an instance gets; the text takes on what the instance needs."""
    texts = found.setdefault(id(instance.definition), [Variant("", Need())])
    if not need.alone:
        for text in texts:
            if not text.need.alone and not text.need.clashes(need.edits):
                text.need.edits |= need.edits
                text.need.lines |= need.lines
                return text.name or instance.subckt
    texts.append(Variant(f"{instance.subckt}_{mark}{len(texts)}", need))
    return texts[-1].name


def _renaming(instance: Instance, name: str) -> dict[Edit, str]:
    """The edit of an instance card that names its subcircuit; one that keeps the name keeps others from changing it."""
    card = instance.origin.card
    spots = node_spots(card)[len(instance.pins) :]
    if not spots or spots[0].word != instance.subckt:
        raise NoCut(f"the subcircuit's name was not found in the card of `{card.fields[0].text}`")
    return {(id(card), spots[0].start, spots[0].end): name}
