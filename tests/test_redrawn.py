"""The drawing of a circuit must not matter: order of cards, names of nodes, ends of two-terminal parts."""

import random
import re
from pathlib import Path

import numpy as np
import pytest

from xcheck.options import Options
from xcheck.reviewed import Evidence
from xcheck.reviewing import review

DECKS = sorted((Path(__file__).parent / "decks").glob("*.cir"))
PASSIVE = re.compile(r"^(?P<name>[rc]\w*) (?P<a>\S+) (?P<b>\S+) (?P<rest>.*)$")


def blocks(lines: list[str]) -> list[list[str]]:
    """Top-level cards, with a subcircuit's body and its continuation lines kept together."""
    found: list[list[str]] = []
    depth = 0
    for line in lines:
        low = line.lower()
        joined = depth > 0 or line.startswith("+") or (line.startswith("*") and not low.startswith("* xcheck"))
        if joined and found:
            found[-1].append(line)
        else:
            found.append([line])
        depth += low.startswith(".subckt")
        depth -= low.startswith(".ends")
    return found


def redraw(text: str, seed: int) -> str:
    """Another drawing of the same circuit: cards in another order, two-terminal parts turned round."""
    chance = random.Random(seed)
    title, *lines = [line for line in text.splitlines() if line and not line.startswith("* expect")]
    lines = [line for line in lines if line.lower() != ".end"]
    groups = blocks(lines)
    for group in groups:
        match = PASSIVE.match(group[0])
        if match and len(group) == 1 and chance.random() < 0.5:
            group[0] = "{name} {b} {a} {rest}".format(**match.groupdict())
    chance.shuffle(groups)
    return "\n".join([title, *(line for group in groups for line in group), ".end", ""])


def by_port(evidence: Evidence) -> dict[str, tuple[str, str, str, np.ndarray]]:
    found = {}
    for answer in evidence.answers:
        assert answer.return_ratio is not None, answer.unchecked_because
        port = answer.port
        found[port.subject] = (answer.topology, port.side, port.kind, answer.return_ratio.impedance)
    return found


def evidence_of(path: Path) -> Evidence:
    evidence = review([path], options=Options(engine="none")).decks[0].evidence
    assert evidence is not None
    return evidence


@pytest.mark.parametrize("path", DECKS, ids=lambda p: p.stem)
def test_order_of_cards_and_ends_of_parts_do_not_matter(path: Path, tmp_path: Path) -> None:
    plain = by_port(evidence_of(path))
    for seed in range(3):
        text = redraw(path.read_text(), seed)
        other = tmp_path / f"redrawn{seed}.cir"
        other.write_text(text)
        again = by_port(evidence_of(other))
        # a stage of several amplifiers is named in deck order, so names are compared as sets of amplifiers
        assert {frozenset(re.split(r"[+.]", s)) for s in again} == {frozenset(re.split(r"[+.]", s)) for s in plain}
        for subject, (topology, side, kind, ohm) in again.items():
            if subject in plain:
                assert (topology, side, kind) == plain[subject][:3], subject
                assert np.allclose(ohm, plain[subject][3], rtol=1e-7)


def renamed(text: str, names: set[str]) -> str:
    """The deck with nodes of the top level renamed, wherever they stand as a word behind a card's first one."""
    lines = []
    inside = False
    for line in text.splitlines():
        low = line.lower()
        inside = (inside or low.startswith(".subckt")) and not low.startswith(".ends")
        if inside or line.startswith(("*", ".")) or low.startswith(".ends") or not lines:
            lines.append(line)
            continue
        first, *rest = re.split(r"(\s+)", line)
        words = [f"zz_{w.lower()}" if w.lower() in names else w for w in rest]
        keep = f"zz_{first[1:].lower()}" if first.startswith("+") and first[1:].lower() in names else first
        lines.append("".join([keep, *words]))
    return "\n".join([*lines, ""])


@pytest.mark.parametrize("path", DECKS, ids=lambda p: p.stem)
def test_names_of_nodes_do_not_matter(path: Path, tmp_path: Path) -> None:
    before = evidence_of(path)
    names = {n for n in before.circuit.nodes if re.fullmatch(r"[a-z]\w*", n)}
    other = tmp_path / "renamed.cir"
    other.write_text(renamed(path.read_text(), names))
    plain, again = by_port(before), by_port(evidence_of(other))
    fresh = {subject.replace(".zz_", "."): found for subject, found in again.items()}
    assert set(fresh) == set(plain)
    for subject, (topology, side, kind, ohm) in fresh.items():
        assert (topology, side, kind) == plain[subject][:3], subject
        assert np.allclose(ohm, plain[subject][3], rtol=1e-7)
