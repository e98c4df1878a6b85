"""Mean and sigma with the help of a control of known law: right, narrower than without, and honest."""

import numpy as np
import pytest

from mc.control import FEWEST, METHOD, controlled
from mc.intervals import mean_interval, sigma_kurtosis_aware


def curved(random, n):
    """A control, and values that follow it by a bent line with uneven noise; their mean is 0.1."""
    control = random.standard_normal(n)
    noise = 0.35 * random.standard_normal(n) * (1 + 0.2 * control)
    return 0.1 + 1.1 * control + 0.1 * (control**2 - 1) + noise, control


SIGMA = np.sqrt(1.1**2 + 2 * 0.1**2 + 0.35**2 * (1 + 0.2**2))


@pytest.mark.parametrize("n, least", [(20, 0.88), (50, 0.91), (200, 0.91)])
def test_intervals_hold_the_truth(n, least):
    random, repeats, held = np.random.default_rng(2), 1000, np.zeros(2)
    for _ in range(repeats):
        mean, sigma = controlled(*curved(random, n), 1.0)
        held += mean.low <= 0.1 <= mean.high, sigma.low <= SIGMA <= sigma.high
    assert np.all(held >= least * repeats) and np.all(held <= 0.975 * repeats)


def test_both_are_narrower_than_without_the_control():
    values, control = curved(np.random.default_rng(3), 200)
    mean, sigma = controlled(values, control, 1.0)
    moved = values - values.mean()
    kurtosis = np.mean(moved**4) / np.mean(moved**2) ** 2
    alone = (
        mean_interval(values.mean(), values.var(ddof=1), 200),
        sigma_kurtosis_aware(values.var(ddof=1), kurtosis, 200),
    )
    for better, plain in zip((mean, sigma), alone):
        assert better.high - better.low < 0.6 * (plain.high - plain.low)
        assert (better.n, better.level, better.method) == (200, 0.95, METHOD)


def test_a_line_without_noise_is_known_exactly():
    control = np.array([-1.0, 0.5, 0.25, 2.0, 3.0])
    mean, sigma = controlled(7 + 2 * control, control, 1.5)
    assert mean.value == pytest.approx(7) and sigma.value == pytest.approx(3)
    assert mean.high - mean.low == pytest.approx(0, abs=1e-12) and sigma.high - sigma.low == pytest.approx(0, abs=1e-12)


def test_a_control_that_says_nothing_leaves_the_plain_numbers():
    values = np.random.default_rng(4).standard_normal(30)
    mean, sigma = controlled(values, np.zeros(30), 0.0)
    assert mean.value == pytest.approx(values.mean()) and sigma.value == pytest.approx(values.std(ddof=2))
    assert mean.low < mean.value < mean.high and sigma.low < sigma.value < sigma.high


@pytest.mark.parametrize("values, control", [(np.zeros(3), np.zeros(3)), (np.zeros(9), np.zeros(8))])
def test_too_few_samples_or_controls_are_refused(values, control):
    with pytest.raises(ValueError, match=f"{FEWEST} samples are needed, and a control of each"):
        controlled(values, control, 1.0)
