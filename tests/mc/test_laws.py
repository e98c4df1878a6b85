"""Every law against scipy's quantile function, and what it refuses."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats
from scipy.integrate import quad

from mc.laws import Empirical, Lognormal, Normal, TruncatedNormal, Uniform

LOG_SIGMA = np.sqrt(np.log1p(0.3**2))
MEASURED = (0.35, 0.41, 0.38, 0.52, 0.33, 0.41, 0.47)

# a law of ours, and scipy's frozen twin
TWINS = {
    "normal": (Normal(mean=2.0, sigma=0.5), stats.norm(2.0, 0.5)),
    "lognormal": (
        Lognormal(mean=2.0, sigma=0.6),
        stats.lognorm(LOG_SIGMA, scale=2.0 * np.exp(-(LOG_SIGMA**2) / 2)),
    ),
    "moved lognormal": (
        Lognormal(mean=2.0, sigma=0.6, shift=-1.5),
        stats.lognorm(LOG_SIGMA, scale=2.0 * np.exp(-(LOG_SIGMA**2) / 2), loc=-1.5),
    ),
    "normal about zero": (Normal(sigma=3.0), stats.norm(0.0, 3.0)),
    "truncated": (TruncatedNormal(mean=2.0, sigma=0.5, cut=1.5), stats.truncnorm(-1.5, 1.5, loc=2.0, scale=0.5)),
    "barely truncated": (TruncatedNormal(sigma=1.0, cut=4.0), stats.truncnorm(-4.0, 4.0)),
    "uniform": (Uniform(low=-1.0, high=3.0), stats.uniform(-1.0, 4.0)),
}


@pytest.mark.parametrize("law, twin", TWINS.values(), ids=TWINS)
def test_quantile_function(law, twin):
    scores = np.linspace(-7, 7, 141)
    lower, upper = twin.ppf(stats.norm.cdf(scores)), twin.isf(stats.norm.sf(scores))
    # scipy's ppf loses digits in the upper tail and its isf in the lower one
    assert law.from_normal(scores) == pytest.approx(np.where(scores < 0, lower, upper), rel=1e-9, abs=1e-9)


@pytest.mark.parametrize("law, twin", TWINS.values(), ids=TWINS)
def test_mean_and_sigma(law, twin):
    def moment(power):
        return quad(lambda z: law.from_normal(z) ** power * stats.norm.pdf(z), -10, 10, epsabs=1e-12, limit=200)[0]

    assert moment(1) == pytest.approx(twin.mean(), abs=1e-9)
    assert moment(2) - moment(1) ** 2 == pytest.approx(twin.var(), abs=1e-8)


def test_lognormal_keeps_its_own_mean_and_sigma():
    twin = TWINS["lognormal"][1]
    assert (twin.mean(), twin.std()) == pytest.approx((2.0, 0.6), rel=1e-12)


def test_empirical_runs_linearly_through_the_sample():
    scores = np.linspace(-4, 4, 81)
    # numpy's "hazen" puts value k of n at (k - 1/2)/n
    twin = np.quantile(MEASURED, stats.norm.cdf(scores), method="hazen")
    assert Empirical(values=MEASURED).from_normal(scores) == pytest.approx(twin, rel=1e-12)


def test_empirical_does_not_reach_beyond_its_sample():
    ends = Empirical(values=MEASURED).from_normal(np.array([-8.0, 8.0]))
    assert tuple(ends) == (min(MEASURED), max(MEASURED))


def test_truncated_normal_without_a_cut_is_normal():
    scores = np.linspace(-8, 8, 33)
    assert TruncatedNormal(sigma=2.0, cut=np.inf).from_normal(scores) == pytest.approx(2 * scores, rel=1e-12)


def test_truncated_normal_stays_inside_its_cut():
    far = TruncatedNormal(mean=1.0, sigma=2.0, cut=3.0).from_normal(np.array([-40.0, -9.0, 9.0, 40.0]))
    assert far == pytest.approx([-5, -5, 7, 7], abs=1e-12)


@pytest.mark.parametrize(
    "law", [Normal(mean=3.0, sigma=0.0), Lognormal(mean=3.0, sigma=0.0), Uniform(low=3.0, high=3.0)], ids=str
)
def test_no_spread_is_allowed(law):
    assert np.all(law.from_normal(np.array([-3.0, 0.0, 3.0])) == 3.0)


@pytest.mark.parametrize(
    "make, arguments, message",
    [
        (Normal, {"sigma": -1.0}, "sigma >= 0"),
        (Normal, {"sigma": np.nan}, "sigma >= 0"),
        (Normal, {"sigma": np.inf}, "sigma >= 0"),
        (Normal, {"mean": np.nan, "sigma": 1.0}, "finite mean"),
        (Lognormal, {"mean": 0.0, "sigma": 1.0}, "mean > 0"),
        (Lognormal, {"mean": -2.0, "sigma": 1.0}, "mean > 0"),
        (Lognormal, {"mean": 1.0, "sigma": -0.1}, "sigma >= 0"),
        (TruncatedNormal, {"sigma": -1.0, "cut": 2.0}, "sigma >= 0"),
        (TruncatedNormal, {"sigma": 1.0, "cut": 0.0}, "cut > 0"),
        (TruncatedNormal, {"sigma": 1.0, "cut": np.nan}, "cut > 0"),
        (Uniform, {"low": 1.0, "high": 0.0}, "low <= high"),
        (Uniform, {"low": 0.0, "high": np.inf}, "finite"),
        (Uniform, {"low": np.nan, "high": 1.0}, "finite"),
        (Empirical, {"values": (1.0,)}, "two finite values"),
        (Empirical, {"values": (1.0, np.nan)}, "two finite values"),
    ],
)
def test_nonsense_is_refused(make, arguments, message):
    with pytest.raises(ValueError, match=message):
        make(**arguments)


def test_laws_are_frozen_and_keyword_only():
    with pytest.raises(AttributeError):
        Normal(sigma=1.0).sigma = 2.0
    with pytest.raises(TypeError):
        Normal(0.0, 1.0)


sizes = st.floats(0.01, 100.0)
centers = st.floats(-100.0, 100.0)
laws = st.one_of(
    st.builds(Normal, mean=centers, sigma=sizes),
    st.builds(Lognormal, mean=sizes, sigma=sizes),
    st.builds(TruncatedNormal, mean=centers, sigma=sizes, cut=st.floats(0.1, 8.0)),
    st.builds(lambda low, span: Uniform(low=low, high=low + span), centers, sizes),
    st.builds(Empirical, values=st.lists(centers, min_size=2, max_size=30).map(tuple)),
)


@settings(deadline=None, derandomize=True, max_examples=200)
@given(law=laws, scores=st.lists(st.floats(-30, 30), min_size=2, max_size=20))
def test_laws_never_fall(law, scores):
    values = law.from_normal(np.sort(scores))
    assert np.all(np.isfinite(values))
    # equal neighbours may differ by a rounding of their own size
    assert np.all(np.diff(values) >= -1e-13 * (1 + np.abs(values[1:])))
