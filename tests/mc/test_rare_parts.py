"""Parts of the rare-event estimator: mixture, diagnostics, pilots, search."""

import numpy as np
import pytest
from scipy import stats

from mc.rare_calls import CountedLimitState
from mc.rare_descent import descent, inflated, mean_beyond
from mc.rare_diagnostics import effective_sample_size, log_interval, pareto_shape, skewness, tail_shape, variation
from mc.rare_mixture import WIDE, Mixture, further_axes, log_normal, refitted, reweighted, second_moment
from mc.rare_pilot import annealing, next_threshold, subset_simulation
from mc.rare_regions import Regions, find_regions, is_connected, is_round
from mc.rare_sampling import Sample, combined
from mc.rare_walks import plane_at


def mixture(dimension=3):
    """Two components: one narrow along a slanted normal and along a second axis, one alike in all directions."""
    normal = np.ones(dimension) / np.sqrt(dimension)
    ours = Mixture.of(
        weights=np.array([0.7, 0.3]),
        centers=np.array([4 * normal, np.zeros(dimension)]),
        normals=np.array([normal, np.zeros(dimension)]),
        along=np.array([0.3, 1.4]),
        across=np.array([1.2, 1.4]),
    )
    second = np.eye(dimension)[0] - np.eye(dimension)[1]
    ours.axes[0, 1], ours.along[0, 1] = second / np.sqrt(2), 0.5
    return ours


def test_density_is_that_of_the_normals_it_is_made_of():
    ours, points = mixture(), np.random.default_rng(0).standard_normal((50, 3)) * 2
    expected = np.zeros(50)
    for k in range(2):
        for share, along in ((1 - WIDE, ours.along[k]), (WIDE, np.full(3, max(ours.across[k], 1.0)))):
            covariance = ours.across[k] ** 2 * np.eye(3)
            for axis, spread in zip(ours.axes[k], along, strict=True):
                covariance += (spread**2 - ours.across[k] ** 2) * np.outer(axis, axis)
            expected += ours.weights[k] * share * stats.multivariate_normal(ours.centers[k], covariance).pdf(points)
    assert np.exp(ours.log_density(points)) * (2 * np.pi) ** -1.5 == pytest.approx(expected, rel=1e-9, abs=0)


def test_draws_have_the_density():
    """Weights of the standard normal over a mixture that holds it average to one, within four standard errors."""
    ours = mixture()
    points = ours.draw(np.random.default_rng(1), 200_000)
    weights = np.exp(log_normal(points) - ours.log_density(points))
    assert weights.mean() == pytest.approx(1, abs=4 * weights.std() / np.sqrt(200_000))
    assert points.mean(axis=0) == pytest.approx(0.7 * 4 / np.sqrt(3) * np.ones(3), abs=0.03)


def test_refits_lower_the_second_moment():
    random, start = np.random.default_rng(2), mixture()
    points = start.draw(random, 4000)
    failures = points[points.sum(axis=1) / np.sqrt(3) > 4.5]
    scores = np.exp(log_normal(failures) - start.log_density(failures)) / 4000
    assert scores.sum() == pytest.approx(stats.norm.sf(4.5), rel=0.2)
    before = second_moment(start, failures, scores)
    again = reweighted(start, failures, scores, start.weights)
    moved = reweighted(refitted(start, failures, scores), failures, scores, start.weights)
    assert second_moment(again, failures, scores) < before
    assert second_moment(moved, failures, scores) < before
    assert moved.weights.sum() == pytest.approx(1)
    assert moved.weights.min() > 0.19 * start.weights.min()


@pytest.mark.parametrize("shape", [0.1, 0.5, 0.9])
def test_pareto_shape(shape):
    """Found within three times its asymptotic error (1 + shape)/sqrt(n); the prior pulls ten in 2000."""
    excesses = stats.genpareto.rvs(shape, size=2000, random_state=3)
    assert pareto_shape(excesses) == pytest.approx(shape, abs=3 * (1 + shape) / np.sqrt(2000))


def test_tail_shape_of_extremes():
    assert tail_shape(np.ones(100)) == -np.inf
    assert tail_shape(np.ones(10)) == np.inf
    found = [tail_shape(stats.pareto.rvs(1.0, size=4000, random_state=seed)) for seed in range(20)]
    assert np.mean(found) == pytest.approx(0.97, abs=0.15)  # one, less the prior's pull of ten in 190


