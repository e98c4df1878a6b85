"""The numbers of a timing answer that can be compared between process options."""

from dataclasses import replace

import numpy as np
from scipy.special import ndtr, ndtri

from mc.groups import Groups
from mc.intervals import Estimate, Summary
from mc.search import first_crossing
from studies.numbers import FEWEST_SEEN, Number, numbers_of
from studies.units import SUFFIXES

BETTER = {"yield": 1, "slowest_mean_ps": -1, "slowest_sigma_ps": -1, "period_at_target_ps": -1}


def probit_crossing(places, target: float, yields) -> float:
    """Place from which on a curve of yields stays at a target, interpolated on the probit scale; infinite if it never does."""
    clipped = np.clip(yields, ndtr(-37.0), ndtr(8.0))
    found = first_crossing(places, ndtri(clipped), ndtri(target))
    return np.inf if np.isnan(found) else found


def timing_numbers(question, chips, grouped: Groups, yields, periods, min_width: Estimate, tails) -> tuple[Number, ...]:
    """Numbers of every width, and the smallest width that meets the target.

    chips : see `studies.timing.Chips`; grouped : its tallies; yields, periods : the answer's estimates, one a width
    tails : one a width where these come from rare events, else empty; such numbers share no samples
    """
    tally, places = grouped.total(), chips.periods[:, 1:] / SUFFIXES["ps"]
    slowest = [Summary(tally.slowest, row) for row in range(len(yields))]
    found = {
        "yield": yields,
        "slowest_mean_ps": [each.mean().scaled(1 / SUFFIXES["ps"]) for each in slowest],
        "slowest_sigma_ps": [each.sigma().scaled(1 / SUFFIXES["ps"]) for each in slowest],
        "period_at_target_ps": periods,
    }

    def passed(part):
        return 1 - part.failures / part.slowest.count

    def read(part):
        mean, second, _, _ = part.slowest.central_moments()
        sigma = np.sqrt(second * part.slowest.count / (part.slowest.count - 1))
        curves = passed(part)
        crossings = [probit_crossing(row, target, curve[1:]) for row, curve in zip(places, curves)]
        return np.array([curves[:, 0], mean / SUFFIXES["ps"], sigma / SUFFIXES["ps"], crossings])

    def narrowest(part):
        return np.array([[probit_crossing(question.width_um, target, passed(part)[:, 0])]])

    target = question.target_yield
    numbers = numbers_of(BETTER, question.width_um, found, read, grouped)
    numbers += numbers_of({"min_width_um": -1}, [None], {"min_width_um": [min_width]}, narrowest, grouped)
    seen = dict(zip(question.width_um, _seen(tally)))
    return tuple(each if _trusted(each, seen, bool(tails)) else replace(each, without=None) for each in numbers)


def _trusted(number: Number, seen: dict[float | None, float], tails: bool) -> bool:
    """Whether leaving out groups tells a number's error: not where few dies carry it, nor where it is of rare events."""
    if tails and number.name in ("yield", "period_at_target_ps", "min_width_um"):
        return False
    return number.name != "yield" or seen[number.width_um] >= FEWEST_SEEN


def _seen(tally) -> np.ndarray:
    """Effective number of dies behind each width's loss or yield, whichever has fewer."""
    count, lost, squares = tally.slowest.count, tally.failures[:, 0], tally.squares[:, 0]
    kept, kept_squares = count - lost, count - 2 * lost + squares
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.nan_to_num(np.minimum(lost**2 / squares, kept**2 / kept_squares))
