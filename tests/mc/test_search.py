"""The place from which on a curve stays at or above a level."""

import numpy as np
import pytest

from mc.search import first_crossing

PLACES = [1.0, 2.0, 4.0, 8.0]


@pytest.mark.parametrize(
    "values, level, place",
    [
        ([0.0, 1.0, 2.0, 3.0], 0.5, 1.5),  # between two places
        ([0.0, 1.0, 2.0, 3.0], 2.5, 6.0),  # in the last gap
        ([0.0, 1.0, 2.0, 3.0], 1.0, 2.0),  # at a place: reaching counts
        ([0.0, 1.0, 2.0, 3.0], 3.0, 8.0),  # at the last place
        ([5.0, 6.0, 7.0, 8.0], 4.0, 1.0),  # above everywhere
        ([4.0, 6.0, 7.0, 8.0], 4.0, 1.0),  # at the level from the first place on
        ([0.0, 2.0, 0.0, 2.0], 1.0, 6.0),  # up, down and up again: it stays above only after the last
        ([2.0, 0.0, 2.0, 2.0], 1.0, 3.0),  # starts above, dips
        ([1.0, 1.0, 0.5, 1.0], 1.0, 8.0),
    ],
)
def test_crossing(values, level, place):
    assert first_crossing(PLACES, values, level) == pytest.approx(place, rel=1e-12)
    assert first_crossing(np.array(PLACES), np.array(values), level) == pytest.approx(place, rel=1e-12)


@pytest.mark.parametrize("values", [[0.0, 1.0, 2.0, 3.0], [9.0, 9.0, 9.0, 3.0], [9.0, 9.0, 9.0, np.nan]])
def test_a_curve_that_ends_below_has_no_crossing(values):
    assert np.isnan(first_crossing(PLACES, values, 4.0))


def test_one_place():
    assert first_crossing([2.0], [5.0], 4.0) == 2.0
    assert np.isnan(first_crossing([2.0], [3.0], 4.0))


def test_a_falling_curve_by_its_mirror():
    # "stays at or below": both signs turned
    falling = np.array([3.0, 2.0, 1.0, 0.0])
    assert first_crossing(PLACES, -falling, -1.5) == pytest.approx(3.0, rel=1e-12)


def test_a_straight_curve_is_solved_exactly():
    places = np.geomspace(0.1, 10, 7)
    assert first_crossing(places, 2 * places - 3, 1.0) == pytest.approx(2.0, rel=1e-12)
