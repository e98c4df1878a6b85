"""Bulk silicon: gap, intrinsic density, Fermi potential. Scalars or arrays in, the same shape out."""

import numpy as np

from physics.constants import BOLTZMANN, ELEMENTARY_CHARGE

# Vacuum level to conduction band. Common practice; the value every flat-band formula of the trade uses.
ELECTRON_AFFINITY = 4.05  # [V]


def thermal_voltage(temperature):
    """Thermal voltage kT/q.

    temperature : absolute temperature [K], > 0
    Returns kT/q [V].
    Source: definition.
    """
    return BOLTZMANN * temperature / ELEMENTARY_CHARGE


def band_gap(temperature):
    """Band gap of silicon as a voltage.

    temperature : absolute temperature [K], 0 to 700
    Returns gap divided by the elementary charge [V].
    Source: Y. P. Varshni, Physica 34, 149 (1967), form; 1.17, 4.73e-4, 636 as printed in R. F. Pierret, Advanced
    Semiconductor Fundamentals, example 2.4.
    """
    return 1.17 - 4.73e-4 * temperature**2 / (temperature + 636)


def intrinsic_density(temperature):
    """Intrinsic carrier density of silicon, the default.

    temperature : absolute temperature [K], 200 to 500
    Returns density [m^-3].
    Source: A. B. Sproul and M. A. Green, J. Appl. Phys. 70, 846 (1991), fit 9.15e19 (T/300)^2 exp(-6880/T) cm^-3.
    """
    return 9.15e25 * (temperature / 300) ** 2 * np.exp(-6880 / temperature)


def intrinsic_density_misiakos(temperature):
    """Intrinsic carrier density of silicon, the alternative.

    temperature : absolute temperature [K], 78 to 340
    Returns density [m^-3].
    Source: K. Misiakos and D. Tsamakis, J. Appl. Phys. 74, 3293 (1993), fit 5.29e19 (T/300)^2.54 exp(-6726/T) cm^-3.
    """
    return 5.29e25 * (temperature / 300) ** 2.54 * np.exp(-6726 / temperature)


def fermi_potential(doping, thermal_voltage, intrinsic_density):
    """Distance of the Fermi level from mid-gap in doped, non-degenerate silicon, as a positive voltage.

    doping : net doping [m^-3], > intrinsic_density
    thermal_voltage : kT/q [V]
    intrinsic_density : intrinsic carrier density [m^-3]
    Returns Fermi potential [V].
    Source: D. A. Neamen, Semiconductor Physics and Devices, 4th ed., eq. 10.3 (Boltzmann statistics, full ionisation).
    """
    return thermal_voltage * np.log(doping / intrinsic_density)
