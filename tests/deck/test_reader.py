"""Decks to cards: what belongs together, where it stands, and that nothing raises or gets lost."""

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from xcheck.deck.reader import read_deck, read_text
from xcheck.elaboration import elaborate
from xcheck.elaboration.flat import flat_deck
from xcheck.errors import DeckUnreadable


def rules(text: str) -> list[tuple[str, int, int]]:
    return [(f.rule, f.place.line, f.place.column) for f in read_text(text).findings]


def test_title_continuations_and_comments() -> None:
    deck = read_text("R1 looks like a card\nR1 a b ; end\n* between\n\n+ 10k $ more\nC1 a 0 1n // last\n.end\n")
    assert deck.title == "R1 looks like a card"
    assert [c.text for c in deck.cards] == ["R1 a b 10k", "C1 a 0 1n"]
    value = deck.cards[0].fields[3]
    place = deck.cards[0].place(value)
    assert (place.line, place.column, place.end_column) == (5, 3, 6)


@settings(max_examples=60, deadline=None)
@given(
    st.lists(
        st.lists(st.from_regex(r"[a-z][a-z0-9_]{0,6}", fullmatch=True), min_size=1, max_size=6), min_size=1, max_size=8
    ),
    st.randoms(use_true_random=False),
)
def test_every_field_stands_where_its_place_says(cards: list[list[str]], chance: object) -> None:
    lines = ["title"]
    for words in cards:
        line = ""
        for word in words:
            if line and chance.random() < 0.3:  # type: ignore[attr-defined]
                lines.append(line)
                line = "+"
            line += " " * chance.randint(1, 3) + word if line else word  # type: ignore[attr-defined]
        lines.append(line)
    deck = read_text("\n".join(lines) + "\n")
    assert [[f.text for f in c.fields] for c in deck.cards] == cards
    for card in deck.cards:
        for field in card.fields:
            place = card.place(field)
            assert lines[place.line - 1][place.column - 1 : place.end_column - 1] == field.text


@settings(max_examples=150, deadline=None)
@given(st.one_of(st.text(max_size=400), st.binary(max_size=400)))
def test_any_text_gives_findings_and_no_exception(text: str | bytes) -> None:
    deck = read_text(text)
    assert deck.path == "deck.cir"


ODD = st.text(alphabet="ab1 \t.,;=(){}'\"[]+-*/^?$#~|%&<>!:_\\µΩμé\u00a0", max_size=24)
LETTER = st.sampled_from(
    [*"abcdefghijklmnopqrstuvwxyz+*$;", ".", ".model ", ".subckt ", ".param ", ".func ", ".lib ", ".inc "]
)
KNOWN = st.sampled_from(
    ["r1 a b ", "e1 a 0 value={", "e1 a 0 poly(2) ", "e1 a 0 table {v(a)} ", "b1 a 0 v=", "x1 a b s ", "v1 a 0 sin(",
     "a1 [a b] %vd(a ", ".model d d(", ".subckt s a b ", ".param f(x)=", "k1 l1 l2 ", "q1 a b c ", "r1 a b r='",
     "w1 a b v1 "]
)  # fmt: skip
LINE = st.one_of(
    st.tuples(LETTER, ODD).map("".join), st.tuples(KNOWN, ODD).map("".join), st.sampled_from([".ends", ".end"])
)


@settings(max_examples=300, deadline=None)
@given(st.lists(LINE, max_size=8))
def test_odd_cards_give_findings_and_no_exception(lines: list[str]) -> None:
    deck = read_text("\n".join(["title", *lines]))
    circuit = elaborate(deck)
    flat = flat_deck(circuit)
    assert set(circuit.nodes) <= set(flat.nodes)
    assert flat.text.isascii()
    findings = (*deck.findings, *circuit.findings)
    assert all(f.place.line <= len(lines) + 1 and f.message for f in findings)


def test_faults_are_collected_in_order() -> None:
    found = rules("t\nr1 a 0 {1\n#x\n.include nowhere.inc\n.end\nr2 a 0 1k\n")
    assert [(rule, line) for rule, line, _ in found] == [
        ("syntax", 2), ("syntax", 3), ("file-missing", 4), ("text-after-end", 6),
    ]  # fmt: skip


def test_commands_are_told_and_not_kept() -> None:
    deck = read_text("t\nr1 a 0 1k\n.control\nrun\n.endc\n*#quit\n.end\n")
    assert [f.rule for f in deck.findings] == ["command-ignored", "command-ignored"]
    assert len(deck.cards) == 1


def test_includes_and_sections(tmp_path: Path) -> None:
    (tmp_path / "parts").mkdir()
    (tmp_path / "parts" / "a.lib").write_text(
        ".lib one\nr1 a 0 1k\n.endl\n.lib two\nr2 a 0 {x}\n.include b.inc\n.endl\n"
    )
    (tmp_path / "parts" / "b.inc").write_text("r3 a 0 3k")
    (tmp_path / "deck.cir").write_text('t\n.lib "parts\\a.lib" two\nr4 a 0 1k\n.lib parts/a.lib three\n')
    deck = read_deck(tmp_path / "deck.cir")
    assert [c.name for c in deck.cards] == ["r2", "r3", "r4"]
    assert deck.cards[0].place().file.endswith("a.lib")
    assert deck.cards[0].place().line == 5
    assert [(f.rule, f.place.line) for f in deck.findings] == [("file-missing", 4)]
    assert "one, two" in deck.findings[0].advice


@pytest.mark.parametrize(
    ("data", "names"),
    [(b"\xef\xbb\xbft\r\nr1 a 0 1k\r\n", ["r1"]), ("t\nr1 a 0 1\u00b5\n".encode("latin-1"), ["r1"]),
     (b"t\nr1 a 0 1k\n\x1a", ["r1"]), (b"t\n\tr1\ta\t0\t1k", ["r1"]), ("t\nr1 a 0 1k\n".encode("utf-16"), ["r1"])],
)  # fmt: skip
def test_encodings_and_line_ends(data: bytes, names: list[str]) -> None:
    assert [c.name for c in read_text(data).cards] == names


def test_a_missing_deck_is_refused(tmp_path: Path) -> None:
    with pytest.raises(DeckUnreadable, match="No such file"):
        read_deck(tmp_path / "none.cir")
