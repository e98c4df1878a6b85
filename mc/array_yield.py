"""Arrays of like parts that fail independently: blocks with spares, and chips hit by clustered defects."""

import numpy as np
from scipy.special import betainc


def array_failure(share, parts: int, blocks: int = 1, spares: int = 0):
    """Probability that some block of an array has more failing parts than spares.

    share : failure probability of one part, 0 to 1, any shape
    parts : of the whole array; blocks : into which they are divided as evenly as they go; spares : of each block
    Returns probability, the shape of `share`; the failure, since near a yield of one it keeps its digits.
    Source: binomial tail as a regularised incomplete beta function; blocks are independent.
    """
    each, larger = divmod(parts, blocks)
    log_pass = np.zeros_like(share, dtype=float)
    with np.errstate(divide="ignore"):  # a block that surely fails
        for count, size in ((larger, each + 1), (blocks - larger, each)):
            if count and spares < size:
                log_pass = log_pass + count * np.log1p(-betainc(spares + 1, size - spares, share))
    return -np.expm1(log_pass)


def defect_yield(mean_defects: float, clustering: float) -> float:
    """Probability that a chip is hit by no defect when defects cluster.

    mean_defects : per chip; clustering : parameter of the negative binomial law, large for none
    Source: C. H. Stapper, IBM J. Res. Dev. 20, 228 (1976) (from memory).
    """
    return (1 + mean_defects / clustering) ** -clustering
