"""The nominal device: thresholds against the textbook's formula worked out here from the file's own numbers.

Nothing of the package is used for the expected values: constants are CODATA's by scipy, permittivities 11.7 and 3.9.
"""

import numpy as np
import pytest
from scipy.constants import Boltzmann, elementary_charge, epsilon_0

from physics.edges import FieldOxide, NoEdge, TabulatedEdge, Trench
from physics.profile import StepProfile, UniformProfile
from physics.short_channel import ChargeSharing, LongChannel, QuasiTwoDimensional
from studies.nominal import nominal_device
from studies.population import Population

SILICON, OXIDE, AFFINITY = 11.7 * epsilon_0, 3.9 * epsilon_0, 4.05


def threshold(population, width_um=10.0, length_um=10.0, drain=0.0):
    """Nominal threshold of a population's device [V]."""
    return float(population.thresholds({}, population.geometry(width_um, length_um), population.silicon({}), drain))


def gap_and_fermi(temperature, doping):
    """Gap [V] and Fermi potential [V], Varshni and Sproul-Green; doping in cm^-3."""
    gap = 1.17 - 4.73e-4 * temperature**2 / (temperature + 636)
    intrinsic = 9.15e19 * (temperature / 300) ** 2 * np.exp(-6880 / temperature)
    return gap, Boltzmann * temperature / elementary_charge * np.log(doping / intrinsic)


@pytest.mark.parametrize("celsius", [-40.0, 27.0, 125.0])
@pytest.mark.parametrize("body_bias", [0.0, 1.5])
@pytest.mark.parametrize("channel, gate, sign", [("n", "n+ polysilicon", 1), ("p", "p+ polysilicon", -1)])
def test_threshold_by_hand(make_plain_process, channel, gate, sign, body_bias, celsius):
    file = make_plain_process({"channel": channel, "gate": gate, "oxide_charge_per_cm2": 4e10}, temperature_c=celsius)
    gap, fermi = gap_and_fermi(celsius + 273.15, 5e17)
    capacitance = OXIDE / 3e-9
    gate_function = AFFINITY if channel == "n" else AFFINITY + gap
    flat_band = gate_function - (AFFINITY + gap / 2 + sign * fermi) - 4e14 * elementary_charge / capacitance
    charge = np.sqrt(2 * elementary_charge * SILICON * 5e23 * (2 * fermi + body_bias))
    expected = flat_band + sign * (2 * fermi + charge / capacitance)
    population = Population(file, "n", body_bias_v=body_bias)
    assert threshold(population) == pytest.approx(expected, rel=1e-9, abs=0)
    assert expected * sign > 0


def test_field_oxide_by_hand(make_plain_process):
    """The edges add 2 xi eps_s (2 phi_F + V_SB)/(C_ox W) to a threshold."""
    shift = {}
    _, fermi = gap_and_fermi(300.15, 5e17)
    for kind in ("none", "field oxide"):
        file = make_plain_process({"edge": {"kind": kind}, "width_bias_nm": -20.0})
        shift[kind] = threshold(Population(file, "n", body_bias_v=1.0), width_um=0.12)
    expected = 2 * (np.pi / 2) * SILICON * (2 * fermi + 1.0) / (OXIDE / 3e-9 * 0.1e-6)
    assert shift["field oxide"] - shift["none"] == pytest.approx(expected, rel=1e-9, abs=0)


def test_trench_by_hand(make_plain_process):
    """The bulk charge is divided by 1 + F/W."""
    found = {}
    for kind in ({"kind": "none"}, {"kind": "trench", "field_oxide_nm": 300.0}):
        found[kind["kind"]] = threshold(Population(make_plain_process({"edge": kind}), "n"), width_um=0.1)
    _, fermi = gap_and_fermi(300.15, 5e17)
    bulk = np.sqrt(2 * elementary_charge * SILICON * 5e23 * 2 * fermi) / (OXIDE / 3e-9)
    trench = 4 * 3e-9 / np.pi * np.log(2 * 300e-9 / 3e-9)
    assert found["none"] - found["trench"] == pytest.approx(bulk * trench / (0.1e-6 + trench), rel=1e-9, abs=0)


