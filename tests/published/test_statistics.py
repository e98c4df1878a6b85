"""Intervals of fractions and sigmas against the list's section 7.

The list's rows on sample sizes, tolerance factors and the F test belong to another module and are not held here.
"""

import pytest
from scipy import stats

from mc.intervals import fraction_exact, fraction_wilson, sigma_chi_square


# NIST/SEMATECH e-Handbook 7.2.4.1, print: 4 failures of 20, 90 %: 0.071354 and 0.401029.
def test_exact_binomial_interval():
    interval = fraction_exact(4, 20, level=0.90)
    assert f"{interval.value:.2f}" == "0.20"
    assert f"{interval.low:.6f}" == "0.071354"
    # The handbook's upper limit is one unit of its last digit above the beta quantile 0.4010281, which defines it.
    assert interval.high == pytest.approx(0.401029, abs=1e-6)


# The same two limits to seven digits, derived: P(X >= 4) at the lower and P(X <= 4) at the upper limit are 5 % each.
def test_exact_binomial_interval_by_its_definition():
    interval = fraction_exact(4, 20, level=0.90)
    assert f"{interval.low:.7f}" == "0.0713539"
    assert f"{interval.high:.7f}" == "0.4010281"
    assert stats.binom.sf(3, 20, interval.low) == pytest.approx(0.05, rel=1e-9)
    assert stats.binom.cdf(4, 20, interval.high) == pytest.approx(0.05, rel=1e-9)


# NIST/SEMATECH e-Handbook 7.2.4.1, print: share 0.13 of 200 with z = 1.645: lower limit 0.09577. One-sided 95 % is the
# lower end of a two-sided 90 % interval; its z is 1.64485, which moves nothing the handbook prints.
def test_wilson_lower_limit():
    assert f"{fraction_wilson(26, 200, level=0.90).low:.5f}" == "0.09577"


# Ceramic and wafer data of the NIST/SEMATECH e-Handbook, second hand: s = 13.97 of n = 10, 95 %: 9.60906 to 25.50377.
# The data's own s was rounded to 13.97, so the printed limits are known relative to it: 0.005/13.97 = 4e-4.
def test_sigma_interval():
    interval = sigma_chi_square(13.97**2, 10)
    assert interval.low == pytest.approx(9.60906, rel=4e-4)
    assert interval.high == pytest.approx(25.50377, rel=4e-4)
    # The ratio of the limits does not contain s, and is known to all printed digits.
    assert interval.high / interval.low == pytest.approx(25.50377 / 9.60906, rel=1e-6)
