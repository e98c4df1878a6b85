"""How much of a variance comes from which inputs, from runs in which only they vary, on the same random numbers."""

import numpy as np
from scipy import stats

from mc.intervals import Estimate, Summary


def variance_share(part: Summary, whole: Summary, level=0.95) -> Estimate:
    """Share of a variance that remains when only some inputs vary.

    part, whole : summaries of the restricted and of the full run on the same samples
    Returns the ratio of variances. The interval adds the two variances' own errors on the log scale; the runs share
    their draws, so the true error is smaller: it is conservative.
    Source: delta method for the log of a sample variance, (kurtosis - 1)/n.
    """
    share = part.variance / whole.variance if whole.variance > 0 else 0.0
    error = np.sqrt((part.kurtosis - 1) / part.n + (whole.kurtosis - 1) / whole.n)
    half = stats.norm.ppf((1 + level) / 2) * error
    return Estimate(
        value=share,
        low=share * np.exp(-half),
        high=share * np.exp(half),
        level=level,
        n=whole.n,
        method="ratio of variances, conservative",
    )
