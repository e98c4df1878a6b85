"""Shares of a change among the ingredients that make it."""

from collections.abc import Callable
from itertools import combinations
from math import comb

import numpy as np


def shapley_shares(value: Callable[[frozenset[int]], np.ndarray], ingredients: int) -> list:
    """Each ingredient's share: its effect averaged over all orders in which the ingredients could be swapped in.

    value : function of a set of ingredients (numbers from 0), any array; called once for each of the 2^ingredients sets
    ingredients : how many, 1 or more
    Returns one array an ingredient. They add up to value(all) - value(none); an ingredient without effect gets zero.
    Source: L. S. Shapley, A value for n-person games, Contributions to the Theory of Games II, 307 (1953).
    """
    everything = range(ingredients)
    sets = [frozenset(chosen) for size in range(ingredients + 1) for chosen in combinations(everything, size)]
    known = {chosen: np.asarray(value(chosen), float) for chosen in sets}
    shares = []
    for mine in everything:
        others = [chosen for chosen in sets if mine not in chosen]
        weights = [1 / (ingredients * comb(ingredients - 1, len(chosen))) for chosen in others]
        gains = [known[chosen | {mine}] - known[chosen] for chosen in others]
        shares.append(sum(weight * gain for weight, gain in zip(weights, gains)))
    return shares
