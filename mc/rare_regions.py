"""Where a limit state fails: one half-space for every failure region, found without gradients.

A margin may come in any unit: values only propose directions, signs decide. Draws with inflated spread, cleared of the
regions known, meet every region whose distance is comparable with the nearest one's; from each failure that no known
half-space explains, a short walk goes to the region's point nearest to the origin.
"""

from dataclasses import dataclass, replace

import numpy as np
from scipy.special import ndtri

from mc.rare_calls import CountedLimitState
from mc.rare_descent import descent
from mc.rare_walks import MOST_TURNS, cost_of_walk, shrunk, walk

DIVISORS = (2.2, 1.6, 1.2)  # a half-space at distance b is met by 1, 5 and 11 % of the draws with spread b/divisor
SPREADS = (1.6, 2.2, 3.0, 4.0, 5.0)  # when the distance is not known
BATCH = 100  # draws at each spread
SLACK = 0.9  # a failure is explained from this share of a half-space's distance on
CLEARED = 0.89  # share of a half-space's distance to which points are pushed back
MOST_PUSHES = 100
SAME = 0.97  # cosine of two normals that are one region's
FAINT = 18.0  # excess of a squared distance that makes a region's density exp(-9) of the nearest one's
WALKABLE = 10  # dimensions up to which a walk by yes or no alone may arrive
MOST_FAINT = 3  # walks to points too far out to matter, and more than regions: a curved set may matter by their number
LIGHT = 0.25  # of a repeat that costs few calls
MOST_REPEATS = 4  # walks in a row that lead to known regions
MOST_REGIONS = 200
JUDGED_AT = (8, 16, 32, 64, 128)  # regions at which it is asked whether they are one curved set
MIRROR = (0.94, 1.02)  # shares of a region's nearest point between which its mirror image must begin
DEEP = 0.5  # depth of the point inside a region to which a failure's way is followed [sigmas],
BETWEEN_SHARES = np.array([0.2, 0.4, 0.6, 0.8])  # and where on it
ROUND_LOOKS = 20
BETWEEN = 1.06  # radius, in distances, at which it is looked between two neighbours


@dataclass(frozen=True, kw_only=True, eq=False)
class Regions:
    """Half-spaces normal . x >= distance that failure regions begin with.

    normals : unit vectors, shape (k, dimension); distances : from the origin, shape (k,)
    complete : whether the last batch of draws met nothing new
    continuous : whether the half-spaces are pieces of one curved set, which no number of them explains
    flat : whether the values tell no more than yes or no, so that walks are not to be trusted; of several regions in many
        dimensions one may then hide, and the search does not count as complete
    lost : whether a failure was met that leads to no region
    """

    normals: np.ndarray
    distances: np.ndarray
    complete: bool = False
    continuous: bool = False
    flat: bool = False
    lost: bool = False

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

    def from_number(self, first):
        """The regions from a number on."""
        return replace(self, normals=self.normals[first:], distances=self.distances[first:])

    def joined_by(self, point):
        """These regions and the one whose nearest point is `point`."""
        distance = np.linalg.norm(point)
        normals, distances = np.vstack([self.normals, point / distance]), np.append(self.distances, distance)
        return replace(self, normals=normals, distances=distances)


