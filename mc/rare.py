"""Probability of a rare failure of a function of standard normals, with an interval that says when it does not know.

In turn: a rough subset simulation, a search for all failure regions, a mixture of normals trained on them, and a fresh
sample of that mixture for the estimate. The pilot and the weights then judge the estimate.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace
from math import ceil

import numpy as np
from scipy.special import ndtr

from mc.codec import storable
from mc.intervals import fraction_exact
from mc.rare_calls import CountedLimitState
from mc.rare_diagnostics import UNRELIABLE_SHAPE, effective_sample_size, log_interval, skewness, variation
from mc.rare_first import first_look
from mc.rare_pilot import CONDITIONAL, PILOT_SIZE, Pilot, subset_simulation
from mc.rare_regions import Regions, find_regions, revisited
from mc.rare_sampling import TRIAL, Training, final_sample, first_mixture, plane_component, trained
from mc.streams import generator

SECOND_SIZE = 1000  # the same, for a second opinion
UNCLEAR_SHAPE = 0.5  # Pareto shape from which on one is asked for
COUNTED = 5_000  # calls up to which plain counting is preferred
RESERVE = 0.3  # share of the calls that the search for regions leaves
DISAGREEMENT = 2.5  # standard errors between pilot and estimate
FEWEST_EFFECTIVE = 50
CURVED_TRIAL = 1000  # draws of a round of training where no plane is near the boundary
FOUND_SHARE = 0.5  # of the weight, before any fit, for the region of a descent
NEW_SHARE = (0.05, 0.5)  # of the weight for regions that the training shows, bounds
MOST_RETURNS = 4  # searches from the failures of the training
AIM = 0.85  # share of the target that the final sample is planned for
CURVED_AIM = 0.7  # the same where no plane is near the boundary: what spread is seen is then mostly too small
MISSED = 1.3  # multiple of the target from which on it counts as missed
FEW_DEGREES = 8  # of freedom of a pilot's error, which is itself a guess
LEAST_LEVEL = 500  # points a level, below which a last resort is not worth its calls
UNCHECKED = "a curved failure set was not checked by a second pilot: the calls did not suffice"
BELOW_PILOT = "well below the pilot's estimate: a failure region may be missing"


@storable
@dataclass(frozen=True, kw_only=True)
class RareEstimate:
    """A failure probability and how well it is known.

    value, low, high : probability and its interval [1]
    level : confidence level of the interval [1]
    calls : evaluations of the limit state, all included
    cov : coefficient of variation of the value [1]; infinite where no failure was met
    method : how the estimate was made
    regions : failure regions that the estimate rests on; 0 where none was looked for
    notes : reasons to doubt it, empty when there are none
    """

    value: float
    low: float
    high: float
    level: float
    calls: int
    cov: float
    method: str
    regions: int
    notes: tuple[str, ...]

    @property
    def flagged(self) -> bool:
        """Whether there are reasons to doubt the estimate."""
        return bool(self.notes)


def failure_probability(
    limit_state: Callable,
    dimension: int,
    *,
    seed: int,
    target_cov: float = 0.10,
    max_calls: int = 50_000,
    level: float = 0.95,
) -> RareEstimate:
    """Probability that a limit state of independent standard normals is at or below 0.

    limit_state : function of an array (n, dimension), returns values (n,); only their signs and ranks matter
    dimension : number of standard normals, 1 or more
    seed : 0 or more; the same seed gives the same answer
    target_cov : coefficient of variation to be reached [1]
    max_calls : evaluations that may be spent, 1000 or more
    level : confidence level of the interval [1]
    Returns a RareEstimate; its notes say why it may be wrong, for instance when max_calls did not suffice.
    Raises FloatingPointError when a value of the limit state is not finite.
    """
    _refuse_nonsense(dimension, seed, target_cov, max_calls, level)
    state = CountedLimitState(limit_state, dimension, max_calls)
    reserve = RESERVE * max_calls

    def stream(name):
        return generator(seed, f"rare {name}", 0)

    pilot = subset_simulation(state, stream("pilot"), PILOT_SIZE, reserve)
    need = 1.1 / np.exp(pilot.log_probability) / target_cov**2
    if pilot.reached and need < COUNTED:
        return counted(state, stream("count"), ceil(need), target_cov, level)
    first, pilot, found = first_look(state, stream, pilot, reserve)
    known = pilot.log_probability if pilot.reached or first.flat else None
    regions = find_regions(state, stream("search"), first, pilot.failures, known, reserve)
    if not pilot.reached and not len(regions.distances):
        return counted(state, stream("count"), state.left, target_cov, level)
    aim = (CURVED_AIM if regions.continuous else AIM) * target_cov
    regions, training = trained_on_all(state, stream, regions, pilot.failures, found, aim, reserve)
    sample = final_sample(state, stream("estimate"), training, aim)
    if sample is None or not sample.weights.any():
        return pilot_alone(state, stream("count"), pilot, target_cov, level)
    estimate = judged(state, sample, pilot, regions, target_cov, level)
    if estimate.notes == (BELOW_PILOT,) or (unclear(regions, sample) and not estimate.notes):
        estimate = second_opinion(state, stream("second pilot"), estimate)
    return last_resort(state, stream("last resort"), estimate, pilot) if estimate.notes else estimate


def trained_on_all(state, stream, regions: Regions, failures, found, aim, reserve) -> tuple[Regions, Training]:
    """A trained mixture of all regions, those included that only its trial draws show.

    stream : function of a name, a generator; failures : the pilot's, shape (m, dimension); found : a descent, or None
    aim : coefficient of variation to be planned for; reserve : calls to leave
    """
    mixture, samples = first_mixture(regions, failures), ()
    if found is not None:
        mixture, samples = mixture.joined_by(plane_component(found.normal, found.distance), FOUND_SHARE), found.samples
    training = Training.begun(mixture, samples, fitted=len(regions.distances) < 2)
    for _ in range(MOST_RETURNS):
        known, trial = len(regions.distances), CURVED_TRIAL if regions.continuous else TRIAL
        before = len(training.samples)
        training = trained(state, stream(f"training {known}"), training, aim, trial)
        if len(training.samples) == before:
            break
        shown = np.concatenate([sample.failures for sample in training.samples[before:]])
        more = revisited(state, stream(f"return {known}"), regions, shown, reserve)
        if len(more.distances) == known:
            break
        training = with_regions(training, regions, more, failures)
        regions = more
    return regions, training


def with_regions(training: Training, before: Regions, after: Regions, failures) -> Training:
    """The training with components for new regions, or a new one where the regions turned out to be something else."""
    if after.continuous != before.continuous or len(after.distances) < len(before.distances):
        return Training.begun(first_mixture(after, failures))
    new = after.from_number(len(before.distances))
    share = ndtr(-new.distances).sum() / ndtr(-after.distances).sum()
    none = failures[:0]
    return training.joined_by(first_mixture(new, none), np.clip(share, *NEW_SHARE))


def _refuse_nonsense(dimension, seed, target_cov, max_calls, level):
    for name, value, least in (("dimension", dimension, 1), ("seed", seed, 0), ("max_calls", max_calls, 1000)):
        if isinstance(value, bool) or not isinstance(value, int | np.integer) or value < least:
            raise ValueError(f"{name} {value!r}: a whole number, {least} or more, is needed")
    for name, value in (("target_cov", target_cov), ("level", level)):
        if not 0 < value < 1:
            raise ValueError(f"{name} {value!r}: a number between 0 and 1 is needed")


def counted(state, random, size, target_cov, level) -> RareEstimate:
    """Plain counting of `size` fresh draws, or of as many as may be afforded, with the exact binomial interval."""
    size, failures, slice_size = min(size, state.left), 0, 8192
    if not size:
        return _unknown(state, level)
    for start in range(0, size, slice_size):
        points = random.standard_normal((min(slice_size, size - start), state.dimension))
        failures += int(state.failed(points).sum())
    share = fraction_exact(failures, size, level)
    cov = float(np.sqrt((1 - share.value) / failures)) if failures else np.inf
    notes = () if failures else ("no failure was found: the upper limit is that of plain counting",)
    if failures and cov > MISSED * target_cov:
        notes = (f"the target was not reached: coefficient of variation {cov:.2g}",)
    return RareEstimate(
        value=share.value,
        low=share.low,
        high=share.high,
        level=level,
        calls=state.calls,
        cov=cov,
        method="plain counting, exact binomial",
        regions=0,
        notes=notes,
    )


def _unknown(state, level) -> RareEstimate:
    """Nothing is known: no failure was met and no call is left."""
    notes = ("the calls did not suffice to meet a failure or to count",)
    method = "none"
    return RareEstimate(
        value=0.0, low=0.0, high=1.0, level=level, calls=state.calls, cov=np.inf, method=method, regions=0, notes=notes
    )


def judged(state, sample, pilot: Pilot, regions: Regions, target_cov, level) -> RareEstimate:
    """The estimate of a final sample, with notes on whatever speaks against it.

    An estimate well above the pilot's is no reason to doubt: then the pilot missed a region that the mixture holds.
    """
    value, cov = float(sample.weights.mean()), variation(sample.weights)
    effective, shape = effective_sample_size(sample.weights), sample.shape
    lean = skewness(sample.weights) / np.sqrt(sample.weights.size)
    low, high = log_interval(value, cov, effective - 1, level, lean, shape)
    doubts = {
        f"the target was not reached: coefficient of variation {cov:.2g}": cov > MISSED * target_cov,
        f"few effective samples: {effective:.0f}": effective < FEWEST_EFFECTIVE,
        f"the largest weights are too large to be averaged: Pareto shape {shape:.2f}": shape > UNRELIABLE_SHAPE,
        "the search for failure regions was not finished": regions.lost or not (regions.complete or regions.continuous),
        BELOW_PILOT: pilot.reached and well_below(value, cov, pilot),
    }
    return RareEstimate(
        value=value,
        low=low,
        high=high,
        level=level,
        calls=state.calls,
        cov=cov,
        method="mixture importance sampling",
        regions=len(regions.distances),
        notes=tuple(doubt for doubt, holds in doubts.items() if holds),
    )


def well_below(value, cov, pilot) -> bool:
    """Whether an estimate lies so far below a pilot's that chance does not explain it."""
    return np.log(value) - pilot.log_probability < -DISAGREEMENT * np.hypot(cov, pilot.log_error)


