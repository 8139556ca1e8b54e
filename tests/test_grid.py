import numpy as np
import pytest

from xcheck.circuit.elements import Analysis
from xcheck.deck.cards import Card, Field, Segment
from xcheck.grid import DEFAULT_RANGE, comparison_grid, sweep_range

CARD = Card(".ac dec 5 20 20k", ".ac", (Field(".ac", 0, 3),), (Segment(0, "d.cir", 1, 1),))


def ac(*arguments: str | float) -> Analysis:
    return Analysis("ac", arguments, CARD)


def test_the_decks_own_range_counts() -> None:
    assert sweep_range([ac("dec", 5.0, 20.0, 20e3), Analysis("tran", (1.0, 2.0, 3.0), CARD)]) == (20.0, 20e3)
    assert sweep_range([ac("dec", 5.0, 20.0, 20e3), ac("lin", 5.0, 1.0, 100.0)]) == (1.0, 20e3)


@pytest.mark.parametrize(
    "analyses",
    [
        [],
        [ac("dec", 5.0, 0.0, 1e3)],
        [ac("dec", 5.0, 1e3, 10.0)],
        [ac("dec", 5.0)],
        [ac("dec", "n", "a", "b")],
    ],
)
def test_a_card_without_a_usable_range_leaves_the_default(analyses: list[Analysis]) -> None:
    assert sweep_range(analyses) == DEFAULT_RANGE


def test_ten_points_a_decade_with_both_ends() -> None:
    grid = comparison_grid([ac("dec", 3.0, 20.0, 20e3)])
    assert len(grid) == 31
    assert grid[0] == 20.0
    assert grid[-1] == pytest.approx(20e3, rel=1e-12)
    assert np.allclose(np.diff(np.log10(grid)), 0.1)


def test_spots_join_the_grid_once() -> None:
    grid = comparison_grid([ac("dec", 3.0, 1.0, 100.0)], spots=(10.0, 33.0, 1e4))
    assert len(grid) == 21 + 2
    assert list(grid) == sorted(grid)
    assert 33.0 in grid


def test_a_single_point_and_an_absurd_range() -> None:
    assert list(comparison_grid([ac("lin", 1.0, 50.0, 50.0)])) == [50.0]
    assert len(comparison_grid([ac("dec", 10.0, 1e-200, 1e200)])) == 241
