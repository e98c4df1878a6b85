"""Physical constants in SI units.

Source: CODATA 2018 (the charge and the Boltzmann constant are exact by the 2019 definition of the SI).
Relative permittivities: common practice for silicon and thermal oxide.
"""

ELEMENTARY_CHARGE = 1.602176634e-19  # [C]
BOLTZMANN = 1.380649e-23  # [J/K]
VACUUM_PERMITTIVITY = 8.8541878128e-12  # [F/m]
SILICON_RELATIVE_PERMITTIVITY = 11.7  # [1]
OXIDE_RELATIVE_PERMITTIVITY = 3.9  # [1]

SILICON_PERMITTIVITY = SILICON_RELATIVE_PERMITTIVITY * VACUUM_PERMITTIVITY  # [F/m]
OXIDE_PERMITTIVITY = OXIDE_RELATIVE_PERMITTIVITY * VACUUM_PERMITTIVITY  # [F/m]
