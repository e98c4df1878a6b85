"""Where a limit state fails: one half-space for every failure region, found without gradients.

A margin may come in any unit: values only propose directions, signs decide. Draws with inflated spread, cleared of the
regions known, meet every region whose distance is comparable with the nearest one's; from each failure that no known
half-space explains, a short walk goes to the region's point nearest to the origin.
"""

from dataclasses import dataclass, replace

import numpy as np
from scipy.special import ndtri
from scipy.stats import rankdata

from mc.rare_calls import CountedLimitState

DIVISORS = (2.2, 1.6, 1.2)  # a half-space at distance b is met by 1, 5 and 11 % of the draws with spread b/divisor
SPREADS = (1.6, 2.2, 3.0, 4.0, 5.0)  # when the distance is not known
BATCH = 100  # draws at each spread
SLACK = 0.9  # a failure is explained from this share of a half-space's distance on
CLEARED = 0.89  # share of a half-space's distance to which points are pushed back
MOST_PUSHES = 100
SAME = 0.97  # cosine of two normals that are one region's
CLOUD = 0.6  # spread of the points whose values give a normal
INWARD = 1.08  # the cloud lies this much beyond the boundary, so that most of it fails by one margin
SCALES = (0.95, 1.02, 1.08, 1.2)  # of the foot points that a walk tries
MIXTURES = (0.3, 0.6, 0.85)  # shares of the present direction that it tries
PLANE = 0.995  # share of the variance of a cloud's values from which on the boundary may be a plane,
NEAR = 0.04  # and how near its foot point must then be to the boundary, in distances
PROGRESS = 0.98  # a turn must come nearer than this share
MOST_TURNS = 8  # of one walk
FAINT = 18.0  # excess of a squared distance that makes a region's density exp(-9) of the nearest one's
MOST_REPEATS = 4  # walks in a row that lead to known regions
MOST_REGIONS = 200
ENOUGH_TO_JUDGE = 8  # regions, and every so many, at which it is asked whether they are one curved set
BETWEEN = 1.06  # radius, in distances, at which it is looked between two neighbours


@dataclass(frozen=True, kw_only=True, eq=False)
class Regions:
    """Half-spaces normal . x >= distance that failure regions begin with.

    normals : unit vectors, shape (k, dimension); distances : from the origin, shape (k,)
    complete : whether the last batch of draws met nothing new
    continuous : whether the half-spaces are pieces of one curved set, which no number of them explains
    """

    normals: np.ndarray
    distances: np.ndarray
    complete: bool = False
    continuous: bool = False

    @classmethod
    def none(cls, dimension):
        """No region at all."""
        return cls(normals=np.empty((0, dimension)), distances=np.empty(0))

    def contain(self, points):
        """Whether points of shape (n, dimension) lie in one of the half-spaces, shape (n,)."""
        return (points @ self.normals.T >= self.distances).any(axis=1)

    def explain(self, points):
        """Whether they lie in one or nearly so, shape (n,)."""
        return (points @ self.normals.T >= SLACK * self.distances).any(axis=1)

    def cleared(self, points):
        """Points of shape (n, dimension) pushed out of all half-spaces, the deepest first, so that none explains them.

        Source: successive projection, S. Agmon, Can. J. Math. 6, 382 (1954) (from memory).
        """
        points = points.copy()
        for _ in range(MOST_PUSHES if len(self.distances) else 0):
            excess = points @ self.normals.T - CLEARED * self.distances
            deepest = excess.argmax(axis=1)
            depth = np.maximum(excess[np.arange(len(points)), deepest], 0.0)
            if not depth.any():
                break
            points -= depth[:, None] * self.normals[deepest]
        return points

    def knows(self, point):
        """Whether a region's nearest point is one that is known, shape (dimension,)."""
        return bool((self.normals @ point >= SAME * np.linalg.norm(point)).any())

    def matters(self, point):
        """Whether a region's nearest point is near enough to add to the probability: a walk that got lost is not."""
        return bool(point @ point <= (self.distances**2 + FAINT).min(initial=np.inf))

    def near(self):
        """The regions that matter beside the nearest one."""
        kept = self.distances**2 <= (self.distances**2 + FAINT).min(initial=np.inf)
        return replace(self, normals=self.normals[kept], distances=self.distances[kept])

    def joined_by(self, point):
        """These regions and the one whose nearest point is `point`."""
        distance = np.linalg.norm(point)
        return Regions(
            normals=np.vstack([self.normals, point / distance]), distances=np.append(self.distances, distance)
        )


