"""How a board is drawn must not matter: order of cards, ends of parts, names of nodes and elements."""

import random
import re

import pytest
from gauge import AC, OPAMP, SUPPLIES, partition_of
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from xcheck.stages.types import Partition

BLOCKS = (
    "r1{k} {i} n{k} 10k\nr2{k} n{k} {o} 22k\nxu{k} 0 n{k} vp vn {o} gaugeamp",
    "rs{k} {i} p{k} 1k\nxu{k} p{k} fb{k} vp vn {o} gaugeamp\nrf{k} {o} fb{k} 22k\nrg{k} fb{k} 0 1k",
    "xu{k} {i} {o} vp vn {o} gaugeamp",
    "r1{k} {i} a{k} 10k\nc1{k} a{k} {o} 10n\nr2{k} a{k} p{k} 10k\nc2{k} p{k} 0 5n\nxu{k} p{k} {o} vp vn {o} gaugeamp",
    "r1{k} {i} n{k} 10k\nr2{k} n{k} t{k} 50k\nr3{k} t{k} {o} 50k\nr4{k} t{k} 0 1k\nxu{k} 0 n{k} vp vn {o} gaugeamp",
    "r1{k} {i} m{k} 10k\nr2{k} m{k} {o} 100k\nxu{k} 0 m{k} vp vn q{k} gaugeamp\nc1{k} q{k} m{k} 100p\nr3{k} g{k} 0 1k\n"
    "r4{k} g{k} {o} 1k\nxw{k} q{k} g{k} vp vn {o} gaugeamp",
    "r1{k} {i} n{k} 10k\nr2{k} n{k} {o} 22k\ne{k} x{k} 0 0 n{k} 1e5\nro{k} x{k} {o} 60",
    "rs{k} {i} h{k} 100\nr1{k} h{k} n{k} 10k\nr2{k} n{k} {o} 22k\nxu{k} 0 n{k} vp vn {o} gaugeamp\nr3{k} h{k} w{k} 5k\n"
    "r4{k} w{k} z{k} 5k\nxw{k} 0 w{k} vp vn z{k} gaugeamp",
)  # fmt: skip
"""Stages from a node {i} to a node {o}, all names with the stage's number {k}."""

boards = st.lists(st.tuples(st.integers(0, len(BLOCKS) - 1), st.integers(0, 7)), min_size=1, max_size=6)


def cards_of(board: list[tuple[int, int]]) -> list[str]:
    """Stage k takes its input from an earlier node, so that trees and chains come up."""
    cards = ["vin in 0 ac 1"]
    for k, (block, before) in enumerate(board):
        source = "in" if k == 0 else f"o{before % k}"
        cards += BLOCKS[block].format(k=k, i=source, o=f"o{k}").splitlines()
    return cards


def seen(partition: Partition, node: dict[str, str], element: dict[str, str]) -> set[object]:
    """Stages as sets, in the names of the original drawing; ends of two-terminal parts not told apart."""
    back = {new: old for old, new in node.items()}
    name = {new: old for old, new in element.items()}

    def original(flat: str) -> str:
        head, dot, tail = flat.partition(".")
        return name.get(head, head) + dot + tail

    return {
        (
            frozenset(original(a.name) for a in s.amplifiers),
            frozenset(original(e) for e in s.elements),
            frozenset(
                (
                    back.get(p.node, p.node),
                    p.side,
                    p.kind,
                    p.current_driven,
                    frozenset(original(t.element) for t in p.inside),
                )
                for p in s.ports
            ),
        )
        for s in partition.stages
    }


def redrawn(cards: list[str], node: dict[str, str], element: dict[str, str], chance: random.Random) -> str:
    lines = []
    for card in cards:
        name, *fields = card.split()
        count = {"x": 5, "e": 4}.get(name[0], 2)
        nodes, rest = [node.get(n, n) for n in fields[:count]], fields[count:]
        if name[0] in "rc" and chance.random() < 0.5:
            nodes.reverse()
        lines.append(" ".join([element.get(name, name), *nodes, *rest]))
    chance.shuffle(lines)
    return "\n".join(lines)


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(boards, st.randoms(use_true_random=False))
def test_order_of_cards_and_names_do_not_matter(board: list[tuple[int, int]], chance: random.Random) -> None:
    cards = cards_of(board)
    plain = partition_of(OPAMP + SUPPLIES + "\n".join(cards) + "\n" + AC)
    nodes = sorted(
        {n for c in cards for n in c.split()[1:] if re.fullmatch(r"[a-z]+\d+|in", n) and n not in ("1k", "1e5")}
    )
    new_nodes = [f"k{i}" for i in range(len(nodes))]
    chance.shuffle(new_nodes)
    elements = sorted({c.split()[0] for c in cards})
    numbers = list(range(len(elements)))
    chance.shuffle(numbers)
    node = dict(zip(nodes, new_nodes, strict=True))
    # a name that begins with ro speaks for an output resistance, so it is kept
    element = {e: e if e.startswith("ro") else f"{e[0]}y{i}" for e, i in zip(elements, numbers, strict=True)}
    again = partition_of(OPAMP + SUPPLIES + redrawn(cards, node, element, chance) + "\n" + AC)
    assert seen(again, node, element) == seen(plain, {}, {})


@settings(max_examples=40, deadline=None)
@given(boards)
def test_every_amplifier_is_in_one_stage_and_every_terminal_on_one_side(board: list[tuple[int, int]]) -> None:
    found = partition_of(OPAMP + SUPPLIES + "\n".join(cards_of(board)) + "\n" + AC)
    in_stages = [a.name for s in found.stages for a in s.amplifiers]
    assert sorted(in_stages) == sorted(a.name for a in found.amplifiers)
    elements = [n for s in found.stages for n in s.elements]
    assert len(elements) == len(set(elements))
    for node in {p.node for s in found.stages for p in s.ports}:
        of_stages = [set(p.inside) for s in found.stages for p in s.ports if p.node == node]
        assert sum(map(len, of_stages)) == len(set().union(*of_stages))
    for one in found.stages:
        assert len({p.name for p in one.ports}) == len(one.ports)
        for p in one.ports:
            assert p.inside
            for t in p.inside:
                e = found.circuit.by_name[t.element]
                assert p.node in (e.nodes[t.index : t.index + 1] if t.index >= 0 else getattr(e, "sensing", ()))
        outputs = {p.node for p in one.ports if p.side == "output"}
        assert {a.output for a in one.amplifiers} == outputs


@pytest.mark.parametrize("block", range(len(BLOCKS)))
def test_each_block_alone_has_its_input_and_output(block: int) -> None:
    found = partition_of(OPAMP + SUPPLIES + "\n".join(cards_of([(block, 0)])) + "\n" + AC)
    sides = [p.side for s in found.stages for p in s.ports]
    assert "input" in sides
    assert "output" in sides
