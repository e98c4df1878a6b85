"""The estimator of rare events against limit states with exact answers, and against what it may not do."""

from pathlib import Path
from runpy import run_path

import numpy as np
import pytest
from scipy import integrate, stats

from mc.intervals import fraction_exact
from mc.rare import failure_probability
from physics.counted import CountedLaw

SCRIPT = run_path(str(Path(__file__).parents[2] / "notebooks_free_scripts" / "05_rare_events.py"))
SEEDS = range(4)

DEMANDED = [SCRIPT["linear"](dimension, distance) for dimension in (2, 10, 40, 100) for distance in (3.0, 4.5, 6.0)] + [
    SCRIPT["separate"](12, 24, 6.2),
    SCRIPT["symmetric"](20, 24, 5.4),
    SCRIPT["sum_of_squares"](5, 1e-6),
    SCRIPT["yes_or_no"](40, 4.75),
    SCRIPT["yes_or_no"](100, 4.75),
    SCRIPT["symmetric"](40, 40, 5.58),
    SCRIPT["corner"](2, 30, 1e-6),
    SCRIPT["sphere_and_plane"](10, 1e-6),
]
CALLS = {"linear": 6000, "regions": 8000, "yes or no": 6000}  # allowed in the median, where a bound is set


def named(case):
    """A case's own name and size."""
    return f"{case[0]}, {case[2]} inputs"


def counted_dopants():
    """Sum of the scatter of two devices of 40 dopants, against the convolution of the law with itself."""
    law = CountedLaw.build(40.0, lambda weight: np.ones_like(weight))
    most = 7.5  # sigmas of one device
    grid = np.linspace(-8.5, 12, 20_001)
    values = law.standardised(grid, 40.0)

    def beyond(normal):
        """Density of one device's normal times the chance that the other makes up for the rest."""
        rest = most - law.standardised(normal, 40.0)
        return stats.norm.pdf(normal) * stats.norm.sf(np.interp(rest, values, grid))

    probability = integrate.trapezoid(beyond(grid), grid)
    # sums of two are the law of twice the count: a second reference, good to the table's interpolation
    twin = CountedLaw.build(80.0, lambda weight: np.ones_like(weight))
    assert probability == pytest.approx(
        stats.norm.sf(np.interp(most / np.sqrt(2), twin.standardised(grid, 80.0), grid)), rel=0.01, abs=0
    )
    return (
        "counted dopants",
        lambda points: most - law.standardised(points[:, :2], 40.0).sum(axis=1),
        5,
        probability,
    )


@pytest.mark.parametrize("case", [*SCRIPT["CASES"], *DEMANDED, counted_dopants()], ids=named)
def test_known_answers(case):
    name, limit_state, dimension, probability = case
    runs = [failure_probability(limit_state, dimension, seed=seed) for seed in SEEDS]
    sure = [run for run in runs if not run.flagged]
    assert len(sure) >= len(SEEDS) - 1
    for run in sure:
        assert 0.5 < run.value / probability < 2
        # four of their own standard errors; at 10 % the logarithm is as good as normal
        assert abs(np.log(run.value / probability)) < 4 * run.cov
        assert run.low < run.value < run.high
        assert run.cov <= 0.13
    for run in runs:
        assert run.low / 1.2 <= probability <= run.high * 1.2
        assert run.calls <= 50_000
    for word, most in CALLS.items():
        if (
            word in name
            and dimension <= 40
            and "20 regions" not in name
            and "40 regions" not in name
            and "80 regions" not in name
        ):
            assert np.median([run.calls for run in runs]) <= most


def test_coverage_over_many_seeds():
    """Of 100 intervals 95 hold, give or take three standard errors of 2.2."""
    _, limit_state, dimension, probability = SCRIPT["separate"](3, 8, 4.5)
    runs = [failure_probability(limit_state, dimension, seed=seed) for seed in range(100)]
    assert sum(run.low <= probability <= run.high for run in runs if not run.flagged) >= 88
    assert sum(run.flagged for run in runs) <= 5


def test_several_regions_by_yes_or_no_in_many_dimensions_are_flagged():
    """One of them may hide from a search that hears no more than yes or no: that is said."""
    _, limit_state, dimension, _ = SCRIPT["separate"](4, 30, 5.0)
    for seed in SEEDS:
        run = failure_probability(lambda points: np.sign(limit_state(points)), dimension, seed=seed)
        assert "the search for failure regions was not finished" in run.notes


def test_units_of_margins_do_not_matter():
    normals = SCRIPT["unit_vectors"](2, 10)

    def limit_state(unit):
        return lambda points: np.minimum(4.5 - points @ normals[0], unit * (4.6 - points @ normals[1]))

    truth = 1 - (1 - stats.norm.sf(4.5)) * (1 - stats.norm.sf(4.6))
    for unit in (1e-9, 1.0, 1e9):
        run = failure_probability(limit_state(unit), 10, seed=0)
        assert not run.flagged
        assert run.regions == 2
        assert abs(np.log(run.value / truth)) < 4 * run.cov


