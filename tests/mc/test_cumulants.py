"""Cumulants of products from one input at a time: exact for products, and by how much others are missed."""

import numpy as np
import pytest

from mc.cumulants import Interaction, measured_interaction, normal_nodes, product_cumulants, standardise
from mc.streams import Streams

ZERO = np.zeros(1)  # models here have one "die", so their shape is (1,)
PARTS = 40  # independent parts of a brute-force sample, whose scatter gives its standard error


def test_nodes_are_exact_for_polynomials():
    nodes, weights = normal_nodes(12)
    # normal moments 1, 3, 15, ... and none for odd powers, up to degree 23
    moment = 1.0
    for power in range(2, 24, 2):
        moment *= power - 1
        assert weights @ nodes**power == pytest.approx(moment, rel=1e-11)
    assert abs(weights @ nodes**7) < 1e-10


def cumulants_of_lognormal(median, log_sigma):
    """Exact cumulants of a lognormal law (derived, in deviations so that nothing cancels)."""
    mean, growth = median * np.exp(log_sigma**2 / 2), np.exp(log_sigma**2)
    variance = np.expm1(log_sigma**2)
    excess = growth**4 + 2 * growth**3 + 3 * growth**2 - 6
    return [mean, mean**2 * variance, mean**3 * (growth + 2) * variance**2, mean**4 * excess * variance**2]


def assert_exact(cumulants, exact, scale, relative=1e-9):
    """Equal but for rounding: raw moments of a ratio near one, up to six times one each, leave some 1e-14."""
    rounding = 1e-14 * scale ** np.arange(1, 5)
    assert np.all(np.abs(cumulants - exact) <= relative * np.abs(exact) + rounding)


def exponential(draws):
    """A product of lognormal factors: its logarithm is additive."""
    a, b, c = (draws.get(name, ZERO) for name in "abc")
    return 3e-10 * np.exp(0.05 * a - 0.04 * b + 0.03 * c)


def test_lognormal_products_are_exact():
    exact = cumulants_of_lognormal(3e-10, np.sqrt(0.05**2 + 0.04**2 + 0.03**2))
    assert_exact(product_cumulants(exponential, "abc")[:, 0], exact, 3e-10)


def test_only_the_named_inputs_vary():
    assert_exact(product_cumulants(exponential, "b")[:, 0], cumulants_of_lognormal(3e-10, 0.04), 3e-10)
    assert product_cumulants(exponential, "")[:, 0].tolist() == [3e-10, 0, 0, 0]


def test_order_of_names_does_not_matter():
    assert_exact(product_cumulants(exponential, "cab")[:, 0], product_cumulants(exponential, "abc")[:, 0], 3e-10)


def test_one_answer_for_every_die():
    log_sigmas = np.array([0.03, 0.1, 0.2, 0.3])

    def model(draws):
        return (1 + log_sigmas) * np.exp(log_sigmas * draws.get("a", 0.0))

    cumulants = product_cumulants(model, ["a"])
    assert cumulants.shape == (4, 4)
    for die, log_sigma in enumerate(log_sigmas):
        exact = cumulants_of_lognormal(1 + log_sigma, log_sigma)
        # 12 nodes are not quite enough for exp(4 * 0.3 z)
        assert_exact(cumulants[:, die], exact, 1 + log_sigma, relative=1e-8)


def product(draws):
    """Two linear factors."""
    a, b = (draws.get(name, ZERO) for name in "ab")
    return (1 + 0.1 * a) * (1 + 0.2 * b)


def test_product_of_linear_factors_is_exact():
    # (1 + x)(1 + y), x and y normal of variance s and t. Derived by counting the normal moments of x + y + x y:
    # variance s + t + s t, third 6 s t, fourth cumulant 12 s t (s + t) + 6 (s t)^2 beyond what the variance explains.
    s, t = 0.1**2, 0.2**2
    exact = [1, s + t + s * t, 6 * s * t, 12 * s * t * (s + t) + 6 * (s * t) ** 2]
    assert product_cumulants(product, "ab")[:, 0] == pytest.approx(exact, rel=1e-10)


def additive(draws):
    """A sum, which is not a product: 1 + x + y."""
    a, b = (draws.get(name, ZERO) for name in "ab")
    return 1 + 0.1 * a + 0.2 * b