def test_effective_size_and_variation():
    assert effective_sample_size(np.ones(7)) == 7
    assert effective_sample_size(np.zeros(7)) == 0
    assert variation(np.zeros(5)) == np.inf
    weights = np.array([0.0, 1.0, 0.0, 3.0])
    assert variation(weights) == pytest.approx(weights.std(ddof=1) / 2)
    assert skewness(np.ones(4)) == 0
    assert skewness(np.array([0.0, 0, 0, 1])) == pytest.approx(stats.skew([0.0, 0, 0, 1]))


def test_log_interval():
    low, high = log_interval(1e-6, 0.1, 1e9, 0.95)
    assert np.sqrt(low * high) == pytest.approx(1e-6, abs=0)
    assert np.log(high / low) == pytest.approx(2 * 1.959964 * np.sqrt(np.log1p(0.01)), rel=1e-5)
    assert log_interval(1e-6, 0.1, 1e9, 0.95, lean=0.5)[1] > high
    assert log_interval(0.9, 1.0, 5, 0.95)[1] == 1.0
    heavy = log_interval(1e-6, 0.1, 1e9, 0.95, shape=0.5)
    assert heavy[0] < low and heavy[1] > high
    assert log_interval(1e-6, 0.1, 1e9, 0.95, shape=-np.inf) == (low, high)


def test_thresholds_step_over_plateaus():
    assert next_threshold(np.arange(100.0)) == 9
    assert next_threshold(np.append(np.ones(95), [0.0, 0.2, 0.3, 0.4, 0.5])) == 0.5
    assert next_threshold(np.ones(50)) is None


@pytest.mark.parametrize("pilot, flat", [(subset_simulation, False), (annealing, False), (annealing, True)])
def test_pilots_are_right_on_average(pilot, flat):
    """The mean over 30 runs, within four standard errors as the runs themselves show them."""

    def limit_state(points):
        margin = 4 - points @ np.full(8, 8**-0.5)
        return np.where(margin <= 0, -1.0, 1.0) if flat else margin

    found = []
    for seed in range(30):
        run = pilot(CountedLimitState(limit_state, 8, 100_000), np.random.default_rng(seed), 400)
        assert run.reached
        assert (limit_state(run.failures) <= 0).all()
        found.append(np.exp(run.log_probability) / stats.norm.sf(4))
    assert np.mean(found) == pytest.approx(1, abs=4 * np.std(found) / np.sqrt(30))


def test_pilots_that_cannot_arrive_say_so():
    for pilot in (subset_simulation, annealing):
        run = pilot(CountedLimitState(lambda points: np.ones(len(points)), 4, 10_000), np.random.default_rng(0), 300)
        assert not run.reached
        assert run.failures.shape == (0, 4)


def test_search_finds_every_region_and_its_distance():
    normals = np.linalg.qr(np.random.default_rng(5).standard_normal((15, 15)))[0][:7]
    distances, units = np.linspace(4.5, 5, 7), 10.0 ** np.arange(-3, 4)
    state = CountedLimitState(lambda points: ((distances - points @ normals.T) * units).min(axis=1), 15, 50_000)
    regions = find_regions(state, np.random.default_rng(0), Regions.none(15), np.empty((0, 15)), np.log(1e-5), 10_000)
    assert regions.complete and not regions.continuous
    cosines = normals @ regions.normals.T
    assert cosines.max(axis=1).min() > 0.97
    assert regions.distances[cosines.argmax(axis=1)] == pytest.approx(distances, rel=0.04)


def test_a_sphere_is_one_curved_set():
    state = CountedLimitState(lambda points: 40 - (points**2).sum(axis=1), 6, 50_000)
    none = Regions.none(6)
    assert find_regions(state, np.random.default_rng(0), none, np.empty((0, 6)), np.log(1e-6), 10_000).continuous


def test_regions_explain_what_they_hold():
    regions = Regions.none(2).joined_by(np.array([4.0, 0.0]))
    points = np.array([[4.1, 9.0], [3.7, 0.0], [0.0, 9.0]])
    assert regions.contain(points).tolist() == [True, False, False]
    assert regions.explain(points).tolist() == [True, True, False]
    assert regions.knows(np.array([5.0, 0.1])) and not regions.knows(np.array([0.0, 5.0]))
    assert regions.matters(np.array([5.0, 0.0])) and not regions.matters(np.array([9.0, 0.0]))


def yes_or_no(normal, distance):
    """A limit state that tells no more than whether a half-space is reached."""
    return lambda points: np.where(points @ normal >= distance, -1.0, 1.0)


