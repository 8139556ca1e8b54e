import pytest

from xcheck.deck.cards import Directive
from xcheck.directives import band_of
from xcheck.place import Place

PLACE = Place("d.cir", 4, 1, 20)


def directive(*words: str) -> Directive:
    return Directive(words, PLACE, 0)


def test_a_band_is_read_with_scale_suffixes_and_the_last_one_counts() -> None:
    band, findings = band_of((directive("band", "20", "20k"), directive("Band", "0.1", "1meg")))
    assert band == (0.1, 1e6)
    assert findings == ()


@pytest.mark.parametrize("words", [("band",), ("band", "1k"), ("band", "20k", "20"), ("band", "a", "b")])
def test_a_band_that_is_none_is_said_at_its_place(words: tuple[str, ...]) -> None:
    band, findings = band_of((directive(*words),))
    assert band is None
    assert [(f.rule, f.level, f.place) for f in findings] == [("syntax", "error", PLACE)]
    assert "* xcheck: band" in findings[0].advice


def test_an_unknown_word_gets_the_nearest_known_one() -> None:
    _, findings = band_of((directive("bandd", "1", "2"), directive("port", "x"), directive()))
    assert [f.rule for f in findings] == ["syntax", "syntax"]
    assert "`band`" in findings[0].advice
