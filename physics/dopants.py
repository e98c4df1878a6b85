"""Random dopant scatter: how a countable number of dopants moves the threshold of one device.

One dopant at depth x shifts V_T by (q/(C_ox W L)) w with the weight w = 1 - x/x_d. The number of dopants is Poisson, so
the sum of weights is a compound-Poisson variable with cumulants (mean count) E[w^j]: `weighted_count` gives those for
any profile. The law itself, as a quantile function of one standard normal, is in `physics.counted`.
"""

import numpy as np

from physics.constants import ELEMENTARY_CHARGE
from physics.profile import Profile


def single_dopant_shift(oxide_capacitance, width, length):
    """Shift of the threshold by one dopant at the surface.

    oxide_capacitance : gate oxide capacitance [F/m^2]
    width, length : channel width and length [m]
    Returns shift [V].
    Source: charge sheet of one elementary charge spread over the channel; H.-S. Wong and Y. Taur, IEDM 1993 (memory).
    """
    return ELEMENTARY_CHARGE / (oxide_capacitance * width * length)


def fringe_weighted_dopants(doping, depletion_width, shape, power):
    """Dopants beyond both channel edges per unit length, weighted by a power of (1 - distance from the edge/x_d).

    doping : doping beyond the edges [m^-3]
    depletion_width : radius of the fringe [m]
    shape : fringe area of both edges over depletion_width**2 [1]
    power : exponent, 0, 1, 2, ... [1]
    Returns weighted dopants per length [m^-1].
    Range: an upper bound; a field solution does not confirm it, since the gate's side holds the corner.
    Source: integral of 2 shape N rho (1 - rho/x_d)^power over rho (own derivation); two quarter circles multiply the
    variance by 1 + (pi/4) x_d/W.
    """
    return 2 * shape * doping * depletion_width**2 / ((power + 1) * (power + 2))


def weighted_count(profile: Profile, depletion_width, width, length, power, fringe_shape=0.0):
    """Mean of the sum of w^power over a device's dopants; power 0 is their mean number.

    profile : doping profile, densities in [m^-3]
    depletion_width : depletion width [m]
    width, length : channel width and length [m]
    power : exponent, 0, 1, 2, ... [1]
    fringe_shape : 0 for the dopants under the channel alone; the field-oxide shape to count the fringe's own [1]
    Returns weighted count [1].
    Source: Campbell's theorem for a Poisson field of dopants.
    """
    per_length = width * profile.weighted_dopants(depletion_width, power)
    if fringe_shape:
        per_length = per_length + fringe_weighted_dopants(profile.surface_doping, depletion_width, fringe_shape, power)
    return per_length * length


def dopant_root_and_sigma(profile: Profile, depletion_width, width, length, oxide_capacitance, fringe_shape=0.0):
    """Root of the mean number of a device's dopants, and the standard deviation of its threshold by their scatter.

    profile : doping profile, densities in [m^-3]
    depletion_width : depletion width [m]
    width, length : channel width and length [m]
    oxide_capacitance : gate oxide capacitance [F/m^2]
    fringe_shape : see `weighted_count` [1]
    Returns root [1] and sigma of ONE device [V]. A pair's difference has sqrt(2) times this sigma.
    Source: (q/C_ox) sqrt(N x_d/(3 W L)) for uniform doping; K. Takeuchi et al., IEDM 1997 (memory); P. A. Stolk et al.,
    IEEE Trans. Electron Devices 45, 1960 (1998), with phi = phi_F.
    """
    place = profile, depletion_width, width, length
    root = np.sqrt(weighted_count(*place, 0, fringe_shape))
    if fringe_shape:
        scale = np.sqrt(weighted_count(*place, 2, fringe_shape))
    else:
        scale = root * np.sqrt(profile.mean_square_weight(depletion_width))
    return root, single_dopant_shift(oxide_capacitance, width, length) * scale


def dopant_sigma(profile: Profile, depletion_width, width, length, oxide_capacitance, fringe_shape=0.0):
    """The sigma of `dopant_root_and_sigma` alone.

    Arguments as in `dopant_root_and_sigma`.
    Returns sigma of one device [V].
    Source: see there.
    """
    return dopant_root_and_sigma(profile, depletion_width, width, length, oxide_capacitance, fringe_shape)[1]


def asenov_sigma(oxide_thickness, doping, width, length):
    """Fit to three-dimensional simulations with discrete dopants, for comparison only.

    oxide_thickness : gate oxide [m]
    doping : uniform doping [m^-3]
    width, length : channel width and length [m]
    Returns sigma of one device [V].
    Range: about 1e18 to 5e18 cm^-3.
    Source: A. Asenov, IEEE Trans. Electron Devices 45, 2505 (1998) (memory): 3.19e-8 t_ox N^0.401/sqrt(W L), N in cm^-3.
    """
    return 3.19e-8 * oxide_thickness * (doping / 1e6) ** 0.401 / np.sqrt(width * length)
