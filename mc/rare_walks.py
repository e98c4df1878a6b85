"""From a failure to where its region comes nearest to the origin, without gradients: values propose, signs decide."""

import numpy as np
from scipy.special import ndtri
from scipy.stats import rankdata

CLOUD = 0.6  # spread of the points whose values give a normal
INWARD = 1.08  # the cloud lies this much beyond the boundary, so that most of it fails by one margin
SCALES = (0.95, 1.02, 1.08, 1.2)  # of the foot points that a walk tries
MIXTURES = (0.3, 0.6, 0.85)  # shares of the present direction that it tries
PLANE = 0.995  # share of the variance of a cloud's values from which on the boundary may be a plane,
NEAR = 0.04  # and how near its foot point must then be to the boundary, in distances
PROGRESS = 0.98  # a turn must come nearer than this share
MOST_TURNS = 8  # of one walk
RAGGED = 0.06  # adjusted share of variance left by a plane, from which on walks are not trusted in many dimensions


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


def local_normals(state, random, point, regions=None):
    """Directions towards failure near a failed point, shape (3, dimension), and how well the first fits [1].

    Three readings of one cloud.

    Least squares of the values of the failures outside known regions, in the unit of one margin: exact for a plane; of
    the normal scores of all ranks, for values that are far from linear; and of the yes or no alone. The walk tries all
    three, so that a reading that misleads costs calls and nothing else.
    """
    count = cloud_size(state.dimension)
    offsets = CLOUD * random.standard_normal((count, state.dimension))
    values = state(INWARD * point + offsets)
    new = values <= 0
    if regions is not None:
        new &= ~regions.contain(INWARD * point + offsets)
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


def plane_at(state, random, point):
    """Where the boundary is a plane near a failed point, the failure nearest to the origin, otherwise None.

    The first turn of a `walk`. Returns also whether the values are ragged there: noise, stairs or an edge leave more
    than a curved boundary does, in the adjusted share of variance that a plane explains.
    """
    point = shrunk(state, point)
    normals, fit = local_normals(state, random, point)
    left = cloud_size(state.dimension) - state.dimension - 1
    ragged = (1 - fit) * (left + state.dimension) / left > RAGGED
    if fit <= PLANE:
        return None, ragged
    foot = (normals[0] @ point) * normals[0]
    found = nearest_failure(state, np.outer(SCALES, foot))
    if found is None:
        return None, ragged
    found = shrunk(state, found, steps=(1 / 64,))
    near = abs(np.linalg.norm(found) / np.linalg.norm(foot) - 1) < NEAR
    return (min(found, point, key=np.linalg.norm) if near else None), ragged


def cloud_size(dimension):
    """Points of a cloud that a plane is fitted to."""
    return int(1.3 * dimension) + 12
