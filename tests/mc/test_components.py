"""Variance components: against balanced sums of squares, against a dense likelihood, and how often intervals hold the truth."""

import numpy as np
import pytest

from mc.components import Nested, Restricted, fit_components


def nested(seed, lots=4, wafers=3, dies=4, rows=6, sizes=(8.0, 5.0, 4.0, 3.0)):
    """Values with components of known sizes; the local one has a shape of its own."""
    stream = np.random.default_rng(seed)
    counts = lots, lots * wafers, lots * wafers * dies
    levels = [np.repeat(np.arange(count), counts[2] // count * rows) for count in counts]
    shape = np.tile(np.geomspace(0.3, 5, rows), counts[2])
    value = sum(size * stream.standard_normal(count)[codes] for size, count, codes in zip(sizes, counts, levels))
    value = value + np.sqrt(1 + sizes[3] ** 2 * shape) * stream.standard_normal(len(shape))
    fixed = np.column_stack([np.ones(len(shape)), shape])
    residuals = value - fixed @ np.linalg.lstsq(fixed, value, rcond=None)[0]
    values = Nested(residuals=residuals, fixed=fixed, levels=tuple(levels), known=np.ones(len(shape)), shapes=(shape,))
    return values, (counts[0] - 1, counts[1] - counts[0], counts[2] - counts[1])


def dense(values, levels, local):
    """The same likelihood with the whole covariance matrix."""
    matrix = np.diag(values.known + local[0] * values.shapes[0])
    for variance, codes in zip(levels, values.levels):
        matrix += variance * (codes[:, None] == codes)
    inverse = np.linalg.inv(matrix)
    inner = values.fixed.T @ inverse @ values.fixed
    part = values.fixed.T @ inverse @ values.residuals
    whole = values.residuals @ inverse @ values.residuals - part @ np.linalg.solve(inner, part)
    return np.linalg.slogdet(matrix)[1] + np.linalg.slogdet(inner)[1] + whole


def test_the_sweep_is_the_dense_likelihood():
    values = nested(1)[0]
    swept = Restricted(values)
    for levels, local in (((64.0, 25.0, 16.0), (9.0,)), ((0.1, 3.0, 50.0), (2.0,)), ((0.0, 0.0, 0.0), (1.0,))):
        assert swept(levels, local) == pytest.approx(dense(values, levels, local), rel=1e-10, abs=0)


def test_the_order_of_the_rows_does_not_matter():
    values = nested(2)[0]
    order = np.random.default_rng(0).permutation(len(values.residuals))
    mixed = Nested(
        residuals=values.residuals[order], fixed=values.fixed[order], levels=tuple(codes[order] for codes in values.levels),
        known=values.known[order], shapes=(values.shapes[0][order],),
    )  # fmt: skip
    assert Restricted(mixed)((9, 4, 1), (2,)) == pytest.approx(Restricted(values)((9, 4, 1), (2,)), rel=1e-12, abs=0)


def test_one_balanced_level_is_the_analysis_of_variance():
    stream = np.random.default_rng(3)
    codes = np.repeat(np.arange(12), 5)
    value = 3 * stream.standard_normal(12)[codes] + stream.standard_normal(60)
    ones = np.ones((60, 1))
    found = fit_components(
        Nested(residuals=value - value.mean(), fixed=ones, levels=(codes,), known=np.zeros(60), shapes=(np.ones(60),)),
        (11,),
    )
    means = value.reshape(12, 5).mean(axis=1)
    within = value.reshape(12, 5).var(axis=1, ddof=1).mean()
    assert found.local[0].value == pytest.approx(within, rel=1e-3)
    assert found.levels[0].value == pytest.approx(means.var(ddof=1) - within / 5, rel=1e-3)


def test_differences_add_what_a_pair_tells():
    stream = np.random.default_rng(4)
    difference = 2.0 * stream.standard_normal(400)
    none = np.zeros(0)
    found = fit_components(
        Nested(residuals=difference, fixed=np.zeros((400, 0)), levels=(), known=np.zeros(400), shapes=(np.ones(400),)),
        (),
    ).local[0]
    assert found.value == pytest.approx((difference**2).mean(), rel=1e-3)
    both = Nested(
        residuals=difference[:200], fixed=np.zeros((200, 0)), levels=(), known=np.zeros(200), shapes=(np.ones(200),),
        differences=difference[200:], difference_known=np.zeros(200), difference_shapes=(np.ones(200),),
    )  # fmt: skip
    assert fit_components(both, ()).local[0].value == pytest.approx(found.value, rel=1e-3)
    assert len(none) == 0


def test_no_component_is_none_with_a_lower_bound_of_zero():
    values, degrees = nested(5, sizes=(0.0, 0.0, 0.0, 3.0))
    found = fit_components(values, degrees)
    for estimate in found.levels:
        assert estimate.low == 0.0 and estimate.high < 5.0


def test_intervals_hold_the_truth():
    """Over 100 repeats 92 to 99 % held it (5 dies, 8 rows); here fewer, and three standard errors."""
    truth, held = (64.0, 25.0, 16.0, 9.0), np.zeros(4)
    for seed in range(16):
        values, degrees = nested(100 + seed)
        found = fit_components(values, degrees)
        held += [each.low <= size <= each.high for each, size in zip((*found.levels, *found.local), truth)]
    assert np.all(held >= 12) and held.sum() >= 55
