"""The cards of a deck sorted into scopes: subcircuit definitions, models, conditions."""

from dataclasses import dataclass, field

from xcheck.deck.cards import Card, Comment, Deck, Field
from xcheck.elaboration.problems import Problems
from xcheck.elaboration.shadows import Shadows
from xcheck.elaboration.words import words_of


@dataclass
class Branches:
    """`.if` to `.endif`: (condition card or None for `.else`, body) in order."""

    branches: list[tuple[Card | None, "Body"]] = field(default_factory=list)


@dataclass
class Body:
    """One scope or branch: cards and conditions in order, and definitions by lower-case name. outer: the body that
    its text stands in."""

    items: list["Card | Branches"] = field(default_factory=list)
    subckts: dict[str, "Definition"] = field(default_factory=dict)
    models: dict[str, Card] = field(default_factory=dict)
    outer: "Body | None" = None


@dataclass
class Definition:
    """A subcircuit: its name, pins, defaults by name, body, and the comments around its card."""

    name: str
    pins: tuple[str, ...]
    defaults: dict[str, Field]
    card: Card
    body: Body
    comments: tuple[Comment, ...] = ()


def sort_cards(deck: Deck, problems: Problems) -> Body:
    """The deck's cards as one body with nested definitions."""
    top = Body()
    stack: list[tuple[str, Card | None, Body]] = [("", None, top)]
    shadows = Shadows(problems)
    comments = _comments_around(deck)
    for index, card in enumerate(deck.cards):
        body = stack[-1][2]
        if card.kind in (".subckt", ".macro"):
            definition = _definition(card, comments.get(index, ()), problems)
            definition.body.outer = body
            body.subckts.setdefault(definition.name, definition)
            shadows.subckt(definition, body)
            stack.append((".ends", card, definition.body))
        elif card.kind in (".ends", ".eom"):
            _close(stack, ".ends", card, problems)
        elif card.kind in (".if", ".elseif", ".else"):
            _branch(stack, card, problems)
        elif card.kind == ".endif":
            _close(stack, ".endif", card, problems)
        else:
            if card.kind == ".model" and len(card.fields) > 1:
                body.models.setdefault(card.fields[1].key, card)
            shadows.card(card, body)
            body.items.append(card)
    for closing, opener, _ in stack[1:]:
        if opener is not None:
            problems.say("syntax", "error", opener, None, f"`{opener.kind}` without `{closing}`")
    shadows.tell()
    return top


def _branch(stack: list[tuple[str, Card | None, Body]], card: Card, problems: Problems) -> None:
    if card.kind == ".if":
        branches = Branches([(card, Body(outer=stack[-1][2]))])
        stack[-1][2].items.append(branches)
        stack.append((".endif", card, branches.branches[0][1]))
    elif len(stack) > 1 and stack[-1][0] == ".endif":
        branches = next(i for i in reversed(stack[-2][2].items) if isinstance(i, Branches))
        branches.branches.append((card if card.kind == ".elseif" else None, Body(outer=stack[-2][2])))
        stack[-1] = (".endif", card, branches.branches[-1][1])
    else:
        problems.say("syntax", "error", card, None, f"`{card.kind}` without `.if`")


def _close(stack: list[tuple[str, Card | None, Body]], closing: str, card: Card, problems: Problems) -> None:
    if len(stack) > 1 and stack[-1][0] == closing:
        stack.pop()
    else:
        problems.say("syntax", "error", card, None, f"`{card.kind}` closes nothing that is open here")


def _definition(card: Card, comments: tuple[Comment, ...], problems: Problems) -> Definition:
    words = words_of(card)
    plain = [w for w in words.plain if w.key not in ("params:", "params", "param:")]
    if not plain:
        problems.say("syntax", "error", card, None, "a `.subckt` card without a name")
    name = plain[0].key if plain else ""
    pins = tuple(w.key for w in plain[1:])
    return Definition(name, pins, dict(words.pairs), card, Body(), comments)


def _comments_around(deck: Deck) -> dict[int, tuple[Comment, ...]]:
    """For each `.subckt` card's index, the comment lines directly above and below it."""
    by_count: dict[int, list[Comment]] = {}
    for comment in deck.comments:
        by_count.setdefault(comment.cards_before, []).append(comment)
    return {
        index: (*by_count.get(index, ()), *by_count.get(index + 1, ()))
        for index, card in enumerate(deck.cards)
        if card.kind in (".subckt", ".macro")
    }
