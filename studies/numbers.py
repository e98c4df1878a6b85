"""Numbers of an answer that can be compared between process options on the same draws.

Each keeps what it would have been without every group of samples, so that the error of a difference can be measured.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from mc.groups import Groups
from mc.intervals import Estimate

FEWEST_SEEN = 20  # effective samples behind a share for its jackknife to be trusted
FEWEST_GROUPS = 10  # with fewer the jackknife's own error is too large: with two it can be anything


@dataclass(frozen=True, kw_only=True, eq=False)
class Number:
    """One number of an answer.

    name : quantity with its unit at the end
    width_um : drawn width it belongs to; None for a number of the whole answer
    better : +1 where more is better, -1 where less is, 0 where neither
    estimate : value and interval, in that unit
    without, sizes : value without each group of samples, and the groups' sizes, shape (groups,); None where the number
        does not come from samples that another option shares
    """

    name: str
    width_um: float | None
    better: int
    estimate: Estimate
    without: np.ndarray | None = None
    sizes: np.ndarray | None = None


def numbers_of(
    better: Mapping[str, int],
    widths_um: Sequence[float | None],
    estimates: Mapping[str, Sequence[Estimate]],
    read: Callable[..., np.ndarray],
    groups: Groups,
) -> tuple[Number, ...]:
    """Numbers of several quantities at several widths.

    better : see `Number`, by name; estimates : by name, one a width
    read : function of a summed tally that gives the values, shape (quantities, widths), in the units of `estimates`
    """
    several = len(groups.sizes) >= FEWEST_GROUPS
    without = np.array([read(tally) for tally in groups.without_each()]) if several else None
    return tuple(
        Number(
            name=name,
            width_um=width,
            better=better[name],
            estimate=estimates[name][column],
            without=without[:, row, column] if several else None,
            sizes=groups.group_sizes() if several else None,
        )
        for row, name in enumerate(better)
        for column, width in enumerate(widths_um)
    )
