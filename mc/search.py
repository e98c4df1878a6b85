"""Where a curve known at a few places crosses a level."""

import numpy as np


def first_crossing(places, values, level):
    """Smallest place from which on a curve stays at or above a level, linear in between.

    places : increasing, shape (k,)
    values : the curve there, shape (k,)
    level : the level
    Returns the place; places[0] when the whole curve is above; NaN when its last value is below.
    """
    above = np.asarray(values) >= level
    if not above[-1]:
        return np.nan
    if above.all():
        return float(places[0])
    last_below = int(np.flatnonzero(~above)[-1])
    low, high = values[last_below], values[last_below + 1]
    share = (level - low) / (high - low)
    return float(places[last_below] + share * (places[last_below + 1] - places[last_below]))


def crossing_of_decreasing(curve, level, places, *, tolerance=1e-4, most=12):
    """Where a decreasing positive curve falls to a level, by a bracketed secant on logarithmic scales.

    curve : function of a place, its value; costly, so call it through a cache that knows `places` already
    level : the level, > 0
    places : increasing, positive, two or more
    Returns the place; places[0] when the curve is at or below the level already there; NaN when it is above at the last.
    A power law is found in one step. The bracket keeps the search safe where the curve is not one (Illinois rule: M.
    Dowell and P. Jarratt, BIT 11, 168 (1971), memory).
    """

    def excess(place):
        value = curve(place)
        return np.log(value / level) if value > 0 else -np.inf

    heights = [excess(place) for place in places]
    if not heights[-1] <= 0:
        return np.nan
    if heights[0] <= 0:
        return float(places[0])
    last_above = max(index for index, height in enumerate(heights) if not height <= 0)
    low, high = np.log(places[last_above]), np.log(places[last_above + 1])
    above, below = heights[last_above], heights[last_above + 1]
    middle = (low + high) / 2
    for _ in range(most):
        if np.isfinite(above) and np.isfinite(below):
            middle = low + (high - low) * above / (above - below)
        else:
            middle = (low + high) / 2
        height = excess(np.exp(middle))
        if abs(height) < tolerance:
            break
        if height <= 0:
            high, below, above = middle, height, above / 2
        else:
            low, above, below = middle, height, below / 2
    return float(np.exp(middle))