def nearest_failure(state, candidates):
    """The candidate nearest to the origin that fails, or None. candidates : shape (n, dimension)."""
    failed = candidates[state.failed(candidates)]
    return failed[np.argmin(np.linalg.norm(failed, axis=1))] if len(failed) else None


def shrunk(state, point, steps=(1 / 8, 1 / 64)):
    """A failure moved towards the origin, to within the last step of the nearest failure that a grid shows."""
    best = 1.0
    for step in steps:
        shares = best - step * np.arange(7, 0, -1)
        failed = state.failed(shares[:, None] * point)
        best = shares[failed].min() if failed.any() else best
    return best * point


def local_normals(state, random, point, regions):
    """Directions towards failure near a failed point, shape (3, dimension), and how well the first fits [1].

    Three readings of one cloud.

    Least squares of the values of the failures outside known regions, in the unit of one margin: exact for a plane; of
    the normal scores of all ranks, for values that are far from linear; and of the yes or no alone. The walk tries all
    three, so that a reading that misleads costs calls and nothing else.
    """
    count = int(1.3 * state.dimension) + 12
    offsets = CLOUD * random.standard_normal((count, state.dimension))
    values = state(INWARD * point + offsets)
    new = (values <= 0) & ~regions.contain(INWARD * point + offsets)
    failed = new if new.sum() > state.dimension + 1 else np.full(count, True)
    scores = ndtri((rankdata([values, np.sign(values)], axis=1) - 0.5) / count)
    plane, fit = _plane(offsets[failed], values[failed])
    normals = np.array([plane, *(_plane(offsets, score)[0] for score in scores)])
    lengths = np.linalg.norm(normals, axis=1)
    normals[lengths == 0] = point
    return -normals / np.where(lengths == 0, -np.linalg.norm(point), lengths)[:, None], fit


def _plane(offsets, heights):
    """Slopes of the least-squares plane, shape (dimension,), and the share of variance it explains."""
    if np.ptp(heights) == 0:
        return np.zeros(offsets.shape[1]), 0.0
    heights = heights / np.abs(heights).max()
    design = np.column_stack([offsets, np.ones(len(offsets))])
    fit = np.linalg.lstsq(design, heights, rcond=None)[0]
    return fit[:-1], 1 - np.var(heights - design @ fit) / np.var(heights)


def walk(state, random, point, regions):
    """From a failure to the nearest failure of its region, approximately.

    Each turn takes normals at the boundary. Where the first one's foot point fails and lies on the boundary, that is a
    plane and the walk is over; otherwise it looks along all normals, along the mean of those that yes and no gave so
    far, and along mixtures with the present direction. In the manner of A. M. Hasofer and N. C. Lind, J. Eng. Mech.
    Div. 100, 111 (1974) and R. Rackwitz and B. Fiessler, Comput. Struct. 9, 489 (1978) (both from memory), with a
    least-squares plane for gradients.
    """
    point, memory = shrunk(state, point), np.zeros(state.dimension)
    for _ in range(MOST_TURNS):
        normals, fit = local_normals(state, random, point, regions)
        memory = memory + normals[-1]
        directions = np.vstack([normals, memory / np.linalg.norm(memory)])
        feet = (directions @ point)[:, None] * directions
        found = nearest_failure(state, np.outer(SCALES, feet[0]))
        if found is not None:
            found = shrunk(state, found, steps=(1 / 64,))
            if fit > PLANE and abs(np.linalg.norm(found) / np.linalg.norm(feet[0]) - 1) < NEAR:
                return min(found, point, key=np.linalg.norm)
        mixed = [foot + share * (point - foot) for share in MIXTURES for foot in feet[[0, 3]]]
        others = nearest_failure(state, np.concatenate([scale * np.vstack([feet[1:], mixed]) for scale in SCALES[1:]]))
        found = min((each for each in (found, others) if each is not None), key=np.linalg.norm, default=None)
        if found is None or np.linalg.norm(found) > PROGRESS * np.linalg.norm(point):
            break
        point = shrunk(state, found)
    return point


