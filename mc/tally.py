"""Mergeable tallies of many outputs: powers about a pilot's center, a histogram, the extremes. Adding two merges them.

The center and scale of each output come from a short pilot, so the power sums are those of numbers of order one and
lose no digits (T. F. Chan, G. H. Golub, R. J. LeVeque, Am. Stat. 37, 242 (1983): shifted data). The histogram has 128
cells a pilot sigma out to 16 sigmas; a quantile read from it is off by less than one cell, 1/128 of sigma.
"""

from dataclasses import dataclass
from functools import partial

import numpy as np

from mc.codec import storable

CELLS_PER_SIGMA = 128
REACH = 16  # sigmas on either side
CELLS = 2 * REACH * CELLS_PER_SIGMA


@storable
@dataclass(frozen=True, kw_only=True, eq=False)
class Grid:
    """Where each output's tally is centered and how it is scaled.

    center, scale : in the outputs' own units, shape (outputs,); scale > 0
    """

    center: np.ndarray
    scale: np.ndarray

    @classmethod
    def from_pilot(cls, values) -> "Grid":
        """Grid from a pilot's outputs, shape (outputs, n).

        Equal values are their own center, to the last digit. Their scale is a billionth of it, or 1 about 0: later values
        may differ from what the pilot saw, and their fourth power must neither overflow nor vanish.
        """
        first = values[:, :1]
        moved = values - first
        center = first[:, 0] + moved.mean(axis=1)
        spread, least = moved.std(axis=1), 1e-9 * np.abs(center)
        return cls(center=center, scale=np.where(spread > least, spread, np.where(least > 0, least, 1.0)))


@storable
@dataclass(frozen=True, kw_only=True, eq=False)
class Moments:
    """Power sums over samples of every output.

    grid : see `Grid`; two tallies must share it to be added
    count : number of samples
    powers : sums of the scaled values' powers 1 to 4, shape (outputs, 4)
    """

    grid: Grid
    count: int
    powers: np.ndarray

    @classmethod
    def of(cls, grid: Grid, slices):
        """Tally of an iterable of values, each slice of shape (outputs, n).

        Raises FloatingPointError when a value is not finite: a sum with a hole in it is never handed on.
        """
        tally = cls._empty(grid)
        for values in slices:
            tally["count"] += values.shape[1]
            for row, sample in enumerate(values):
                scaled = sample - grid.center[row]
                scaled *= 1 / grid.scale[row]
                total = scaled.sum()
                if not np.isfinite(total):
                    raise FloatingPointError(f"output {row} of a model is not finite")
                cls._take(grid, tally, row, sample, scaled, total)
        return cls(grid=grid, **tally)

    @classmethod
    def _empty(cls, grid):
        return {"count": 0, "powers": np.zeros((len(grid.center), 4))}

    @classmethod
    def _take(cls, grid, tally, row, sample, scaled, total):
        squared = scaled * scaled
        third, fourth = (np.einsum("i,i->", squared, other) for other in (scaled, squared))
        tally["powers"][row] += total, squared.sum(), third, fourth

    def __add__(self, other):
        if not all(map(np.array_equal, (self.grid.center, self.grid.scale), (other.grid.center, other.grid.scale))):
            raise ValueError("tallies of different grids cannot be added: prepare one experiment for the whole run")
        return type(self)(grid=self.grid, **self._sums(other))

    def _sums(self, other):
        return {"count": self.count + other.count, "powers": self.powers + other.powers}

    def central_moments(self):
        """Mean and central moments 2 to 4 (divided by the count), each of shape (outputs,), in the outputs' units."""
        first, second, third, fourth = (self.powers / self.count).T
        variance = second - first**2
        skewed = third - 3 * first * second + 2 * first**3
        peaked = fourth - 4 * first * third + 6 * first**2 * second - 3 * first**4
        scale = self.grid.scale
        return self.grid.center + scale * first, scale**2 * variance, scale**3 * skewed, scale**4 * peaked


