"""Tails of the counted law against a convolution done another way, in exact fractions.

With uniform depths the sum of k weights has the Irwin-Hall distribution, and the device's law is its mixture over a
Poisson k. The alternating sum of that distribution loses every digit in floating point at k = 20; in fractions none.
"""

from fractions import Fraction
from math import comb, exp, factorial

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.special import ndtri

from physics.counted import CountedLaw, compound_poisson_quantiles

FEW = 25.0  # dopants
LATTICE_STEP = 1 / 400  # the finest thing the table knows, in sigmas


def uniform_density(weight):
    return np.ones_like(weight)


def irwin_hall(number, total):
    """Exact probability that `number` uniform weights add up to at most `total`, a Fraction."""
    if total >= number:
        return Fraction(1)
    terms = ((-1) ** j * comb(number, j) * (total - j) ** number for j in range(int(total) + 1))
    return sum(terms) / factorial(number)


def normal_at(standardised, mean_count):
    """Standard normal with the probability the device's sum has of lying below a value; from the nearer tail."""
    total = Fraction(round((mean_count / 2 + standardised * (mean_count / 3) ** 0.5) * 2**20), 2**20)
    below = above = 0.0
    for number in range(int(mean_count + 14 * mean_count**0.5)):
        poisson = exp(-mean_count) * mean_count**number / factorial(number)
        share = irwin_hall(number, total)
        below += poisson * float(share)
        above += poisson * float(1 - share)
    return ndtri(below) if below < above else -ndtri(above)


@pytest.mark.parametrize("normal", [-5.0, -4.0, -3.0, -2.0, -1.0, 0.0, 1.0, 2.0, 3.0, 4.0, 5.0])
def test_quantiles_against_the_exact_mixture(normal):
    # 5 sigmas is a probability of 2.9e-7. Held to one step of the lattice, which is 1/400 of a sigma.
    quantile = compound_poisson_quantiles(np.array([normal]), FEW, uniform_density)[0]
    assert normal_at(quantile, FEW) == pytest.approx(normal, abs=LATTICE_STEP)


@pytest.mark.parametrize("nominal", [FEW / 0.8, FEW / 1.25])
def test_law_against_the_exact_mixture_at_its_nodes(nominal):
    # The nodes of a table lie at 0.8 and 1.25 of the nominal count: there nothing is interpolated in the count.
    law = CountedLaw.build(nominal, uniform_density)
    for normal in (-5.0, -3.0, 0.0, 3.0, 5.0):
        assert normal_at(law.standardised(normal, FEW), FEW) == pytest.approx(normal, abs=LATTICE_STEP)


def test_law_between_its_nodes_keeps_its_promise():
    # The docstring: about 1e-3 sigma at 25 dopants and three sigmas.
    law, normals = CountedLaw.build(FEW, uniform_density), np.linspace(-3, 3, 49)
    for mean_count in (0.85 * FEW, FEW, 1.15 * FEW):
        exact = compound_poisson_quantiles(normals, mean_count, uniform_density)
        assert np.abs(law.standardised(normals, mean_count) - exact).max() < 1e-3


@pytest.mark.parametrize("normal", [-6.0, -5.0])
def test_law_at_its_nominal_count_is_exact_in_the_lower_tail(normal):
    # The tail estimator drives the law at the nominal count; an error of 0.1 sigma at -6 is a factor of 2 in
    # probability.
    law = CountedLaw.build(FEW, uniform_density)
    assert normal_at(law.standardised(normal, FEW), FEW) == pytest.approx(normal, abs=LATTICE_STEP)


def test_interpolation_in_the_count_gets_better_with_the_count():
    # The law's curvature in 1/sqrt(m) times the squared distance of the nodes, which is proportional to 1/m.
    errors = []
    for nominal in (50.0, 200.0):
        law, mean_count = CountedLaw.build(nominal, uniform_density), 0.9 * nominal
        exact = compound_poisson_quantiles(np.array([-4.0, 4.0]), mean_count, uniform_density)
        errors.append(np.abs(law.standardised(np.array([-4.0, 4.0]), mean_count) - exact))
    assert np.all(errors[1] < errors[0] / 3)


def test_law_tends_to_the_normal_law_at_the_rate_of_its_skew():
    # Cornish-Fisher: z + skew (z^2 - 1)/6, with a remainder of order 1/m: ten times smaller at ten times the count.
    normals = np.linspace(-3, 3, 13)
    remainder = []
    for mean_count in (1e2, 1e3):
        skew = mean_count / 4 / (mean_count / 3) ** 1.5
        found = compound_poisson_quantiles(normals, mean_count, uniform_density)
        remainder.append(np.abs(found - normals - skew * (normals**2 - 1) / 6).max())
    assert remainder[0] / remainder[1] == pytest.approx(10, rel=0.1, abs=0)


def test_device_that_may_hold_no_dopant_has_an_atom():
    # Mean 3: with probability e^-3 there is none, so every normal below -1.65 gives exactly zero, minus the mean over
    # sigma.
    quantiles = compound_poisson_quantiles(np.linspace(-8, 8, 321), 3.0, uniform_density)
    none = np.linspace(-8, 8, 321) < ndtri(exp(-3.0)) - 0.01
    assert quantiles[none] == pytest.approx(-1.5, abs=1e-3)
    assert np.all(quantiles[~none] > -1.5)


@given(
    nominal=st.floats(2.0, 2000.0),
    relative=st.floats(0.8, 1.25),
    surface_ratio=st.floats(0.1, 10.0),
    depth_ratio=st.floats(0.0, 1.0),
)
@settings(max_examples=15, deadline=None)
def test_law_is_monotone_in_the_normal(nominal, relative, surface_ratio, depth_ratio):
    def density(weight):
        return np.where(weight > 1 - depth_ratio, surface_ratio, 1.0)

    normals = np.linspace(-9.5, 9.5, 4001)  # beyond the table's ends too
    found = CountedLaw.build(nominal, density).standardised(normals, relative * nominal)
    assert np.all(np.isfinite(found))
    assert np.all(np.diff(found) >= -1e-12)


def test_law_takes_arrays_of_normals_and_counts():
    law = CountedLaw.build(60.0, uniform_density)
    normals, counts = np.array([-2.0, 0.0, 2.0])[:, None], np.array([50.0, 60.0, 70.0, 75.0])
    together = law.standardised(normals, counts)
    assert together.shape == (3, 4)
    for row in range(3):
        for column in range(4):
            assert together[row, column] == law.standardised(normals[row, 0], counts[column])