def cost_of_walk(dimension):
    """Calls that a turn of a walk may take at most, and the start."""
    return 14 + int(1.3 * dimension) + 12 + 60


def explained_by_walks(state, random, regions, failures, reserve):
    """Regions joined by those of the failures that they do not explain; stops at a few repeats or at the reserve.

    Returns the regions and whether they look continuous.
    """
    repeats, continuous = 0, False
    unexplained = failures[~regions.explain(failures)]
    unexplained = unexplained[np.argsort(np.linalg.norm(unexplained, axis=1))]  # near ones fail by one margin alone
    while len(unexplained) and repeats < MOST_REPEATS and not continuous:
        if (
            state.left - MOST_TURNS * cost_of_walk(state.dimension) < reserve / 2
            or state.left < reserve
            or len(regions.distances) == MOST_REGIONS
        ):
            break
        found = walk(state, random, unexplained[0], regions)
        known = regions.knows(found) or not regions.matters(found)
        repeats = repeats + 1 if known else 0
        if not known:
            regions = regions.joined_by(found)
            continuous = len(regions.distances) % ENOUGH_TO_JUDGE == 0 and is_continuous(state, regions)
        unexplained = unexplained[1:]
        unexplained = unexplained[~regions.explain(unexplained)]
    return regions, continuous


def is_continuous(state, regions):
    """Whether the regions are pieces of one curved set: it fails between most neighbours too, a little further out."""
    regions = regions.near()
    if len(regions.distances) < ENOUGH_TO_JUDGE:
        return False
    cosines = regions.normals @ regions.normals.T
    np.fill_diagonal(cosines, -1.0)
    neighbours = cosines.argmax(axis=1)
    between = regions.normals + regions.normals[neighbours]
    radius = BETWEEN * np.maximum(regions.distances, regions.distances[neighbours])
    middles = between * (radius / np.maximum(np.linalg.norm(between, axis=1), 1e-12))[:, None]
    return bool(state.failed(middles).mean() > 0.5)


def new_failures(state, random, regions, spreads):
    """Failures among a batch of draws with inflated spread, cleared of the known regions, shape (m, dimension).

    With many regions nearly every such draw fails somewhere; cleared of what is known, a failure is a new one.
    """
    scales = np.repeat(spreads, BATCH)
    points = regions.cleared(scales[:, None] * random.standard_normal((scales.size, state.dimension)))
    return points[state.failed(points)]


def find_regions(state: CountedLimitState, random, failures, log_probability, reserve) -> Regions:
    """Regions of failure, until a fresh batch of inflated draws finds nothing new.

    failures : known ones, shape (m, dimension); log_probability : of the pilot, None when it reached no failure
    reserve : calls to leave for the estimate
    Source: inflated spread after C. G. Bucher, Struct. Saf. 31, 504 (2009) (from memory), here for the search alone.
    """
    regions, continuous = explained_by_walks(state, random, Regions.none(state.dimension), failures, reserve)
    spreads = np.array(SPREADS) if log_probability is None else distance_of(log_probability) / np.array(DIVISORS)
    complete = False
    while not complete and not continuous and state.left - BATCH * len(spreads) > reserve:
        batch = new_failures(state, random, regions, spreads)
        before = len(regions.distances)
        regions, continuous = explained_by_walks(state, random, regions, batch, reserve)
        complete = len(regions.distances) == before
    return replace(regions.near(), complete=complete, continuous=continuous)


def revisited(state: CountedLimitState, random, regions: Regions, failures, reserve) -> Regions:
    """Regions joined by those that further failures show: neighbours at an acute angle hide behind one another."""
    if regions.continuous or not len(failures):
        return regions
    more, continuous = explained_by_walks(state, random, regions, failures, reserve)
    return replace(more.near(), complete=regions.complete, continuous=continuous)


def distance_of(log_probability):
    """Distance of the half-space with a given probability, at least 2 [sigmas]."""
    return max(2.0, float(-ndtri(max(np.exp(log_probability), 1e-300))))
