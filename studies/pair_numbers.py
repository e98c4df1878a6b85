"""The numbers of a pair answer that can be compared between process options: those of its best length."""

from dataclasses import replace

import numpy as np

from mc.groups import Groups
from mc.intervals import Summary
from studies.numbers import FEWEST_SEEN, Number, numbers_of


def pair_numbers(search) -> tuple[Number, ...]:
    """Error and yield at the widths of the overview, the smallest width that meets the target, and its area.

    search : a finished search of one length, see `studies.pair_search.Search`
    """
    numbers = sum((_at_width(search, width) for width in search.overview()), ())
    scale = 2 * search.biasing.length_um
    widths = {"min_width_um": [search.width], "area_um2": [search.width.scaled(scale)]}
    if search.tail or not search.met:
        return numbers + tuple(
            Number(name=name, width_um=None, better=-1, estimate=estimate) for name, (estimate,) in widths.items()
        )
    grouped, row = search.grouped[search.width.value]
    power = _power(search)
    needed = _needed(search, grouped.total(), row)

    def read(part):
        # the limit that the target's chips need falls like a power of the width: moved to the limit, it gives the width
        width = search.width.value * (_needed(search, part, row) / needed) ** (1 / power)
        return np.array([[width], [scale * width]])

    return numbers + numbers_of(dict.fromkeys(widths, -1), [None], widths, read, grouped)


def _at_width(search, width: float) -> tuple[Number, ...]:
    grouped, row = search.grouped[width]
    tally: Groups = grouped.total()
    error, unit, unit_scale = search.question.error_words
    sigma = f"{error}_sigma_{unit}"

    def read(part):
        _, second, _, _ = part.every.central_moments()
        variance = second[2 * row] * part.every.count / (part.every.count - 1)
        return np.array([[unit_scale * np.sqrt(variance)], [part.chips_inside[row] / part.worst.count]])

    found = {
        sigma: [Summary(tally.every, 2 * row).sigma().scaled(unit_scale)],
        "chip_yield": [search.yields(width)[1]],
    }
    of_errors, of_yields = numbers_of({sigma: -1, "chip_yield": 1}, [width], found, read, grouped)
    inside, chips = int(tally.chips_inside[row]), tally.worst.count
    if width in search.tail or min(inside, chips - inside) < FEWEST_SEEN:
        of_yields = replace(of_yields, without=None)
    return of_errors, of_yields


def _needed(search, part, row: int) -> float:
    """Limit that the target's share of chips would keep [V] or [1]."""
    return part.worst.value_at_rank(row, search.question.target_yield * part.worst.count)


def _power(search) -> float:
    """Exponent with which the needed limit falls with the width, from the judged widths on either side of the answer."""
    widths = sorted(search.grouped)
    place = int(np.clip(widths.index(search.width.value), 1, len(widths) - 2))
    ends = widths[place - 1], widths[place + 1]
    needed = [_needed(search, search.grouped[width][0].total(), search.grouped[width][1]) for width in ends]
    return float(np.log(needed[1] / needed[0]) / np.log(ends[1] / ends[0]))