def explained_by_walks(state, random, regions, failures, reserve):
    """Regions joined by those of the failures that they do not explain; stops at a few repeats or at the reserve.

    Returns the regions and whether they look continuous.
    """
    repeats, continuous, faint = 0, False, 0
    unexplained = failures[~regions.explain(failures)]
    unexplained = unexplained[np.argsort(np.linalg.norm(unexplained, axis=1))]  # near ones fail by one margin alone
    while len(unexplained) and repeats < MOST_REPEATS and not continuous:
        if (
            state.left - MOST_TURNS * cost_of_walk(state.dimension) < reserve / 2
            or state.left < reserve
            or len(regions.distances) == MOST_REGIONS
        ):
            break
        known, weight = False, 1.0
        if regions.flat:
            found, lost = flat_walk(state, random, unexplained[0], regions, reserve)
            known, weight = found is None, 1.0 if lost else LIGHT
            regions = replace(regions, lost=regions.lost or lost)
        else:
            found = walk(state, random, unexplained[0], regions)
        faint += not known and not regions.matters(found)
        known = known or regions.knows(found) or not regions.matters(found)
        repeats = repeats + weight if known else 0
        if not known:
            before, regions = len(regions.distances), mirrored(state, regions.joined_by(found), found)
            due = any(before < count <= len(regions.distances) for count in JUDGED_AT)
            continuous = due and is_continuous(state, regions)
        continuous = continuous or faint >= max(MOST_FAINT, len(regions.distances) + 1)
        unexplained = unexplained[1:]
        unexplained = unexplained[~regions.explain(unexplained)]
    return regions, continuous


def mirrored(state, regions, point):
    """The regions joined by the mirror image of the last one, where it is another: offsets fail on either side alike."""
    if regions.explain(-point[None]).any():
        return regions
    outside, inside = state.failed(np.outer(MIRROR, -point))
    return regions.joined_by(-point) if inside and not outside else regions


def flat_walk(state, random, point, regions, reserve):
    """Where the region of a failure begins by yes or no alone, None when it is known or faint; and whether it got lost."""
    if is_connected(state, regions, point):
        return None, False
    point = shrunk(state, point)
    spread = max(1.0, np.linalg.norm(point) / np.sqrt(state.dimension))
    other = descent(state, random, point[None], spread, reserve, regions)
    if other is None:
        return None, state.dimension > WALKABLE
    if other.compact:
        return other.distance * other.normal, False
    if state.dimension <= WALKABLE:
        return walk(state, random, point, regions), False
    return None, True


def is_connected(state, regions, point):
    """Whether a failure belongs to the region it is nearest to: it fails all the way from one to the other.

    A region that is no half-space holds failures outside of its half-space too; noise and corners leave it convex.
    """
    point = shrunk(state, point)
    nearest = np.argmax(regions.normals @ point - regions.distances)
    inside = (regions.distances[nearest] + DEEP) * regions.normals[nearest]
    between = point + BETWEEN_SHARES[:, None] * (inside - point)
    return bool(state.failed(between).all())


def is_round(state, random, failures):
    """Whether the failures are those of a sphere: it fails in most directions, as far out as they are."""
    directions = random.standard_normal((ROUND_LOOKS, state.dimension))
    radius = np.median(np.linalg.norm(failures, axis=1))
    points = radius * BETWEEN * directions / np.linalg.norm(directions, axis=1)[:, None]
    return bool(state.failed(points).mean() > 0.5)


def is_continuous(state, regions):
    """Whether the regions are pieces of one curved set: it fails between most neighbours too, a little further out."""
    regions = regions.near()
    if len(regions.distances) < JUDGED_AT[0]:
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


def find_regions(state: CountedLimitState, random, first: Regions, failures, log_probability, reserve) -> Regions:
    """Regions of failure, until a fresh batch of inflated draws finds nothing new.

    first : regions known already; failures : shape (m, dimension)
    log_probability : of the pilot, None when it reached no failure; reserve : calls to leave for the estimate
    Source: inflated spread after C. G. Bucher, Struct. Saf. 31, 504 (2009) (from memory), here for the search alone.
    """
    regions, continuous = explained_by_walks(state, random, first, failures, reserve)
    spreads = np.array(SPREADS) if log_probability is None else distance_of(log_probability) / np.array(DIVISORS)
    complete = False
    while not complete and not continuous and state.left - BATCH * len(spreads) > reserve:
        batch = new_failures(state, random, regions, spreads)
        before = len(regions.distances)
        regions, continuous = explained_by_walks(state, random, regions, batch, reserve)
        complete = len(regions.distances) == before
    hidden = regions.flat and len(regions.distances) > 1 and state.dimension > WALKABLE
    complete = complete and not regions.lost and not hidden
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
