"""A first, rough look at a rare event, robust since subset simulation needs ranks only, and annealing only signs."""

from dataclasses import dataclass

import numpy as np

from mc.rare_calls import CountedLimitState

PILOT_SIZE = 300  # points a level
CONDITIONAL = 0.1  # share of a level that goes on to the next
WANTED_ACCEPTANCE = 0.44
ANNEALED_FROM = (2.0, 3.0, 4.0, 5.0)  # spreads, the first at which a tenth fails
CORRELATION = 4.0  # factor on a level's variance for the correlation of its chains, an allowance


@dataclass(frozen=True, kw_only=True, eq=False)
class Pilot:
    """What subset simulation found.

    log_probability : natural logarithm of the estimate; of the level reached when `reached` is False
    log_error : its rough standard error
    failures : failed points of the last level, shape (m, dimension), correlated
    reached : whether the failures were reached at all
    """

    log_probability: float
    log_error: float
    failures: np.ndarray
    reached: bool


def next_threshold(values):
    """Value that about a tenth of a level does not exceed; None when the level is flat and cannot be divided.

    values : of a level, shape (n,). On a plateau that more than half the level shares, the next lower value is taken.
    """
    threshold = np.partition(values, int(CONDITIONAL * values.size) - 1)[int(CONDITIONAL * values.size) - 1]
    if np.mean(values <= threshold) > 0.5:
        lower = values[values < threshold]
        return lower.max() if lower.size else None
    return threshold


def continued(state, random, points, values, threshold, size, step, spread=1.0):
    """A level of about `size` points that do not exceed a threshold, by chains from the points that already do not.

    points, values : seeds, shapes (k, dimension) and (k,)
    step : share of fresh noise in a proposal, 0 to 1; adapted on the way
    spread : of the normals that the chains are to keep
    Returns points, values and the step of the end.
    Source: preconditioned Crank-Nicolson proposals with adapted step, I. Papaioannou, W. Betz, K. Zwirglmaier and
    D. Straub, Probab. Eng. Mech. 41, 89 (2015) (from memory).
    """
    every_point, every_value = [points], [values]
    points, values = points.copy(), values.copy()
    for turn in range(max(1, round(size / len(points)) - 1)):
        noise = spread * random.standard_normal(points.shape)
        proposals = np.sqrt(1 - step**2) * points + step * noise
        proposed = state(proposals)
        accepted = proposed <= threshold
        points[accepted], values[accepted] = proposals[accepted], proposed[accepted]
        every_point.append(points.copy())
        every_value.append(values.copy())
        step = np.clip(step * np.exp((accepted.mean() - WANTED_ACCEPTANCE) / np.sqrt(turn + 1)), 0.1, 1.0)
    return np.concatenate(every_point), np.concatenate(every_value), step


def subset_simulation(state: CountedLimitState, random, size: int, reserve: float = 0, least=1e-15) -> Pilot:
    """Estimate a failure probability level by level.

    size : points a level; reserve : calls to leave; least : probability below which the descent is given up
    Source: S. K. Au and J. L. Beck, Probab. Eng. Mech. 16, 263 (2001) (from memory).
    """
    points = random.standard_normal((size, state.dimension))
    values = state(points)
    logarithm, variance, step = 0.0, 0.0, 0.7
    while True:
        share = np.mean(values <= 0)
        enough = share >= CONDITIONAL
        threshold = 0.0 if enough else next_threshold(values)
        reached = threshold is not None and threshold <= 0
        if reached or threshold is None or logarithm < np.log(least) or state.left < size + reserve:
            logarithm += np.log(share) if share else 0.0
            variance += CORRELATION * (1 - share) / (share * len(values)) if share else 1.0
            return Pilot(
                log_probability=float(logarithm),
                log_error=float(np.sqrt(variance)),
                failures=points[values <= 0],
                reached=bool(share),
            )
        kept = values <= threshold
        logarithm += np.log(kept.mean())
        variance += CORRELATION * (1 - kept.mean()) / kept.sum()
        points, values, step = continued(state, random, points[kept], values[kept], threshold, size, step)


def annealing(state: CountedLimitState, random, size: int, reserve: float = 0) -> Pilot:
    """Estimate a failure probability by signs alone: from a spread at which failures are common down to one.

    For a limit state that is flat away from failure, where no level leads on. Each stage narrows the spread until the
    weights of its failures vary as much as their mean, draws among them by weight, and moves them on.
    Source: R. M. Neal, Stat. Comput. 11, 125 (2001); P. Del Moral, A. Doucet and A. Jasra, J. R. Stat. Soc. B 68, 411
    (2006) (both from memory), here over the spread, as C. G. Bucher, Struct. Saf. 31, 504 (2009) (from memory) uses it.
    """
    failures = np.empty((0, state.dimension))
    for spread in ANNEALED_FROM:
        if state.left < size + reserve:
            break
        points = spread * random.standard_normal((size, state.dimension))
        failures = points[state.failed(points)]
        if len(failures) >= CONDITIONAL * size or (spread == ANNEALED_FROM[-1] and len(failures)):
            break
    logarithm = np.log(max(len(failures), 1) / size)
    variance, step = CORRELATION * (1 / max(len(failures), 1) - 1 / size), 0.5
    while len(failures) and spread > 1 and state.left > size + reserve:
        squared = (failures**2).sum(axis=1)
        rate = 1 / max(squared.std() / 2, 1e-12)
        narrower = max(1.0, (spread**-2 + rate) ** -0.5)
        weights = -0.5 * squared * (narrower**-2 - spread**-2) - state.dimension * np.log(narrower / spread)
        scaled = np.exp(weights - weights.max())
        logarithm += weights.max() + np.log(scaled.mean())
        variance += CORRELATION * np.var(scaled) / scaled.mean() ** 2 / size
        places = (random.random() + np.arange(size // 3)) / (size // 3)
        chosen = np.minimum(np.searchsorted(np.cumsum(scaled) / scaled.sum(), places), len(failures) - 1)
        seeds, spread = failures[chosen], narrower
        failures, _, step = continued(state, random, seeds, np.zeros(len(seeds)), 0.0, size, step, spread)
    return Pilot(
        log_probability=float(logarithm),
        log_error=float(np.sqrt(variance)),
        failures=failures,
        reached=bool(len(failures)) and spread == 1,
    )
