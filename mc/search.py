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