def test_the_file_s_kinds_become_the_physics_(make_plain_process):
    def device(changes):
        return nominal_device(make_plain_process(changes), "n", body_bias_v=0.0, temperature_c=None)

    assert device({}).edge == NoEdge() and device({}).short_channel == LongChannel()
    assert device({"edge": {"kind": "field oxide"}}).edge == FieldOxide(shape=np.pi / 2)
    assert device({"edge": {"kind": "field oxide", "shape": 0.3}}).edge == FieldOxide(shape=0.3)
    assert device({"edge": {"kind": "trench", "field_oxide_nm": 300.0}}).edge == Trench(
        field_oxide_thickness=pytest.approx(3e-7, rel=1e-14, abs=0)
    )
    table = device({"edge": {"kind": "table", "table_width_um": [0.1, 1.0], "table_factor": [1.4, 1.05]}}).edge
    assert isinstance(table, TabulatedEdge)
    assert table.charge_factor(0, np.array([0.1e-6, 1e-6]), 0) == pytest.approx([1.4, 1.05], rel=1e-12, abs=0)
    sharing = device({"short_channel": {"kind": "charge sharing"}, "junction_depth_nm": 60.0}).short_channel
    assert sharing == ChargeSharing(junction_depth=pytest.approx(60e-9, rel=1e-14, abs=0))
    assert device({"short_channel": {"kind": "quasi two-dimensional", "eta": 1.2}}).short_channel == (
        QuasiTwoDimensional(eta=1.2)
    )
    assert device({}).profile == UniformProfile(doping=5e23)
    assert device({"surface_doping_per_cm3": 2e17, "surface_depth_nm": 10.0}).profile == StepProfile(
        surface_doping=2e23, surface_depth=pytest.approx(1e-8, rel=1e-14, abs=0), doping=5e23
    )
    assert device({}).gate_doping == np.inf and device({"gate_doping_per_cm3": 1e20}).gate_doping == 1e26
    metal = device({"gate": None, "gate_work_function_ev": 4.6})
    assert metal.gate_work_function == 4.6


def test_a_question_s_temperature_beats_the_file_s(make_plain_process):
    file = make_plain_process(temperature_c=85.0)
    assert Population(file, "n").nominal.temperature == pytest.approx(358.15, rel=1e-14, abs=0)
    assert Population(file, "n", temperature_c=0.0).nominal.temperature == pytest.approx(273.15, rel=1e-14, abs=0)


def test_intrinsic_density_is_the_named_one(make_plain_process):
    default, other = make_plain_process(), make_plain_process(intrinsic_density="misiakos tsamakis")
    assert Population(default, "n", temperature_c=26.85).nominal.intrinsic_density == pytest.approx(1.0e16, rel=0.01)
    assert Population(other, "n", temperature_c=26.85).nominal.intrinsic_density == pytest.approx(9.7e15, rel=0.01)


def test_a_surface_layer_deeper_than_the_depletion_is_refused(refusal, make_plain_process):
    changes = {"surface_doping_per_cm3": 5e17, "surface_depth_nm": 60.0}
    message = refusal(Population, make_plain_process(changes), "n")
    assert "plain.toml: device.n.surface_depth_nm = 60: must be less than the depletion width" in message
    # body bias widens the depletion region beyond it
    assert Population(make_plain_process(changes), "n", body_bias_v=2.0).nominal.body_bias == 2.0


def test_an_unknown_device_meets_the_nearest(refusal, make_demo_process):
    message = refusal(Population, make_demo_process(), "pp")
    assert message.endswith("option_a.toml: device 'pp' is not there; did you mean 'p'?")
    assert "'\\x1b[31m' is not there; known: n, p" in refusal(Population, make_demo_process(), "\x1b[31m")
