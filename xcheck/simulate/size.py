"""How large a deck becomes when ngspice expands it."""

import math
from collections.abc import Mapping

from xcheck.deck.cards import Card
from xcheck.simulate.written import Block

MOST_ELEMENTS = 200_000
"""Handed to ngspice; about 1 GB of memory there."""
DEEPEST_INSTANCE = 60


def expanded_size(top: Block) -> float:
    """The number of elements after expansion; infinite for subcircuits that contain themselves or nest too deep."""
    return _size(top, ({},), {}, 0)


def _size(block: Block, scopes: tuple[Mapping[str, Block], ...], known: dict[int, float], depth: int) -> float:
    if id(block) in known:
        return known[id(block)]
    if depth > DEEPEST_INSTANCE:
        return math.inf
    known[id(block)] = math.inf  # found again on the way down, it contains itself
    own: dict[str, Block] = {}
    for item in block.items:
        if isinstance(item, Block) and item.opening is not None and len(item.opening.fields) > 1:
            own.setdefault(item.opening.fields[1].key, item)
    inner = (own, *scopes)
    total = 0.0
    for item in block.items:
        if not isinstance(item, Card) or item.kind.startswith("."):
            continue
        called = next((s[n] for n in [_called(item)] for s in inner if n in s), None) if item.kind == "x" else None
        total += 1 if called is None else _size(called, inner, known, depth + 1)
    known[id(block)] = total
    return total


def _called(card: Card) -> str:
    """The name of the subcircuit that an instance card calls."""
    signs = [k for k, field in enumerate(card.fields) if field.text == "="]
    plain = card.fields[1 : signs[0] - 1] if signs else card.fields[1:]
    names = [f.key for f in plain if f.key not in ("params:", "params", "param:")]
    return names[-1] if names else ""
