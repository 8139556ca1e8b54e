"""Printing a deck: one line a card, includes written in place, so that reading it again gives the same cards."""

from xcheck.deck.cards import Deck


def write_deck(deck: Deck) -> str:
    """The deck as text: title, directives, cards in order, `.end`."""
    lines = [deck.title or "*"]
    waiting = sorted(deck.directives, key=lambda d: d.cards_before)
    for index, card in enumerate(deck.cards):
        while waiting and waiting[0].cards_before <= index:
            lines.append("* xcheck: " + " ".join(waiting.pop(0).words))
        lines.append(card.text)
    lines += ["* xcheck: " + " ".join(d.words) for d in waiting]
    return "\n".join([*lines, ".end", ""])
