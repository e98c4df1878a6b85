"""Shares of a change: the properties that define them, and the slow way over all orders."""

from itertools import permutations

import numpy as np
import pytest

from mc.shapley import shapley_shares

WEIGHTS = np.array([0.5, -1.0, 2.0, 0.25])


def product(chosen):
    return np.array([np.prod([1 + WEIGHTS[number] for number in chosen]), sum(chosen)])


def test_all_orders_the_slow_way():
    expected = np.zeros((4, 2))
    for order in permutations(range(4)):
        for place, mine in enumerate(order):
            expected[mine] += product(frozenset(order[: place + 1])) - product(frozenset(order[:place]))
    assert np.allclose(shapley_shares(product, 4), expected / 24, rtol=1e-12, atol=1e-12)


def test_shares_add_up():
    shares = shapley_shares(product, 4)
    assert np.allclose(sum(shares), product(frozenset(range(4))) - product(frozenset()), rtol=1e-12)


def test_what_has_no_effect_gets_nothing_and_equals_get_the_same():
    shares = shapley_shares(lambda chosen: float(len(chosen & {0, 2})) ** 2, 4)
    assert shares[1] == shares[3] == 0 and shares[0] == shares[2] == pytest.approx(2)


def test_one_ingredient_gets_all():
    assert shapley_shares(lambda chosen: 7.0 * len(chosen), 1)[0] == 7.0


def test_every_set_is_asked_once():
    asked = []
    shapley_shares(lambda chosen: asked.append(chosen) or 0.0, 5)
    assert len(asked) == len(set(asked)) == 32
