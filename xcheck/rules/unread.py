"""What of a deck did not become part of the circuit, so that rules on missing connections keep silent about
it."""

from collections.abc import Iterator

from xcheck.circuit.elements import Circuit
from xcheck.deck.cards import Card, Deck
from xcheck.reviewed import Evidence

ELEMENT_LETTERS = frozenset("abcdefghijklmopqrstuvwxyz") - {"k"}
"""First letters of cards that connect nodes."""

BLIND = ("file-missing", "include-outside")
"""Findings after which cards of unknown number and content are missing."""


def is_complete(evidence: Evidence) -> bool:
    """Whether every file that the deck asks for could be read."""
    findings = (*evidence.deck.findings, *evidence.circuit.findings)
    return not any(f.rule in BLIND for f in findings)


def unread_words(evidence: Evidence) -> set[str]:
    """Words on element cards that the circuit lacks although they stand in a part of the deck that it uses;
    their node names are among them."""
    circuit = evidence.circuit
    used = {e.origin.card.segments[0] for e in circuit.elements}
    used |= {i.origin.card.segments[0] for i in circuit.instances}
    return {
        field.key
        for card in used_cards(evidence.deck, circuit)
        if card.kind in ELEMENT_LETTERS and card.segments[0] not in used
        for field in card.fields[1:]
    }


def used_cards(deck: Deck, circuit: Circuit) -> Iterator[Card]:
    """The cards at the top level and in the bodies of subcircuits that are instantiated."""
    named = {instance.subckt for instance in circuit.instances}
    inside: list[bool] = []
    for card in deck.cards:
        if card.kind == ".subckt":
            name = card.fields[1].key if len(card.fields) > 1 else ""
            inside.append(name in named)
        elif card.kind == ".ends":
            if inside:
                inside.pop()
        elif all(inside):
            yield card
