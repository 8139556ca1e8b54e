"""Faults in the text of subcircuits that nothing instantiates: ngspice drops such text unread, so they are notes."""

from collections.abc import Sequence
from dataclasses import replace

from xcheck.circuit.elements import Circuit
from xcheck.deck.cards import Card
from xcheck.finding import Finding


def unused_as_notes(findings: Sequence[Finding], circuit: Circuit, subckt: str | None = None) -> tuple[Finding, ...]:
    """The findings of reading a deck, `syntax` errors within unused definitions as notes. subckt: the definition
    that is reviewed on its own."""
    if not any(f.rule == "syntax" and f.level == "error" for f in findings):
        return tuple(findings)
    used = {instance.subckt for instance in circuit.instances} | {(subckt or "").lower()}
    spans = unused_spans(circuit.deck.cards, used)
    return tuple(_judged(finding, spans) for finding in findings)


def _judged(finding: Finding, spans: Sequence[tuple[str, int, int, str]]) -> Finding:
    place = finding.place
    if finding.rule != "syntax" or finding.level != "error":
        return finding
    for file, first, last, name in spans:
        if file == place.file and first < place.line < last:
            return replace(finding, level="note", message=f"{finding.message} (in `{name}`, which nothing uses)")
    return finding


def unused_spans(cards: Sequence[Card], used: set[str]) -> list[tuple[str, int, int, str]]:
    """File, line of `.subckt`, line of `.ends` and name of each outermost definition whose name is not used and
    that holds none whose name is."""
    found: list[tuple[str, int, int, str]] = []
    opened: list[tuple[Card, str]] = []
    inside: set[str] = set()
    for card in cards:
        if card.kind in (".subckt", ".macro"):
            name = card.fields[1].key if len(card.fields) > 1 else ""
            inside = {name} if not opened else inside | {name}
            opened.append((card, name))
        elif card.kind in (".ends", ".eom") and opened:
            head, name = opened.pop()
            first, last = head.place(), card.place()
            if not opened and first.file == last.file and not inside & used:
                found.append((first.file, first.line, last.line, name))
    return found