def unclear(regions: Regions, sample) -> bool:
    """Whether the failures are no countable set of plane regions, going by the search or by the largest weights."""
    return regions.continuous or sample.shape > UNCLEAR_SHAPE


def second_opinion(state, random, estimate: RareEstimate) -> RareEstimate:
    """An estimate that a larger pilot has cleared or doubts; noted as unchecked where calls do not last for one."""
    if state.left < SECOND_SIZE * levels_to(estimate.value):
        return replace(estimate, notes=estimate.notes or (UNCHECKED,))
    pilot = subset_simulation(state, random, SECOND_SIZE)
    below = well_below(estimate.value, estimate.cov, pilot) if pilot.reached else bool(estimate.notes)
    return replace(estimate, calls=state.calls, notes=(BELOW_PILOT,) if below else ())


def levels_to(probability) -> float:
    """Calls per point of a level that subset simulation needs down to a probability, two levels in hand."""
    return 1 + (1 - CONDITIONAL) * (max(1.0, np.log(probability) / np.log(CONDITIONAL)) + 2)


def pilot_alone(state, random, pilot: Pilot, target_cov, level) -> RareEstimate:
    """What is left when the mixture met no failure or no calls remain: the pilot's estimate, or plain counting."""
    if not pilot.reached:
        return counted(state, random, state.left, target_cov, level)
    value = float(np.exp(pilot.log_probability))
    low, high = log_interval(value, pilot.log_error, FEW_DEGREES, level)
    return RareEstimate(
        value=value,
        low=low,
        high=high,
        level=level,
        calls=state.calls,
        cov=pilot.log_error,
        method="subset simulation",
        regions=0,
        notes=("the calls did not suffice for more than a pilot",),
    )


