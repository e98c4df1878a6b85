"""The law of counted dopants as a monotone function of one standard normal.

The sum of weights over a Poisson number of dopants is compound Poisson. Its probabilities come from its characteristic
function by a fast Fourier transform, once with each of several exponential tilts so that both tails keep their relative
accuracy, and are turned into a table of standardised quantiles. Driving that table with a standard normal gives every
width the same draw. Random draws are made elsewhere; here is only the function.
"""

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from scipy.optimize import brentq
from scipy.special import ndtri

_NORMALS = np.linspace(-8.5, 8.5, 17 * 64 + 1)  # the table's grid; linear interpolation errs below 1e-5 sigma
_FURTHEST = 40  # the table goes on straight to here, further than any estimator of rare events reaches
_STEPS_PER_SIGMA = 400
_FEWEST_CELLS = 8  # of a weight; many dopants need few, since their sum forgets the law of one
_LARGEST_COUNT = 50_000  # above it the law is that of this count continued in 1/sqrt(count), its skew there 0.006
_TILTS = (-5.0, -2.5, 0.0, 3.0, 6.0, 10.0)  # where the tilted means lie, in sigmas of the sum


def layered_weight_density(weight, surface_ratio, depth_ratio, fringe_ratio=0.0):
    """Unnormalised probability density of the weight of one dopant.

    weight : 1 - x/x_d [1], 0 to 1, any shape
    surface_ratio : surface doping over substrate doping [1]
    depth_ratio : surface depth over depletion width [1]
    fringe_ratio : fringe dopants over the substrate-doped channel's N W x_d, see `fringe_weighted_dopants` [1]
    Returns density up to a factor [1].
    Source: uniform places in each layer; a place in the fringe at radius rho is met in proportion to rho.
    """
    layers = np.where(weight > 1 - depth_ratio, surface_ratio, 1.0)
    return layers + fringe_ratio * 2 * (1 - weight)


def _lattice(density, cells):
    """Weights gathered on the points 0, 1/cells, ... 1, each mass shared so that the mean stays exact."""
    middle = (np.arange(64 * cells) + 0.5) / (64 * cells)
    mass = density(middle)
    place = middle * cells
    left = place.astype(int)
    share = place - left
    probability = np.bincount(left, mass * (1 - share), cells + 1) + np.bincount(left + 1, mass * share, cells + 1)
    return probability / probability.sum()


def _tilted_probabilities(mean_count, probability, tilt, offset, size):
    """Log probability of the sums offset..offset+size-1 (in lattice steps), through the law tilted by `tilt`."""
    cells = probability.size - 1
    weights = np.arange(cells + 1) / cells
    tilted = probability * np.exp(np.minimum(tilt * weights, 600))
    tilted_count = mean_count * tilted.sum()
    transform = np.fft.rfft(mean_count * tilted, size)
    wrapped = np.fft.irfft(np.exp(transform - tilted_count), size)
    sums = offset + np.arange(size)
    floor = np.finfo(float).tiny
    return np.log(np.maximum(wrapped[sums % size], floor)) + tilted_count - mean_count - tilt * sums / cells


def compound_poisson_quantiles(normal, mean_count, density):
    """Standardised quantile function of a compound-Poisson sum of weights between 0 and 1.

    normal : standard normal values, -8.5 to 8.5 [1], increasing
    mean_count : mean number of dopants [1], > 0
    density : function of the weight, its probability density up to a factor
    Returns (sum - mean)/sigma at the same probability [1]. Flat where the device may hold no dopant at all.
    Source: characteristic function exp(m (phi - 1)), inverted with exponential tilting (F. Esscher, Skandinavisk
    Aktuarietidskrift 15, 175 (1932), memory).
    """
    rough = _lattice(density, 64)
    second = rough @ (np.arange(65) / 64) ** 2
    cells = max(_FEWEST_CELLS, int(np.ceil(_STEPS_PER_SIGMA / np.sqrt(mean_count * second))))
    probability = _lattice(density, cells)
    weights = np.arange(cells + 1) / cells
    mean = mean_count * (probability @ weights)
    sigma = np.sqrt(mean_count * (probability @ weights**2))
    # 16 sigmas below the mean, and above it as far as the skewed upper tail reaches
    reach = 40 if mean_count > 100 else 64
    size = 1 << int(np.ceil(np.log2(max(reach * sigma * cells, cells + 1))))
    offset = max(0, int((mean - 16 * sigma) * cells))
    sums = (offset + np.arange(size)) / cells

    def tilted_excess(tilt, target):
        return mean_count * (probability * weights) @ np.exp(np.minimum(tilt * weights, 600)) - target

    targets = np.unique(np.maximum(mean + sigma * np.array(_TILTS), 0.02 * mean))
    nearest = np.abs(sums[:, None] - targets).argmin(axis=1)
    log_probability = np.empty(size)
    for index, target in enumerate(targets):
        reach = 60.0
        while tilted_excess(reach, target) < 0 or tilted_excess(-reach, target) > 0:
            reach *= 4
        tilt = brentq(tilted_excess, -reach, reach, args=(target,))
        chosen = nearest == index
        log_probability[chosen] = _tilted_probabilities(mean_count, probability, tilt, offset, size)[chosen]
    mass = np.exp(log_probability)
    below = np.cumsum(mass)
    above = np.concatenate([np.cumsum(mass[::-1])[::-1][1:], [0.0]])
    edges = sums + 0.5 / cells
    if offset == 0:
        edges[0] = 0.0  # no dopant at all: an atom, not a cell
    with np.errstate(divide="ignore"):
        reached = np.where(below < 0.5, ndtri(np.minimum(below, 1)), -ndtri(np.minimum(above, 1)))
    inside = np.isfinite(reached)
    reached, edges = reached[inside], edges[inside]
    rising = np.concatenate([[True], reached[1:] > reached[:-1]])
    return (np.interp(normal, reached[rising], edges[rising]) - mean) / sigma


