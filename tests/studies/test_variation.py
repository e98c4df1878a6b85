"""From a process file's variation and scatter to named random inputs, their laws and their correlations."""

import numpy as np
import pytest

from mc.experiment import Inputs
from mc.laws import Empirical, Lognormal, Normal, TruncatedNormal, Uniform
from mc.plan import Block
from studies.population import Population
from studies.variation import copula, random_inputs

EVERYTHING = {
    "variation.doping": {"lot_percent": 2.0, "device_percent": 1.0},
    "variation.width.die_nm": 4.0,
    "variation.flat_band.wafer_mv": 3.0,
    "scatter": {
        "dopants": "counted",
        "gate_edge_nm": 1.0,
        "gate_edge_correlation_nm": 20.0,
        "remainder_pair_mv_um": 1.0,
    },
}


def named(inputs):
    """Inputs by name."""
    return {item.name: item for item in inputs}


def test_names_levels_causes(make_plain_process):
    inputs = random_inputs(make_plain_process(EVERYTHING), "n")
    assert [(item.name, item.cause, item.level) for item in inputs] == [
        ("n.doping.lot", "doping", "lot"),
        ("n.doping.device", "doping", "device"),
        ("n.width.die", "width", "die"),
        ("n.flat_band.wafer", "flat_band", "wafer"),
        ("n.dopants.device", "dopants", "device"),
        ("n.gate_edges.device", "gate_edges", "device"),
        ("n.remainder.device", "remainder", "device"),
    ]
    laws = {name: item.law for name, item in named(inputs).items()}
    assert laws["n.doping.lot"] == Normal(sigma=0.02)
    assert laws["n.width.die"].sigma == pytest.approx(4e-9, rel=1e-14, abs=0)
    assert laws["n.flat_band.wafer"].sigma == pytest.approx(3e-3, rel=1e-14, abs=0)
    assert laws["n.dopants.device"] is None


def test_what_does_not_vary_is_no_input(make_plain_process):
    assert random_inputs(make_plain_process(), "n") == ()


@pytest.mark.parametrize(
    "law, more, expected",
    [
        ("normal", {}, Normal(sigma=0.03)),
        ("lognormal", {}, Lognormal(mean=1.0, sigma=0.03, shift=-1.0)),
        ("uniform", {}, Uniform(low=-0.03 * np.sqrt(3), high=0.03 * np.sqrt(3))),
        ("truncated normal", {"cut_sigmas": 2.0}, TruncatedNormal(sigma=0.03, cut=2.0)),
    ],
)
def test_laws(make_plain_process, law, more, expected):
    file = make_plain_process({"variation.doping": {"law": law, "die_percent": 3.0} | more})
    assert named(random_inputs(file, "n"))["n.doping.die"].law == expected


def test_a_measured_column_at_its_level(make_plain_process, tmp_path):
    """Ratios of a quantity given in percent, differences of one in nm; the other levels stay normal."""
    (tmp_path / "chip.csv").write_text("oxide_nm,bias_nm\n2.7,4\n3.0,8\n3.3,6\n")
    measured = {"law": "empirical", "values_csv": "chip.csv", "values_level": "wafer"}
    file = make_plain_process(
        {
            "variation.oxide_thickness": measured | {"values_column": "oxide_nm", "die_percent": 1.0},
            "variation.width": measured | {"values_column": "bias_nm"},
        }
    )
    inputs = named(random_inputs(file, "n"))
    assert set(inputs) == {"n.oxide_thickness.wafer", "n.oxide_thickness.die", "n.width.wafer"}
    assert all(isinstance(inputs[name].law, Empirical) for name in ("n.oxide_thickness.wafer", "n.width.wafer"))
    assert inputs["n.oxide_thickness.wafer"].law.values == pytest.approx((-0.1, 0.0, 0.1), abs=1e-15)
    assert inputs["n.oxide_thickness.die"].law == Normal(sigma=0.01)
    assert inputs["n.width.wafer"].law.values == pytest.approx((-2e-9, 0.0, 2e-9), abs=1e-23)
    assert file.measured_files() == [tmp_path / "chip.csv"] * 2


