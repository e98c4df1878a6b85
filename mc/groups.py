"""Tallies kept apart in groups of blocks, so that the error of any function of them can be measured.

The delete-a-group jackknife needs no formula for the function: it is computed once on everything and once without each
group. Two runs on the same draws, grouped alike, then give the error of any difference between them.
"""

from dataclasses import dataclass
from itertools import accumulate
from typing import Any

import numpy as np
from scipy import stats

from mc.plan import Block

GROUPS = 32  # enough for Student's factor to be near the normal one, few enough to keep their tallies


@dataclass(frozen=True, eq=False)
class Groups:
    """Tallies of disjoint groups of samples.

    tallies : by group number; anything with `+`
    sizes : samples in each group, by group number
    """

    tallies: dict[int, Any]
    sizes: dict[int, int]

    def __add__(self, other: "Groups") -> "Groups":
        tallies, sizes = dict(self.tallies), dict(self.sizes)
        for number, tally in other.tallies.items():
            tallies[number] = tallies[number] + tally if number in tallies else tally
            sizes[number] = sizes.get(number, 0) + other.sizes[number]
        return Groups(tallies, sizes)

    def total(self):
        """Sum of all groups, in the order of their numbers."""
        return list(accumulate(self._ordered()))[-1]

    def without_each(self) -> list:
        """Sum of all groups but one, for every group in the order of their numbers; two groups or more are needed."""
        ordered = self._ordered()
        if len(ordered) < 2:
            raise ValueError("one group alone tells nothing of an error: two or more are needed")
        before = list(accumulate(ordered))
        after = list(accumulate(ordered[::-1], lambda later, tally: tally + later))[::-1]
        inner = [before[place - 1] + after[place + 1] for place in range(1, len(ordered) - 1)]
        return [after[1], *inner, before[-2]]

    def group_sizes(self) -> np.ndarray:
        """Samples of every group, in the order of their numbers."""
        return np.array([self.sizes[number] for number in sorted(self.sizes)])

    def parts(self) -> dict[int, tuple[Any, int]]:
        """Tally and samples of every group, by its number."""
        return {number: (tally, self.sizes[number]) for number, tally in self.tallies.items()}

    @classmethod
    def of_parts(cls, parts: dict[int, tuple[Any, int]]) -> "Groups":
        """The groups that `parts` took apart."""
        return cls(
            {number: part[0] for number, part in parts.items()}, {number: part[1] for number, part in parts.items()}
        )

    def _ordered(self):
        return [self.tallies[number] for number in sorted(self.tallies)]


@dataclass(frozen=True, kw_only=True)
class Grouped:
    """A task whose tallies are kept in groups; block b belongs to group b modulo GROUPS.

    task : function of a Block that returns a tally
    """

    task: Any

    def __call__(self, block: Block) -> Groups:
        """The block's tally, as one group of `Groups`."""
        number = block.number % GROUPS
        return Groups({number: self.task(block)}, {number: block.size})


def jackknife_error(whole, without, sizes) -> np.ndarray:
    """Standard error of a smooth function of a sample, by leaving out one group at a time.

    whole : the function of everything, any shape
    without : the function without each group, shape (groups, ...), two groups or more
    sizes : samples of each group, shape (groups,); they need not be equal
    Returns error, the shape of `whole`; not finite where any value is not.
    Source: F. M. T. A. Busing, E. Meijer, R. van der Leeden, Statistics and Computing 9, 3 (1999), delete-m(j) jackknife.
    """
    whole, without = np.asarray(whole, float), np.asarray(without, float)
    shape = (-1,) + (1,) * whole.ndim
    ratios = (np.sum(sizes) / np.asarray(sizes, float)).reshape(shape)
    with np.errstate(invalid="ignore"):
        pseudo = ratios * whole - (ratios - 1) * without
        middle = len(without) * whole - ((1 - 1 / ratios) * without).sum(axis=0)
        return np.sqrt(((pseudo - middle) ** 2 / (ratios - 1)).mean(axis=0))


def jackknife_half_width(whole, without, sizes, level=0.95) -> np.ndarray:
    """Half-width of the interval of a smooth function of a sample, Student's factor on `jackknife_error`.

    Arguments as in `jackknife_error`. level : confidence level [1]
    Returns half-width, the shape of `whole`.
    """
    factor = stats.t.ppf((1 + level) / 2, len(without) - 1)
    return factor * jackknife_error(whole, without, sizes)