def _continued(table):
    """A table on _NORMALS, continued straight to +-_FURTHEST on the same steps."""
    steps = np.arange(1, (_FURTHEST - _NORMALS[-1]) * 64 + 1)
    below, above = table[1] - table[0], table[-1] - table[-2]
    return np.concatenate([table[0] - below * steps[::-1], table, table[-1] + above * steps])


@dataclass(frozen=True, kw_only=True)
class CountedLaw:
    """Standardised scatter of counted dopants around one nominal device, tabulated.

    normal_start, steps_per_normal : the grid of standard normals [1]
    center, rise : table at the nominal count, and its steps to the next normal [1]
    slope, slope_rise : its derivative with the inverse root of the mean count, first for fewer dopants and then, on the
        same grid again, for more; and its steps [1]
    inverse_root : inverse root of the nominal count [1]
    The table is linear in 1/sqrt(mean count) from the nominal count to nodes 20 % below and 25 % above it, so it is exact
    at nominal and monotone; at 25 dopants and three sigmas it errs by about 1e-3 sigma, at 5 dopants by 3e-2 where the
    device may hold none.
    """

    normal_start: float
    steps_per_normal: float
    center: np.ndarray
    rise: np.ndarray
    slope: np.ndarray
    slope_rise: np.ndarray
    inverse_root: float

    @classmethod
    def build(cls, mean_count, density):
        """Tabulate the law around a nominal mean count.

        mean_count : mean number of dopants of the nominal device [1], > 0
        density : see `compound_poisson_quantiles`
        Returns a CountedLaw.
        """
        mean_count = min(mean_count, _LARGEST_COUNT)
        fewer, more = 0.8 * mean_count, 1.25 * mean_count
        at_nominal = compound_poisson_quantiles(_NORMALS, mean_count, density)
        at_fewer = compound_poisson_quantiles(_NORMALS, fewer, density)
        at_more = compound_poisson_quantiles(_NORMALS, more, density)
        low, middle, high = more**-0.5, mean_count**-0.5, fewer**-0.5
        slopes = (at_fewer - at_nominal) / (high - middle), (at_nominal - at_more) / (middle - low)
        center, *slopes = (_continued(table) for table in (at_nominal, *slopes))
        return cls(
            normal_start=-float(_FURTHEST),
            steps_per_normal=64.0,
            center=center[:-1],
            rise=np.diff(center),
            slope=np.concatenate([slope[:-1] for slope in slopes]),
            slope_rise=np.concatenate([np.diff(slope) for slope in slopes]),
            inverse_root=middle,
        )

    def standardised(self, normal, mean_count):
        """Scatter in units of its own sigma.

        normal : standard normal draws [1], any shape; -40 to 40, beyond +-8.5 the last slope goes on
        mean_count : mean number of dopants of each device [1], broadcasts with `normal`
        Returns (sum of weights - mean)/sigma [1], increasing in `normal`.
        """
        return self.at_inverse_root(normal, 1 / np.sqrt(mean_count))

    def at_inverse_root(self, normal, inverse_root_count):
        """Scatter in units of its own sigma, from what the table is linear in.

        normal : see `standardised` [1]
        inverse_root_count : 1/sqrt(mean number of dopants) [1]
        Returns what `standardised` does [1].
        """
        place = normal * self.steps_per_normal - self.normal_start * self.steps_per_normal
        floor = np.floor(place)
        cell = floor.astype(np.intp)
        share = place - floor
        center = share * self.rise.take(cell, mode="clip")
        center += self.center.take(cell, mode="clip")
        distance = inverse_root_count - self.inverse_root
        cell = cell + (distance < 0) * self.center.size
        slope = share * self.slope_rise.take(cell, mode="clip")
        slope += self.slope.take(cell, mode="clip")
        slope *= distance
        return slope + center


@lru_cache(maxsize=256)
def layered_law(mean_count, surface_ratio, depth_ratio, fringe_ratio):
    """The law of a layered profile, kept: building it costs as much as some hundred thousand thresholds.

    mean_count : see `CountedLaw.build` [1]
    surface_ratio, depth_ratio, fringe_ratio : see `layered_weight_density` [1]
    Returns a CountedLaw.
    Source: as in `CountedLaw.build`.
    """
    return CountedLaw.build(
        mean_count, lambda weight: layered_weight_density(weight, surface_ratio, depth_ratio, fringe_ratio)
    )