def last_resort(state, random, estimate: RareEstimate, pilot: Pilot) -> RareEstimate:
    """A doubtful estimate with the interval widened to hold that of the largest pilot that the calls allow.

    The value is that pilot's where the weights are in doubt, and stays where they are only fewer than was asked for.
    """
    if all(note.startswith("the target") or note == UNCHECKED for note in estimate.notes) or not pilot.reached:
        return estimate
    size = int(state.left / levels_to(np.exp(pilot.log_probability)))
    if size < LEAST_LEVEL:
        return joined(estimate, pilot, state.calls)
    second = subset_simulation(state, random, size)
    if not second.reached:  # flat away from failure
        return joined(estimate, pilot, state.calls)
    return replace(
        joined(estimate, second, state.calls),
        value=float(np.exp(second.log_probability)),
        cov=second.log_error,
        method="subset simulation, interval joined with that of mixture importance sampling",
    )


def joined(estimate: RareEstimate, pilot: Pilot, calls) -> RareEstimate:
    """An estimate whose interval is widened to hold a pilot's."""
    low, high = log_interval(np.exp(pilot.log_probability), pilot.log_error, FEW_DEGREES, estimate.level)
    return replace(estimate, low=min(low, estimate.low), high=max(high, estimate.high), calls=calls)
