"""Dimensions that the physics has no answer for are refused, never repaired."""

import pytest

from studies.population import Population

TABLE = {"kind": "table", "table_width_um": [0.1, 1.0], "table_factor": [1.4, 1.05]}


@pytest.mark.parametrize(
    "changes, width_um, length_um, said",
    [
        ({"width_bias_nm": -100.0}, 0.1, 1.0, "device.n.width_bias_nm = -100: leaves nothing of width_um = 0.1"),
        ({"length_bias_nm": -200.0}, 1.0, 0.13, "device.n.length_bias_nm = -200: leaves nothing of length_um = 0.13"),
        (
            {"variation.width": {"wafer_nm": 12.0, "die_nm": 5.0}},
            0.1,
            1.0,
            "device.n.variation.width: too large for an electrical width of 0.1 um; 8 sigmas must leave something",
        ),
        (
            {"variation.length.die_nm": 20.0},
            1.0,
            0.15,
            "device.n.variation.length: too large for an electrical length of 0.15 um",
        ),
        (
            {"edge": TABLE},
            0.09,
            1.0,
            "device.n.edge.table_width_um: the table starts at 0.1 um; an electrical width of 0.09",
        ),
        ({"edge": TABLE, "width_bias_nm": -20.0}, 0.11, 1.0, "an electrical width of 0.09 um is asked for"),
        (
            {"short_channel.kind": "charge sharing", "junction_depth_nm": 60.0},
            1.0,
            0.06,
            "length_um = 0.06: the charge-sharing trapezoid has closed",
        ),
        (
            {"scatter.dopants": "counted"},
            0.008,
            0.008,
            "1.6 dopants under a channel of 0.008 by 0.008 um; below 2 the counted law is not tabulated",
        ),
    ],
)
def test_refusals(refusal, make_plain_process, changes, width_um, length_um, said):
    population = Population(make_plain_process(changes), "n")
    message = refusal(population.geometry, width_um, length_um)
    assert "plain.toml: device.n" in message
    assert said in message


def test_just_inside_is_accepted(make_plain_process):
    """The table's first width itself, a channel as long as the trapezoid needs, eight sigmas and a little."""
    Population(make_plain_process({"edge": TABLE, "width_bias_nm": -20.0}), "n").geometry(0.12, 1.0)
    sharing = make_plain_process({"short_channel.kind": "charge sharing", "junction_depth_nm": 60.0})
    Population(sharing, "n").geometry(1.0, 0.13)
    assert Population(make_plain_process({"variation.width.die_nm": 12.0}), "n").geometry(0.097, 1.0).width < 1e-7


def test_bias_is_electrical_less_drawn(make_plain_process):
    population = Population(make_plain_process({"width_bias_nm": -20.0, "length_bias_nm": 5.0}), "n")
    geometry = population.geometry(0.12, 0.1)
    assert geometry.width == pytest.approx(100e-9, rel=1e-9, abs=0)
    assert geometry.length == pytest.approx(105e-9, rel=1e-9, abs=0)
    assert geometry.drawn_width == pytest.approx(120e-9, rel=1e-9, abs=0)


def test_the_shortest_length_follows_the_body_bias(refusal, make_plain_process):
    """Body bias widens the depletion region, and the trapezoid closes earlier."""
    file = make_plain_process({"short_channel.kind": "charge sharing", "junction_depth_nm": 60.0})
    Population(file, "n").geometry(1.0, 0.1)
    assert "has closed" in refusal(Population(file, "n", body_bias_v=10.0).geometry, 1.0, 0.1)