def curved(draws):
    """Mildly curved, neither sum nor product; about a delay's shape."""
    a, b = (draws.get(name, ZERO) for name in "ab")
    return np.exp(0.05 * b) / (1.5 + 0.1 * a + 0.05 * b) + 0.1 * np.exp(0.2 * a)


def sampled(statistic, count=2_000_000):
    """A statistic of brute-force draws: mean over independent parts, and standard error."""
    parts = [statistic(Streams(8, block, "ab").take(count // PARTS)) for block in range(PARTS)]
    return np.mean(parts, axis=0), np.std(parts, axis=0, ddof=1) / np.sqrt(PARTS)


def sample_cumulants(values):
    """First four cumulants of a sample."""
    centered = values - values.mean()
    second = np.mean(centered**2)
    return np.array([values.mean(), second, np.mean(centered**3), np.mean(centered**4) - 3 * second**2])


def test_what_the_product_form_makes_of_a_sum():
    # it adds the interaction of two linear factors that a sum has not: s t in the variance, 6 s t in the third cumulant
    s, t = 0.1**2, 0.2**2
    assert product_cumulants(additive, "ab")[:3, 0] == pytest.approx([1, s + t + s * t, 6 * s * t], rel=1e-10)


def test_measured_interaction_of_a_sum():
    # derived: the mean is right, the variance was 1 + s t/(s + t) = 1.008 times too large, and all skew and excess are
    # the product form's own
    s, t = 0.1**2, 0.2**2
    _, _, skew, excess = standardise(product_cumulants(additive, "ab"))
    measured, errors = sampled(lambda draws: measured_interaction(additive, draws))
    # a ratio's bias in a part is about the square of its own relative error: far below the mean's error
    exact = [1, (s + t) / (s + t + s * t), -skew[0], -excess[0]]
    assert np.all(np.abs(measured - exact) < 5 * errors)


@pytest.mark.parametrize("model", [exponential, product])
def test_a_product_has_no_interaction(model):
    measured = measured_interaction(model, Streams(8, 0, "ab").take(1000))
    assert measured == pytest.approx((1, 1, 0, 0), abs=1e-9)


def test_no_interaction_changes_nothing():
    cumulants = product_cumulants(product, "ab")
    assert Interaction().applied(cumulants) == pytest.approx(cumulants, rel=1e-14)


def test_an_interaction_is_applied_to_every_die():
    cumulants = np.array([[1.0, 2.0], [0.5, 4.0], [0.1, 1.0], [0.2, 3.0]])
    before, after = (
        np.array(standardise(values)) for values in (cumulants, Interaction(1.1, 0.81, 0.3, -0.2).applied(cumulants))
    )
    expected = np.array([before[0] * 1.1, before[1] * 0.9, before[2] + 0.3, before[3] - 0.2])
    assert after == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("model", [exponential, product])
def test_products_against_brute_force(model):
    brute, errors = sampled(lambda draws: sample_cumulants(model(draws)))
    # a part is short of a few in its 50 000 samples of each cumulant: a fiftieth of the errors
    assert np.all(np.abs(brute - product_cumulants(model, "ab")[:, 0]) < 5 * errors)


def test_curved_model_against_brute_force():
    brute, errors = sampled(lambda draws: standardise(sample_cumulants(curved(draws))))
    alone = product_cumulants(curved, "ab")
    measured, measured_errors = sampled(lambda draws: measured_interaction(curved, draws))
    corrected = np.array(standardise(Interaction(*measured).applied(alone)))[:, 0]
    # the product form alone misses the skew by more than 15 standard errors; corrected, nothing is missed
    assert abs(brute[2] - standardise(alone)[2][0]) > 15 * errors[2]
    scale = np.array([corrected[0], corrected[1] / 2, 1, 1])  # a variance's relative error is twice a sigma's
    assert np.all(np.abs(brute - corrected) < 5 * (errors + scale * measured_errors))
    # "the draws are shared, so the error is far below that of a cumulant itself"
    assert np.all(scale * measured_errors < 0.25 * errors)


def test_standardise():
    mean, sigma, skew, excess = standardise(np.array([3.0, 4.0, 8.0, 48.0]))
    assert (mean, sigma, skew, excess) == (3.0, 2.0, 1.0, 3.0)
