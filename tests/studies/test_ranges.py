"""Input that the physics has no answer for is refused before it gives one."""

import pytest

from studies import spread, timing
from studies.population import Population
from studies.settings import Settings, Workers
from studies.variation import random_inputs

pytestmark = pytest.mark.filterwarnings("error::RuntimeWarning")


def ask_spread(file, **changes):
    """Answer a small spread question."""
    asked = {"device": "n", "width_um": [0.2], "length_um": 0.15} | changes
    return spread.answer(spread.Question(**asked), file, Settings(samples=20_000), Workers())


def geometry(file, width_um=0.2, length_um=0.15, **conditions):
    """Geometry of the process's n device."""
    return Population(file, "n", **conditions).geometry(width_um, length_um)


@pytest.mark.parametrize("dopants", ["counted", "normal"])
def test_doping_below_the_intrinsic_density(refusal, make_plain_process, dopants):
    file = make_plain_process({"doping_per_cm3": 1e13, "scatter.dopants": dopants}, temperature_c=200.0)
    assert "doping_per_cm3" in refusal(geometry, file)


def test_a_trench_oxide_thinner_than_the_gate_s(refusal, make_plain_process):
    file = make_plain_process({"edge": {"kind": "trench", "field_oxide_nm": 1.0}})
    assert "field_oxide_nm" in refusal(geometry, file)


def test_a_channel_too_short_for_the_quasi_two_dimensional_form(refusal, make_plain_process):
    file = make_plain_process({"short_channel.kind": "quasi two-dimensional"})
    assert "length_um = 0.02" in refusal(geometry, file, 0.2, 0.02)


def test_doping_too_high_for_a_junction(refusal, make_plain_process):
    file = make_plain_process({"short_channel.kind": "quasi two-dimensional", "doping_per_cm3": 1e21})
    assert "doping_per_cm3" in refusal(geometry, file)


def test_counted_dopants_of_a_nearly_empty_surface(make_plain_process):
    layered = {"doping_per_cm3": 8e17, "surface_doping_per_cm3": 1.5e13, "surface_depth_nm": 265.0}
    file = make_plain_process(layered | {"scatter.dopants": "counted"})
    assert geometry(file, 0.192, 0.306, temperature_c=27.0).counted is not None


@pytest.mark.parametrize("edge", ["gate", "active"])
def test_rough_edges_that_eat_the_channel(refusal, make_plain_process, edge):
    scatter = {f"{edge}_edge_nm": 100.0, f"{edge}_edge_correlation_nm": 100.0, "dopants": "off"}
    file = make_plain_process({"scatter": scatter, "edge": {"kind": "field oxide"}})
    assert f"{edge}_edge_nm" in refusal(ask_spread, file)


@pytest.mark.parametrize("quantity", ["oxide_thickness", "doping"])
def test_variations_beyond_their_quantity(refusal, make_plain_process, quantity):
    sizes = {f"{level}_percent": 30.0 for level in ("lot", "wafer", "die")}  # 52 % in all: 2.7 % of them below 0
    assert quantity in refusal(ask_spread, make_plain_process({f"variation.{quantity}": sizes}))


def test_an_oxide_rougher_than_thick(refusal, make_plain_process):
    scatter = {"oxide_roughness_nm": 30.0, "oxide_roughness_correlation_nm": 100.0, "dopants": "off"}
    assert "oxide_roughness_nm" in refusal(ask_spread, make_plain_process({"scatter": scatter}))


def test_a_mobility_below_zero(refusal, make_demo_process):
    sizes = {f"{level}_percent": 30.0 for level in ("lot", "wafer", "die")}
    question = timing.Question(width_um=[0.2], length_um=0.13, period_ps=5000, paths=10, stages=4, supply_v=0.6)
    file = make_demo_process({"device.n.variation.mobility": sizes})
    assert "mobility" in refusal(timing.answer, question, file, Settings(samples=1000), Workers())


@pytest.mark.parametrize(
    "changes",
    [
        {"gate": None, "gate_work_function_ev": 4.6, "gate_doping_per_cm3": 1e20},
        {"scatter.gate_edge_correlation_nm": 20.0},
        {"scatter.grain_area_nm2": 100.0},
        {"scatter.edge_correlation": "gaussian"},
        {"scatter.grain_cells": "equal"},
    ],
    ids=lambda changes: "+".join(changes),
)
def test_keys_without_effect(refusal, make_plain_process, changes):
    refusal(make_plain_process, changes)


MEASURED = {"law": "empirical", "values_csv": "measured.csv", "values_column": "a", "values_level": "die"}


def test_a_size_beside_measured_values(refusal, make_plain_process):
    refusal(make_plain_process, {"variation.doping": MEASURED | {"die_percent": 3.0}})


@pytest.mark.parametrize("values", ["-1\n1\n", "-3\n-2\n", "-1\n3\n"], ids=["mean 0", "below 0", "one below 0"])
def test_measured_values_that_are_no_quantity(refusal, make_plain_process, tmp_path, values):
    (tmp_path / "measured.csv").write_text("a\n" + values)
    assert "measured.csv" in refusal(random_inputs, make_plain_process({"variation.doping": MEASURED}), "n")


def test_measured_widths_that_eat_the_channel(refusal, make_plain_process, tmp_path):
    (tmp_path / "measured.csv").write_text("a\n-500\n500\n")
    file = make_plain_process({"variation.width": MEASURED})
    assert "width" in refusal(geometry, file)


def test_an_intrinsic_density_beyond_its_fit(refusal, make_plain_process):
    file = make_plain_process(intrinsic_density="misiakos tsamakis", temperature_c=125.0)
    assert "intrinsic_density" in refusal(geometry, file)
