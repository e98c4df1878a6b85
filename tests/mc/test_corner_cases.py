"""Corner cases in which a number once came out wrong without a word: each must stay right, or be refused."""

import numpy as np
import pytest
from scipy import stats

from mc.correlation import Copula
from mc.cumulants import Interaction, measured_interaction, product_cumulants, score_from_value, standardise
from mc.experiment import Experiment, Inputs
from mc.intervals import Summary, bounded_mean, fraction_exact, fraction_wilson
from mc.laws import Lognormal, TruncatedNormal
from mc.plan import Block, Plan
from mc.runner import run
from mc.tally import Grid, Tally


@pytest.mark.filterwarnings("ignore::RuntimeWarning")
def test_a_rare_yes_that_the_pilot_did_not_see():
    values = np.zeros((1, 10_000))
    values[0, -10:] = 1.0
    summary = Summary(Tally.of(Grid.from_pilot(values[:, :4096]), [values]))
    assert summary.mean().value == pytest.approx(1e-3, rel=1e-9)
    assert summary.sigma().value == pytest.approx(values.std(ddof=1), rel=1e-9)
    assert np.isfinite(summary.sigma().high)


@pytest.mark.filterwarnings("ignore::RuntimeWarning")
def test_no_constant_has_a_negative_variance():
    for constant in np.random.default_rng(1).uniform(0.1, 10, 50):
        same = np.full((1, 8192), constant)
        summary = Summary(Tally.of(Grid.from_pilot(same[:, :4096]), [same, same, same]))
        assert summary.variance == 0.0
        assert summary.sigma().high == 0.0


def test_a_quantile_beyond_the_histogram_does_not_claim_to_be_sure():
    # lognormal, sigma 2 of the logarithm, as leakage may be: the 0.9999 quantile lies 30 sigmas out
    values = np.exp(2 * np.random.default_rng(1).standard_normal((1, 200_000)))
    quantile = Summary(Tally.of(Grid.from_pilot(values[:, :4096]), [values])).quantile(0.9999)
    assert quantile.low <= np.exp(2 * stats.norm.ppf(0.9999)) <= quantile.high


def test_tallies_of_different_grids_are_not_added():
    one, other = (Tally.of(Grid(center=np.zeros(1), scale=np.full(1, s)), [np.ones((1, 9))]) for s in (1.0, 2.0))
    with pytest.raises(ValueError):
        one + other


def constant_model(draws):
    """A model that forgot its draws."""
    return 1.0


def test_outputs_of_another_length_than_the_draws_are_refused():
    with pytest.raises(ValueError):
        Experiment.prepare(constant_model, Inputs(seed=0, names=("a",)))(Block(0, 100))


def test_no_seed_is_refused():
    with pytest.raises((TypeError, ValueError)):
        Inputs(seed=None, names=("a",))


def test_a_pair_given_twice_is_a_contradiction():
    with pytest.raises(ValueError):
        Copula.of_pairs([("a", "b", 0.5), ("b", "a", 0.3)])


@pytest.mark.parametrize("place", [np.nan, np.inf])
@pytest.mark.parametrize(
    "make, arguments, name",
    [(TruncatedNormal, {"sigma": 1.0, "cut": 2.0}, "mean"), (Lognormal, {"mean": 1.0, "sigma": 0.1}, "shift")],
)
def test_laws_need_a_finite_place(make, arguments, name, place):
    with pytest.raises(ValueError):
        make(**arguments, **{name: place})


def test_a_precision_without_its_measure_is_refused():
    with pytest.raises(ValueError):
        run(lambda block: 0, Plan(samples=100, block_size=10, precision=0.1))


def test_the_exact_interval_is_its_own_mirror():
    for successes, n in ((0, 10), (3, 10), (9990, 10_000)):
        few, many = fraction_exact(n - successes, n), fraction_exact(successes, n)
        assert many.low == pytest.approx(1 - few.high, abs=1e-15) and many.high == pytest.approx(1 - few.low, abs=1e-15)


def test_a_yield_is_the_complement_of_a_loss():
    losses = bounded_mean(0.3, 0.05, 1000)
    assert losses.complement().high == 1 - losses.low and losses.complement().low == 1 - losses.high


def test_wilson_limits_stay_between_zero_and_one():
    assert all(fraction_wilson(0, n).low >= 0 and fraction_wilson(n, n).high <= 1 for n in range(1, 200))


def test_score_is_monotone():
    places = np.linspace(0, 8, 801)
    assert np.all(np.diff(score_from_value(places, 0.0, 0.3)) >= 0)


def test_cumulants_of_a_scalar_model():
    assert product_cumulants(lambda draws: 1.0 + 0.1 * draws.get("a", 0.0), ["a"]) == pytest.approx([1, 0.01, 0, 0])


@pytest.mark.parametrize("spread", [3e-4, 1e-4, 1e-5])
def test_cumulants_of_a_product_that_hardly_varies(spread):
    def model(draws):
        return (1 + spread * draws.get("a", np.zeros(1))) * (1 + spread * draws.get("b", np.zeros(1)))

    _, sigma, skew, excess = standardise(product_cumulants(model, "ab"))
    assert sigma == pytest.approx(np.sqrt(2) * spread, rel=1e-6)
    assert skew == pytest.approx(6 * spread / 2**1.5, rel=0.01)
    assert abs(excess) < 1e-4


@pytest.mark.filterwarnings("ignore::RuntimeWarning")
@pytest.mark.parametrize("draws", [{}, {"a": np.linspace(-1, 1, 5)}], ids=["no inputs", "no effect"])
def test_nothing_that_varies_has_no_interaction(draws):
    assert measured_interaction(lambda draws: np.full(5, 3.0), draws) == Interaction()


def test_one_sample_sets_no_bound_on_sigma():
    sigma = Summary(Tally.of(Grid(center=np.zeros(1), scale=np.ones(1)), [np.ones((1, 1))])).sigma()
    assert (sigma.low, sigma.high) == (0.0, np.inf)
