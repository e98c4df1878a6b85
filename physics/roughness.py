"""Local causes other than dopants: rough gate edges, rough active edges, oxide, gate grains, measured remainders.

Each function averages a roughness over one device; all give one device, never a pair, unless the name says pair.
"""

import numpy as np
from scipy.special import erf

VORONOI_AREA_FACTOR = (
    1.280  # E[A^2]/E[A]^2 of planar Poisson-Voronoi cells; E. N. Gilbert, Ann. Math. Stat. 33, 958 (1962) (memory)
)


def exponential_averaging(ratio):
    """Variance of a line's mean position over its point variance, correlation exp(-|x|/Lambda).

    ratio : correlation length over averaging length [1], > 0
    Returns variance factor [1], 0 to 1.
    Source: double integral of the correlation, 2r[1 - r(1 - exp(-1/r))] (elementary).
    """
    ratio = np.asarray(ratio, float)
    return 2 * ratio * (1 + ratio * np.expm1(-1 / ratio))


def gaussian_averaging(ratio):
    """Variance of a line's mean position over its point variance, correlation exp(-x^2/Lambda^2).

    ratio : correlation length over averaging length [1], > 0
    Returns variance factor [1], 0 to 1.
    Source: double integral of the correlation, sqrt(pi) r erf(1/r) - r^2 (1 - exp(-1/r^2)) (elementary).
    """
    ratio = np.asarray(ratio, float)
    return np.sqrt(np.pi) * ratio * erf(1 / ratio) + ratio**2 * np.expm1(-1 / ratio**2)


AVERAGING = {"exponential": exponential_averaging, "gaussian": gaussian_averaging}


def edge_pair_sigma(edge_sigma, correlation_length, averaging_length, correlation="exponential"):
    """Sigma of a dimension bounded by two uncorrelated rough edges, averaged along the device.

    edge_sigma : ONE sigma of ONE edge [m]; much of the literature quotes 3 sigma
    correlation_length : correlation length of the roughness [m]
    averaging_length : the width for the gate's edges, the length for the active area's [m]
    correlation : "exponential" or "gaussian"
    Returns sigma of the mean dimension [m].
    Source: two independent edges, `exponential_averaging` or `gaussian_averaging`.
    """
    return np.sqrt(2 * AVERAGING[correlation](correlation_length / averaging_length)) * edge_sigma


def oxide_roughness_sigma(thickness_sigma, correlation_length, width, length):
    """Sigma of the mean oxide thickness of a device with rough interfaces.

    thickness_sigma : point sigma of the thickness [m]
    correlation_length : of the correlation exp(-(x^2 + y^2)/Lambda^2) [m]
    width, length : channel width and length [m]
    Returns sigma of the mean [m].
    Source: the Gaussian correlation separates, so the variance factors of the two sides multiply (elementary).
    """
    along = gaussian_averaging(correlation_length / width) * gaussian_averaging(correlation_length / length)
    return thickness_sigma * np.sqrt(along)


def grain_sigma(single_grain_sigma, grain_area, width, length, area_factor=VORONOI_AREA_FACTOR):
    """Sigma of the threshold from the work functions of a metal gate's grains.

    single_grain_sigma : sigma of the work function over grains [V]
    grain_area : mean area of a grain [m^2]
    width, length : channel width and length [m]
    area_factor : mean squared over squared mean grain area [1]: 1 equal grains, 1.280 Voronoi cells
    Returns sigma [V].
    Source: independent grains in proportion to their area (elementary); 1.13 = sqrt(1.280).
    """
    return single_grain_sigma * np.sqrt(area_factor * grain_area / (width * length))


def two_orientation_sigma(share, difference):
    """Sigma of one grain's work function when grains have one of two orientations.

    share : share of the first orientation [1], 0 to 1
    difference : work-function difference [V]
    Returns sigma [V].
    Source: binomial variance.
    """
    return difference * np.sqrt(share * (1 - share))


def area_law_sigma(pair_coefficient, width, length):
    """Sigma of ONE device from a measured pair coefficient, sigma(difference) = A/sqrt(W L).

    pair_coefficient : A of the difference of a pair [m] times the unit of what is measured, for instance [V m]
    width, length : channel width and length [m]
    Returns sigma of one device, in the unit of what is measured [V] or [1].
    Source: M. J. M. Pelgrom, A. C. J. Duinmaijer, A. P. G. Welbers, IEEE J. Solid-State Circuits 24, 1433 (1989).
    """
    return pair_coefficient / np.sqrt(2 * width * length)
