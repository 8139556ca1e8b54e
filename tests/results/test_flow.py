"""A review with results that are already there."""

from pathlib import Path

import pytest

from tests.results.test_formed import INVERTING, formed_of
from xcheck.errors import CallError
from xcheck.options import Options
from xcheck.reviewing import review


@pytest.mark.engine
def test_values_come_from_the_file(tmp_path: Path) -> None:
    formed_of(tmp_path, "v1 in 0 ac 1", INVERTING)
    options = Options(results=tmp_path / "r.raw")
    answer = review(tmp_path / "d.cir", options=options).decks[0].port("xu1", "in")
    assert answer.verdict == "agrees"
    assert len(answer.frequency) == 31
    (tmp_path / "d.cir").write_text((tmp_path / "d.cir").read_text().replace("4.7k", "5.6k"))
    other = review(tmp_path / "d.cir", options=options).decks[0]
    assert other.port("xu1", "in").verdict == "disagrees"
    assert "not formed" in other.port("xu1", "out").unchecked_because
    with pytest.raises(CallError, match="one deck"):
        review([tmp_path / "d.cir", tmp_path / "e.cir"], options=options)