@pytest.mark.parametrize("dimension", [5, 30, 100])
def test_descent_finds_a_direction_by_yes_or_no_alone(dimension):
    """To within the sideways error of one sigma at the distance that it promises, and half as much again."""
    normal = np.ones(dimension) / np.sqrt(dimension)
    state, random = CountedLimitState(yes_or_no(normal, 4.75), dimension, 20_000), np.random.default_rng(0)
    failures, spread = inflated(state, random)
    found = descent(state, random, failures, spread)
    assert found.compact
    assert np.arccos(found.normal @ normal) * 4.75 < 1.5
    assert found.distance == pytest.approx(4.75, abs=0.4)
    assert state.calls < 6000


def test_descent_outside_of_known_regions_finds_the_other_or_nothing():
    def limit_state(points):
        return np.where(np.abs(points[:, 0]) >= 4.75, -1.0, 1.0)

    known = Regions.none(6).joined_by(np.array([4.75, 0, 0, 0, 0, 0]))
    state, random = CountedLimitState(limit_state, 6, 20_000), np.random.default_rng(1)
    start = np.array([[-6.0, 1.0, -1.0, 0.5, 2.0, 0.0]])
    assert descent(state, random, start, 2.5, known_regions=known).normal[0] < -0.9
    assert descent(state, random, start, 2.5, known_regions=known.joined_by(-known.normals[0] * 4.75)) is None


def test_mean_beyond_a_distance():
    assert mean_beyond(4.0) == pytest.approx(stats.truncnorm.mean(4.0, np.inf), rel=1e-6)
    assert mean_beyond(0.0) == pytest.approx(np.sqrt(2 / np.pi))


def test_connected_round_and_plane():
    random, plane = np.random.default_rng(2), CountedLimitState(lambda points: 4 - points[:, 0], 5, 10_000)
    region = Regions.none(5).joined_by(np.array([4.0, 0, 0, 0, 0]))
    assert is_connected(plane, region, np.array([5.0, 3.0, 0, 0, 0]))
    found, ragged = plane_at(plane, random, np.array([5.0, 3.0, 0, 0, 0]))
    assert not ragged and found == pytest.approx([4.0, 0, 0, 0, 0], abs=0.2)
    both = CountedLimitState(lambda points: 4 - np.abs(points[:, 0]), 5, 10_000)
    assert not is_connected(both, region, np.array([-5.0, 3.0, 0, 0, 0]))
    sphere = CountedLimitState(lambda points: 40 - (points**2).sum(axis=1), 5, 10_000)
    assert is_round(sphere, random, np.full((1, 5), 3.0)) and not is_round(plane, random, np.full((1, 5), 3.0))


def test_further_axes_are_those_that_chance_does_not_explain():
    random, normal = np.random.default_rng(3), np.eye(6)[0]
    points = random.standard_normal((400, 6))
    assert not len(further_axes(points.T @ points / 400, normal, 400, 3)[0])
    points[:, 2] *= 0.2
    axes, variances = further_axes(points.T @ points / 400, normal, 400, 3)
    assert len(axes) == 1 and abs(axes[0, 2]) > 0.99
    assert variances[0] == pytest.approx(0.04, rel=0.6)
    assert not len(further_axes(points.T @ points / 400, normal, 8, 3)[0])  # eight points tell nothing


def test_combined_samples_are_one_sample_of_both_mixtures():
    state, random = CountedLimitState(lambda points: 4 - points[:, 0], 3, 100_000), np.random.default_rng(4)
    finals = [Sample.drawn(state, random, Mixture.single(np.array([at, 0, 0])), 4000) for at in (3.0, 4.5)]
    whole = combined(finals)
    assert whole.weights.size == 8000
    assert whole.weights.mean() == pytest.approx(stats.norm.sf(4), abs=4 * variation(whole.weights) * stats.norm.sf(4))
    assert variation(whole.weights) < variation(finals[0].weights)


def test_mirror_images_of_regions_are_found_with_two_calls_each():
    normals = np.linalg.qr(np.random.default_rng(5).standard_normal((20, 20)))[0][:5]
    state = CountedLimitState(lambda points: 4.5 - np.abs(points @ normals.T).max(axis=1), 20, 50_000)
    none = Regions.none(20)
    regions = find_regions(state, np.random.default_rng(0), none, np.empty((0, 20)), np.log(1e-5), 10_000)
    assert regions.complete and len(regions.distances) == 10
    assert state.calls < 2500
