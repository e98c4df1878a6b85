"""What the printed checks share."""

import sys

import pytest

# "N4" in the tests: D. A. Neamen, Semiconductor Physics and Devices, 4th ed. (print).
NEAMEN = {
    "ELEMENTARY_CHARGE": 1.6e-19,
    "SILICON_PERMITTIVITY": 11.7 * 8.85e-12,
    "OXIDE_PERMITTIVITY": 3.9 * 8.85e-12,
}


@pytest.fixture
def use_constants(monkeypatch):
    """A function that puts a book's charge and permittivities in the place of our own, in every module of physics.

    The thermal voltage and the intrinsic density are arguments already; these three are not, and a replay that divides
    them out again by hand would no longer run the formula that is on trial.
    """

    def replace(**constants):
        for name, module in list(sys.modules.items()):
            if name.startswith("physics."):
                for constant, value in constants.items():
                    if hasattr(module, constant):
                        monkeypatch.setattr(module, constant, value)

    return replace


@pytest.fixture
def neamen(use_constants):
    """Neamen's constants for the length of one test; gives his charge [C], which the examples need for doses."""
    use_constants(**NEAMEN)
    return NEAMEN["ELEMENTARY_CHARGE"]
