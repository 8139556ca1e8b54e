"""A deck printed and read again is the same deck and the same circuit."""

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from xcheck.circuit.elements import Circuit, Element
from xcheck.deck.reader import read_deck, read_text
from xcheck.deck.writer import write_deck
from xcheck.elaboration import elaborate

ROOT = Path(__file__).parent.parent.parent
DECKS = sorted([*ROOT.glob("netlists/**/*.cir"), *ROOT.glob("tests/decks/*.cir")])


def content(element: Element) -> tuple[object, ...]:
    """All of an element but where it comes from."""
    names = [n for n in element.__dataclass_fields__ if n not in ("origin", "definition")]
    model = getattr(element, "definition", None)
    told = None if model is None else (model.name, model.type, model.values, model.text)
    return (type(element).__name__, told, *(getattr(element, n) for n in names))


def circuit(text: str) -> list[tuple[object, ...]]:
    made: Circuit = elaborate(read_text(text))
    return [content(e) for e in made.elements]


@pytest.mark.parametrize("path", DECKS, ids=lambda p: p.stem)
def test_every_deck_survives_printing(path: Path) -> None:
    deck = read_deck(path)
    printed = write_deck(deck)
    again = read_text(printed)
    assert [c.text for c in again.cards] == [c.text for c in deck.cards]
    assert [d.words for d in again.directives] == [d.words for d in deck.directives]
    assert [content(e) for e in elaborate(deck).elements] == circuit(printed)


NODE = st.sampled_from(["0", "a", "b", "n1", "out", "gnd", "net-_r1-pad1_"])
VALUE = st.sampled_from(["1k", "4k7", "{x*2}", "'y+1'", "1meg", "10n", "2.2"])
PASSIVE = st.tuples(st.sampled_from("rcl"), NODE, NODE, VALUE).map(lambda t: (t[0], " ".join(t[1:])))
SOURCE = st.tuples(st.sampled_from("vi"), NODE, NODE, st.sampled_from(["1", "dc 1 ac 1 45", "sin(0 1 1k) ac {x}"])).map(
    lambda t: (t[0], " ".join(t[1:]))
)
GAIN = st.tuples(NODE, NODE, NODE, NODE, VALUE).map(lambda t: ("e", " ".join(t)))
INSTANCE = st.tuples(NODE, NODE, st.sampled_from(["blk", "blk r=3k", "blk params: r={x}"])).map(
    lambda t: ("x", " ".join(t))
)


@settings(max_examples=80, deadline=None)
@given(st.lists(st.one_of(PASSIVE, SOURCE, GAIN, INSTANCE), max_size=12))
def test_any_deck_survives_printing(cards: list[tuple[str, str]]) -> None:
    lines = [f"{letter}{k} {rest}" for k, (letter, rest) in enumerate(cards)]
    head = ["title", ".param x=2 y={x*3}", ".subckt blk p q r=1k", "r1 p m {r}", "c1 m q 1n", ".ends"]
    text = "\n".join([*head, *lines, ".end", ""])
    assert circuit(write_deck(read_text(text))) == circuit(text)
