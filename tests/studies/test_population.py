"""What is written as variation reaches the devices: the right quantity, the right sigma, levels added in variance."""

import numpy as np
import pytest
from scipy.stats import truncnorm

from mc.streams import Streams
from physics.current import critical_drop
from studies.population import Population

SAMPLES = 100_000
CUT_VARIANCE, CUT_EXCESS = (float(moment) for moment in truncnorm(-2, 2).stats("vk"))
LAWS = {  # further keys; what a law of unit sigma really has: standard deviation, and kurtosis for that one's error
    "normal": ({}, 1.0, 3.0),
    "lognormal": ({}, 1.0, 3.03),
    "uniform": ({}, 1.0, 1.8),
    "truncated normal": ({"cut_sigmas": 2.0}, np.sqrt(CUT_VARIANCE), 3 + CUT_EXCESS),
}


def drawn(file, names=None):
    """A population and its draws."""
    population = Population(file, "n")
    return population, Streams(3, 0, names or population.names()).take(SAMPLES)


def values(population, draws, quantity, width_um=1.0, length_um=1.0):
    """A quantity of every device, as deviation from nominal: relative, or in nm and mV."""
    silicon = population.silicon(draws)
    device = population.devices(draws, population.geometry(width_um, length_um), silicon)
    if quantity == "mobility":
        changed, nominal = (
            population.channels(drawn, population.geometry(width_um, length_um), population.silicon(drawn), [0.5])[0]
            for drawn in (draws, {})
        )
        return changed.specific_current / nominal.specific_current - 1
    return {
        "oxide_thickness": device.oxide_thickness / population.nominal.oxide_thickness - 1,
        "doping": device.profile.doping / population.nominal.profile.doping - 1,
        "width": 1e9 * (device.width - width_um * 1e-6),
        "length": 1e9 * (device.length - length_um * 1e-6),
        "flat_band": 1e3 * np.asarray(device.flat_band_shift),
    }[quantity]


def assert_sigma(sample, sigma, kurtosis=3.0):
    """A sample's sigma is right within four of its own standard errors, and its mean is 0 within four."""
    error = np.sqrt((kurtosis - 1) / (4 * SAMPLES))
    assert np.std(sample) == pytest.approx(sigma, rel=4 * error, abs=0)
    assert np.mean(sample) == pytest.approx(0, abs=4 * sigma / np.sqrt(SAMPLES))


UNITS = {"width": "nm", "length": "nm", "flat_band": "mv"}
QUANTITIES = ["oxide_thickness", "doping", "mobility", *UNITS]


@pytest.mark.parametrize(
    # a lognormal law of what is not given in percent is refused, see test_process_file
    "quantity, law",
    [(quantity, law) for quantity in QUANTITIES for law in LAWS if not (law == "lognormal" and quantity in UNITS)],
)
def test_a_law_reaches_the_devices(make_plain_process, quantity, law):
    unit, size = UNITS.get(quantity, "percent"), 4.0
    more, sigma, kurtosis = LAWS[law]
    changes = {f"variation.{quantity}": {"law": law, f"die_{unit}": size} | more, "mobility_cm2_per_vs": 300.0}
    population, draws = drawn(make_plain_process(changes))
    assert set(draws) == {f"n.{quantity}.die"}
    scale = 0.01 if unit == "percent" else 1.0
    sample = values(population, draws, quantity)
    assert_sigma(sample, scale * size * sigma, kurtosis)
    if law == "uniform":
        assert np.ptp(sample) <= 2 * np.sqrt(3) * scale * size * (1 + 1e-9)


@pytest.mark.parametrize("quantity", QUANTITIES)
def test_levels_add_in_variance(make_plain_process, quantity):
    unit = UNITS.get(quantity, "percent")
    sizes = {"lot": 1.0, "wafer": 2.0, "die": 2.0, "device": 4.0}
    changes = {f"variation.{quantity}.{level}_{unit}": size for level, size in sizes.items()}
    population, draws = drawn(make_plain_process(changes | {"mobility_cm2_per_vs": 300.0}))
    scale = 0.01 if unit == "percent" else 1.0
    for level, size in sizes.items():
        name = f"n.{quantity}.{level}"
        assert population.names(level=level) == (name,)
        assert_sigma(values(population, {name: draws[name]}, quantity), scale * size)
    assert_sigma(values(population, draws, quantity), scale * 5.0)  # 1 + 4 + 4 + 16 = 25


