"""A passive network reduced to the branches between its terminals.

Parallel parts and internal nodes with two branches are joined into readable trees; what remains inside (the star
of a T-network, a filter with a shunt) is eliminated over frequency by the star-mesh transformation: a node with
admittances y1 .. yn becomes a mesh of yi yj / (y1 + ... + yn) (Rosen, A new network theorem, J. IEE 62, 1924; from
memory).
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.topologies.branches import Branch, Part, in_parallel, in_series

Pair = frozenset[str]
GROUND = "0"


@dataclass(frozen=True)
class Joined:
    """What lies between two terminals: admittance (siemens, shape (F,)), readable text, and the parts it is made
    of. star: whether a star-mesh transformation was needed."""

    admittance: Complex
    text: str
    parts: tuple[Part, ...]
    star: bool = False


@dataclass
class Network:
    """Branches by pair of nodes."""

    branches: dict[Pair, Branch] = field(default_factory=dict)

    def add(self, part: Part, a: str, b: str) -> None:
        """A part between two nodes; one with both ends on a node carries nothing."""
        if a == b:
            return
        pair = frozenset((a, b))
        known = self.branches.get(pair)
        self.branches[pair] = part if known is None else in_parallel(known, part)

    def reduced(self, terminals: Sequence[str]) -> dict[Pair, Branch]:
        """Branches with internal nodes of two branches joined in series and loose ends dropped."""
        branches = dict(self.branches)
        at: dict[str, set[Pair]] = {}
        for pair in branches:
            for node in pair:
                at.setdefault(node, set()).add(pair)
        waiting = [n for n in at if n not in terminals]
        while waiting:
            node = waiting.pop()
            pairs = at.get(node, set())
            if node in terminals or len(pairs) > 2:
                continue
            ends = [next(iter(p - {node})) for p in sorted(pairs, key=sorted)]
            joined = [branches.pop(p) for p in sorted(pairs, key=sorted)]
            for pair in list(pairs):
                for other in pair:
                    at[other].discard(pair)
            if len(joined) == 2:
                self._put(branches, at, frozenset(ends), in_series(*joined))
            waiting += [e for e in ends if e not in terminals]
        return branches

    @staticmethod
    def _put(branches: dict[Pair, Branch], at: dict[str, set[Pair]], pair: Pair, branch: Branch) -> None:
        if len(pair) < 2:
            return
        known = branches.get(pair)
        branches[pair] = branch if known is None else in_parallel(known, branch)
        for node in pair:
            at.setdefault(node, set()).add(pair)


def mesh(
    branches: Mapping[Pair, Branch], terminals: Sequence[str], frequency: Real, shunts: Mapping[str, Complex]
) -> dict[Pair, Joined]:
    """What lies between each two terminals. shunts: admittances from nodes to ground that stand for the
    surroundings (siemens, shape (F,))."""
    links: dict[Pair, Joined] = {
        pair: Joined(branch.admittance(frequency), branch.text, branch.parts) for pair, branch in branches.items()
    }
    for node, admittance in shunts.items():
        if not np.any(admittance):
            continue  # an open source
        _merge(links, frozenset((node, GROUND)), Joined(admittance, "", ()))
    at: dict[str, set[str]] = {}
    for pair in links:
        a, b = pair
        at.setdefault(a, set()).add(b)
        at.setdefault(b, set()).add(a)
    inside = sorted((n for n in at if n not in terminals), key=lambda n: (len(at[n]), n))
    while inside:
        node = min(inside, key=lambda n: (len(at[n]), n))
        inside.remove(node)
        _eliminate(node, links, at)
    return links


def _eliminate(node: str, links: dict[Pair, Joined], at: dict[str, set[str]]) -> None:
    ends = sorted(at.pop(node))
    arms = [links.pop(frozenset((node, end))) for end in ends]
    for end in ends:
        at[end].discard(node)
    total: Complex = sum((arm.admittance for arm in arms), np.zeros_like(arms[0].admittance))
    parts = tuple(sorted(dict.fromkeys(p for arm in arms for p in arm.parts), key=lambda part: part.name))
    star = len(arms) > 2
    for i, one in enumerate(ends):
        for k in range(i + 1, len(ends)):
            joined = Joined(
                arms[i].admittance * arms[k].admittance / total,
                f"T({', '.join(p.name for p in parts)})" if star else f"{arms[i].text} + {arms[k].text}".strip(" +"),
                parts,
                star,
            )
            _merge(links, frozenset((one, ends[k])), joined)
            at[one].add(ends[k])
            at[ends[k]].add(one)


def _merge(links: dict[Pair, Joined], pair: Pair, joined: Joined) -> None:
    known = links.get(pair)
    if known is None:
        links[pair] = joined
        return
    texts = [t for t in (known.text, joined.text) if t]
    links[pair] = Joined(
        known.admittance + joined.admittance,
        " || ".join(f"({t})" if " + " in t and len(texts) > 1 else t for t in texts),
        tuple(dict.fromkeys((*known.parts, *joined.parts))),
        known.star or joined.star,
    )