def test_noise_adds_to_the_spread():
    """A noisy limit state fails as one input more would make it fail."""
    noise = np.random.default_rng(0)
    run = failure_probability(
        lambda points: 4.75 * np.sqrt(1.04) - points[:, 0] + 0.2 * noise.standard_normal(len(points)), 10, seed=0
    )
    assert not run.flagged
    assert abs(np.log(run.value / stats.norm.sf(4.75))) < 4 * run.cov


@pytest.mark.parametrize("dimension", [1, 3, 100])
@pytest.mark.parametrize(
    "limit_state", [lambda points: np.ones(len(points)), lambda points: 1 + (points**2).sum(axis=1)]
)
def test_impossible_failure_has_an_upper_bound(limit_state, dimension):
    run = failure_probability(limit_state, dimension, seed=0, max_calls=10_000)
    assert (run.value, run.low, run.cov) == (0.0, 0.0, np.inf)
    assert 3e-4 < run.high < 1e-2
    assert run.flagged
    assert run.calls <= 10_000


@pytest.mark.parametrize("share", [0.04, 0.3, 0.97, 0.999])
def test_common_failure_is_counted(share):
    distance = -stats.norm.ppf(share)
    run = failure_probability(lambda points: distance - points[:, 0], 3, seed=1)
    assert run.method == "plain counting, exact binomial"
    assert run.low <= share <= run.high
    assert run.cov < 0.11
    assert not run.flagged


def test_counting_has_the_exact_interval():
    run = failure_probability(lambda points: -np.ones(len(points)), 1, seed=1)
    n = run.calls - 300  # after the pilot's first level
    assert (run.value, run.high, run.cov) == (1.0, 1.0, 0.0)
    assert run.low == pytest.approx(fraction_exact(n, n).low)


@pytest.mark.parametrize("most", [1000, 2000, 3000, 5000])
@pytest.mark.parametrize("case", [SCRIPT["separate"](12, 24, 6.2), SCRIPT["yes_or_no"](40, 4.75)], ids=named)
def test_too_few_calls_are_flagged_and_never_exceeded(case, most):
    _, limit_state, dimension, probability = case
    spent = []

    def metered(points):
        spent.append(len(points))
        return limit_state(points)

    for seed in range(3):
        spent.clear()
        run = failure_probability(metered, dimension, seed=seed, max_calls=most)
        assert run.calls == sum(spent) <= most
        assert run.low <= run.value <= run.high
        assert run.flagged or run.low <= probability <= run.high
        assert most > 2000 or run.flagged


def test_the_same_seed_gives_the_same_answer_and_zero_is_a_seed():
    _, limit_state, dimension, _ = SCRIPT["separate"](3, 8, 4.5)
    first, again, other = (failure_probability(limit_state, dimension, seed=seed) for seed in (0, 0, 1))
    assert first == again
    assert first != other


@pytest.mark.parametrize("value", [np.nan, np.inf, -np.inf])
def test_values_that_are_not_finite_are_refused(value):
    with pytest.raises(FloatingPointError, match="not finite at 1 points"):
        failure_probability(lambda points: np.append(np.ones(len(points) - 1), value), 3, seed=0)


def test_values_of_the_wrong_shape_are_refused():
    with pytest.raises(ValueError, match=r"returned shape \(300, 1\): \(300,\) is needed"):
        failure_probability(lambda points: points[:, :1], 3, seed=0)


@pytest.mark.parametrize(
    "given, text",
    [
        ({"dimension": 0}, "dimension 0"),
        ({"dimension": 2.0}, "dimension 2.0"),
        ({"seed": -1}, "seed -1"),
        ({"seed": True}, "seed True"),
        ({"max_calls": 999}, "max_calls 999: a whole number, 1000 or more"),
        ({"target_cov": 0.0}, "target_cov 0.0: a number between 0 and 1"),
        ({"level": 1.0}, "level 1.0"),
    ],
)
def test_nonsense_is_refused(given, text):
    arguments = {"dimension": 2, "seed": 0} | given
    with pytest.raises(ValueError, match=text):
        failure_probability(lambda points: np.ones(len(points)), arguments.pop("dimension"), **arguments)


def test_the_result_is_frozen():
    run = failure_probability(lambda points: -np.ones(len(points)), 1, seed=0)
    with pytest.raises(AttributeError):
        run.value = 0.5


def test_a_missed_region_is_noted():
    """A mixture that lost a region lies below its pilot: the estimate is not handed on as sure."""
    from mc.rare import well_below
    from mc.rare_pilot import Pilot

    pilot = Pilot(log_probability=np.log(1e-6), log_error=0.7, failures=np.empty((0, 2)), reached=True)
    assert well_below(1e-7, 0.1, pilot)
    assert not well_below(5e-7, 0.1, pilot)
    assert not well_below(1e-4, 0.1, pilot)


def test_tighter_targets_cost_more_and_deliver():
    _, limit_state, dimension, probability = SCRIPT["separate"](2, 8, 4.5)
    loose, tight = (failure_probability(limit_state, dimension, seed=0, target_cov=cov) for cov in (0.2, 0.02))
    assert tight.calls > loose.calls
    assert tight.cov < 0.03
    assert abs(np.log(tight.value / probability)) < 4 * tight.cov