def test_measured_values_reach_the_devices(make_plain_process, tmp_path):
    """Every measured deviation about as often as the others, nothing beyond them, the mean at nominal."""
    measured = np.array([2.9, 2.95, 3.0, 3.05, 3.1, 3.18])
    (tmp_path / "oxide.csv").write_text("nm\n" + "\n".join(map(str, measured)))
    spread = {"law": "empirical", "values_csv": "oxide.csv", "values_column": "nm", "values_level": "die"}
    population, draws = drawn(make_plain_process({"variation.oxide_thickness": spread}))
    sample = values(population, draws, "oxide_thickness")
    deviations = measured / measured.mean() - 1
    assert sample.min() == pytest.approx(deviations[0], rel=1e-9, abs=0)
    assert sample.max() == pytest.approx(deviations[-1], rel=1e-9, abs=0)
    below = np.mean(sample < deviations[2])  # the third of six stands at 2.5/6
    assert below == pytest.approx(2.5 / 6, abs=4 * np.sqrt(2.5 * 3.5) / 6 / np.sqrt(SAMPLES))


def test_a_doping_deviation_scales_the_whole_profile(make_plain_process):
    changes = {"surface_doping_per_cm3": 2e17, "surface_depth_nm": 10.0, "variation.doping.die_percent": 5.0}
    population, draws = drawn(make_plain_process(changes))
    profile = population.silicon(draws).device.profile
    np.testing.assert_allclose(profile.surface_doping / 2e23, profile.doping / 5e23, rtol=1e-12)
    assert profile.surface_depth == population.nominal.profile.surface_depth


def test_what_is_not_drawn_stays_nominal(make_demo_process):
    population, draws = drawn(make_demo_process())
    geometry = population.geometry(0.2, 0.13)
    nominal = population.devices({}, geometry, population.silicon({}))
    assert (nominal.width, nominal.length) == (geometry.width, geometry.length)
    assert nominal.oxide_thickness == population.nominal.oxide_thickness
    assert population.scatter({}, geometry, nominal, population.silicon({}).state) == 0.0
    for name in population.names():  # one cause alone leaves the rest where it was
        only = {name: draws[name][:10]}
        device = population.devices(only, geometry, population.silicon(only))
        moved = {key for key in ("width", "length", "oxide_thickness") if np.ndim(getattr(device, key))}
        cause = name.split(".")[1]
        expected = {"gate_edges": "length", "active_edges": "width", "oxide_roughness": "oxide_thickness"}.get(
            cause, cause
        )
        assert moved == {expected} & {"width", "length", "oxide_thickness"}


def test_every_width_sees_the_same_draws(make_demo_process):
    """Neighbouring widths differ by their width alone: their thresholds are all but perfectly correlated."""
    population, draws = drawn(make_demo_process())
    silicon = population.silicon(draws)
    near, far = (population.thresholds(draws, population.geometry(width, 0.13), silicon, 0.05) for width in (0.2, 0.21))
    assert np.corrcoef(near, far)[0, 1] > 0.999


def test_mobility_falls_with_temperature_and_velocity_saturates(make_plain_process):
    file = make_plain_process({"mobility_cm2_per_vs": 300.0, "saturation_velocity_cm_per_s": 8e6})
    found = {}
    for celsius in (26.85, 126.85):
        population = Population(file, "n", temperature_c=celsius)
        channel = population.channels({}, population.geometry(1.0, 1.0), population.silicon({}), [0.5])[0]
        found[celsius] = channel.specific_current / channel.slope_factor / channel.thermal_voltage**2
        mobility = 0.03 * ((celsius + 273.15) / 300) ** -1.5
        assert channel.critical_drop == pytest.approx(critical_drop(mobility, 1e-6, 8e4), rel=1e-12, abs=0)
    assert found[126.85] / found[26.85] == pytest.approx((400 / 300) ** -1.5, rel=1e-9, abs=0)