def _unpacked(start: int, filled: np.ndarray, **rest) -> "Tally":
    cells = np.zeros((len(filled), CELLS), np.int64)
    cells[:, start : start + filled.shape[1]] = filled
    return Tally(cells=cells, **rest)


@storable
@dataclass(frozen=True, kw_only=True, eq=False)
class Tally(Moments):
    """Moments with a histogram and the extremes, so that quantiles can be read.

    cells : histogram counts, shape (outputs, CELLS); the end cells also hold all beyond
    smallest, largest : in the outputs' own units, shape (outputs,)
    """

    cells: np.ndarray
    smallest: np.ndarray
    largest: np.ndarray

    def __reduce__(self):
        """To another process only the cells travel that hold anything."""
        held = np.flatnonzero(self.cells.any(axis=0))
        start, stop = (int(held[0]), int(held[-1]) + 1) if held.size else (0, 0)
        filled = self.cells[:, start:stop]
        if filled.size and filled.max() < 2**31:
            filled = filled.astype(np.int32)
        rest = {name: getattr(self, name) for name in ("grid", "count", "powers", "smallest", "largest")}
        return partial(_unpacked, **rest), (start, filled)

    @classmethod
    def _empty(cls, grid):
        outputs = len(grid.center)
        return super()._empty(grid) | {
            "cells": np.zeros((outputs, CELLS), np.int64),
            "smallest": np.full(outputs, np.inf),
            "largest": np.full(outputs, -np.inf),
        }

    @classmethod
    def _take(cls, grid, tally, row, sample, scaled, total):
        super()._take(grid, tally, row, sample, scaled, total)
        scaled *= CELLS_PER_SIGMA  # the power sums are done with it
        scaled += REACH * CELLS_PER_SIGMA
        smallest, largest = sample.min(), sample.max()
        if max(largest - grid.center[row], grid.center[row] - smallest) >= REACH * grid.scale[row]:
            scaled = np.clip(scaled, 0, CELLS - 1)
        tally["cells"][row] += np.bincount(scaled.astype(np.intp), minlength=CELLS)
        tally["smallest"][row] = min(tally["smallest"][row], smallest)
        tally["largest"][row] = max(tally["largest"][row], largest)

    def _sums(self, other):
        return super()._sums(other) | {
            "cells": self.cells + other.cells,
            "smallest": np.minimum(self.smallest, other.smallest),
            "largest": np.maximum(self.largest, other.largest),
        }

    def value_at_rank(self, output: int, rank: float) -> float:
        """Value below which `rank` of the samples lie, linear inside a cell.

        output : row; rank : 0 to count
        Returns the value in the output's unit; at and beyond the ends the smallest or the largest sample itself.
        """
        low, high, share = self.cell_at_rank(output, rank)
        return low + share * (high - low)

    def cell_at_rank(self, output: int, rank: float) -> tuple[float, float, float]:
        """Ends of the cell in which a rank lies, and how far inside it the rank is [1]; an end cell goes to the extreme."""
        smallest, largest = float(self.smallest[output]), float(self.largest[output])
        if rank <= 0 or rank >= self.count:
            extreme = smallest if rank <= 0 else largest
            return extreme, extreme, 0.0
        reached = np.cumsum(self.cells[output])
        cell = int(np.searchsorted(reached, rank))
        before = reached[cell - 1] if cell else 0
        ends = self.grid.center[output] + self.grid.scale[output] * (
            np.array([cell, cell + 1]) / CELLS_PER_SIGMA - REACH
        )
        low = smallest if cell == 0 else max(float(ends[0]), smallest)
        high = largest if cell == CELLS - 1 else min(float(ends[1]), largest)
        return low, high, float((rank - before) / (reached[cell] - before))

    def cell_width(self, output: int) -> float:
        """Width of a histogram cell, in the output's unit."""
        return float(self.grid.scale[output]) / CELLS_PER_SIGMA