SAMPLES = 100_000


def drawn_oxides(file, devices=("n", "p")):
    """Relative deviations of the oxide thickness, level by level, of devices drawn together."""
    populations = {device: Population(file, device) for device in devices}
    names = tuple(name for each in populations.values() for name in each.names(cause="oxide_thickness"))
    inputs = Inputs(seed=5, names=names, copula=copula(file), slice_size=SAMPLES)
    draws = next(inputs.slices(Block(0, SAMPLES)))
    found = {}
    for device, population in populations.items():
        for level in ("lot", "wafer", "die"):
            only = {f"{device}.oxide_thickness.{level}": draws[f"{device}.oxide_thickness.{level}"]}
            thickness = population.silicon(only).device.oxide_thickness
            found[device, level] = thickness / population.nominal.oxide_thickness - 1
    return found


def test_correlations_are_seen_in_the_oxides(make_demo_process):
    found = drawn_oxides(make_demo_process())
    for level in ("lot", "wafer"):  # correlation 1: the same numbers, not nearly the same
        np.testing.assert_array_equal(found["n", level], found["p", level])
    seen = np.corrcoef(found["n", "die"], found["p", "die"])[0, 1]
    assert seen == pytest.approx(0.9, abs=4 * (1 - 0.9**2) / np.sqrt(SAMPLES))
    unlike = np.corrcoef(found["n", "die"], found["p", "lot"])[0, 1]
    assert unlike == pytest.approx(0.0, abs=4 / np.sqrt(SAMPLES))


@pytest.mark.parametrize("first, second", [("n", "p"), ("p", "n")])
def test_draws_of_one_device_do_not_depend_on_the_other(make_demo_process, first, second):
    """Whichever device the correlation names first, and whichever is drawn at all."""
    entry = {"inputs": [f"{first}.oxide_thickness.die", f"{second}.oxide_thickness.die"], "value": 0.9}
    file = make_demo_process({"correlation": [entry]})
    both, n_alone, p_alone = drawn_oxides(file), drawn_oxides(file, ["n"]), drawn_oxides(file, ["p"])
    for level in ("lot", "wafer", "die"):
        np.testing.assert_array_equal(n_alone["n", level], both["n", level])
        np.testing.assert_array_equal(p_alone["p", level], both["p", level])


@pytest.mark.parametrize(
    "pairs, said",
    [
        (
            [("n.dopants.device", "p.dopants.device", 0.5)],
            "neighbouring devices are independent here; lot, wafer and die",
        ),
        ([("n.lenght.die", "p.length.die", 0.5)], "'n.lenght.die' does not vary; did you mean 'n.length.die'?"),
        ([("n.mobility.die", "p.length.die", 0.5)], "correlation.0.inputs: 'n.mobility.die' does not vary; "),
        ([("x\x1b", "p.length.die", 0.5)], "'x\\x1b' does not vary; known: n.oxide_thickness.lot, "),
        ([("n.length.die", "n.length.die", 0.5)], "correlation 0.5 between n.length.die and n.length.die"),
        (
            [
                ("n.length.die", "p.length.die", 1.0),
                ("n.length.die", "n.width.die", 1.0),
                ("p.length.die", "n.width.die", 0.0),
            ],
            "option_a.toml: correlation: the correlations contradict each other",
        ),
    ],
)
def test_a_bad_correlation_is_refused(refusal, make_demo_process, pairs, said):
    entries = [{"inputs": [one, other], "value": value} for one, other, value in pairs]
    file = make_demo_process({"correlation": entries})
    for device in ("n", "p"):  # whichever device is asked about
        assert said in refusal(Population, file, device)
