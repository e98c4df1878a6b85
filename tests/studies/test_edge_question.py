"""The edge question, and the other questions with solved edges: right against direct solutions, refused in one line."""

import csv
import json
import tomllib
from dataclasses import replace

import numpy as np
import pytest

from physics.cross_section import solve_threshold
from physics.dopants import dopant_sigma
from physics.edge_surface import SolvedEdge
from physics.edges import NoEdge
from physics.threshold import oxide_capacitance
from studies import edge, spread
from studies.edge_notes import edge_width_notes, solved_edge_notes, verdict
from studies.edge_solutions import solutions
from studies.figures import drawn
from studies.job import Asked, load_job
from studies.population import Population
from studies.process_edge import Edge
from studies.section import edge_section
from studies.settings import Settings, Workers

# weak doping under a thick oxide: few nodes, quickly solved
FIELD = {"kind": "field oxide", "field_oxide_nm": 400.0, "shape": 0.25}
TRENCH = {"kind": "trench", "field_oxide_nm": 400.0, "trench_depth_nm": 600.0}
WEAK = {"oxide_thickness_nm": 20.0, "doping_per_cm3": 2e16, "edge": FIELD}
VARIED = {
    "variation.doping": {"wafer_percent": 4.0},
    "variation.oxide_thickness": {"wafer_percent": 3.0},
    "variation.width": {"wafer_nm": 10.0},
}
SOLVED = {"edge.method": "solved"}
WIDTHS = [0.15, 0.3, 2.0]


def ask(file, widths=WIDTHS, workers=None, **changes):
    """Answer an edge question."""
    question = edge.Question(device="n", width_um=list(widths), **changes)
    return edge.answer(question, file, Settings(), workers or Workers())


def test_shift_and_scatter_are_those_of_the_solution(make_plain_process):
    file = make_plain_process(WEAK)
    answer = ask(file, length_um=0.5, body_bias_v=0.7)
    population = Population(file, "n", body_bias_v=0.7)
    section = edge_section(population.nominal, population.record, "here")
    assert section.body_bias == 0.7
    for row, width in zip(answer.table.to_dict("records"), WIDTHS):
        solved = solve_threshold(replace(section, width=width * 1e-6))
        assert row["edge_shift_mv"] == pytest.approx(1e3 * solved.shift, rel=0.02, abs=0)
        low, high = row["edge_shift_low_mv"], row["edge_shift_high_mv"]
        assert low <= 1e3 * solved.shift * (1 + 1e-8) and 1e3 * solved.shift * (1 - 1e-8) <= high
        law = dopant_sigma(
            section.profile, population.silicon({}).state.depletion_width, width * 1e-6, 0.5e-6,
            oxide_capacitance(20e-9),
        )  # fmt: skip
        assert row["dopant_sigma_mv"] == pytest.approx(1e3 * law * row["dopant_sigma_ratio"], rel=1e-6, abs=0)
        assert row["dopant_sigma_mv_um"] == pytest.approx(
            row["dopant_sigma_mv"] * np.sqrt(width * 0.5), rel=1e-6, abs=0
        )


def test_the_equivalent_shape_gives_the_solution_s_shift(make_plain_process):
    """The shape told, put into the file, makes the closed form agree at that width."""
    row = ask(make_plain_process(WEAK), [0.3]).table.iloc[0]
    again = ask(make_plain_process(WEAK | {"edge": FIELD | {"shape": row.equivalent_shape}}), [0.3]).table.iloc[0]
    assert again.closed_form_shift_mv == pytest.approx(row.edge_shift_mv, rel=1e-6, abs=0)
    assert again.closed_form_agrees


def test_without_a_length_there_is_no_sigma_of_a_device(make_plain_process):
    table = ask(make_plain_process(WEAK)).table
    assert "dopant_sigma_mv" not in table and "dopant_sigma_mv_um" in table


def test_workers_do_not_change_the_answer(make_plain_process, monkeypatch, tmp_path):
    file, answers = make_plain_process(WEAK), []
    for number, workers in enumerate((Workers(), Workers(jobs=2, backend="threading"))):
        monkeypatch.setenv("WIDTHWISE_CACHE", str(tmp_path / str(number)))
        solutions.cache_clear()
        answers.append(ask(file, np.geomspace(0.1, 3, 9).round(3).tolist(), workers).table)
    assert answers[0].equals(answers[1])


def test_every_number_has_its_interval(make_plain_process):
    answer = ask(make_plain_process(WEAK | SOLVED), length_um=0.5)
    assert answer.samples == 0 and answer.notes
    exact = {"closed_form_shift_mv", "closed_form_over_solved", "closed_form_agrees", "electrical_width_um"}
    asked = {"process", "device", *edge.Question.model_fields}
    for name in set(answer.table) - exact - asked:
        if "_low" not in name and "_high" not in name:
            bounds = [column for column in answer.table if column.startswith(name.rsplit("_mv", 1)[0] + "_low")]
            assert bounds, name
    for estimate in answer.headlines.values():
        assert estimate.low < estimate.value < estimate.high


def test_the_table_s_shift_agrees_within_its_interval(make_plain_process):
    for shape in (FIELD, TRENCH):
        table = ask(make_plain_process(WEAK | {"edge": shape | {"method": "solved"}})).table
        for name in ("table_shift{}_mv", "table_dopant_sigma_ratio{}"):
            true = table[{"table_shift{}_mv": "edge_shift_mv"}.get(name, "dopant_sigma_ratio")]
            assert np.all(table[name.format("_low")] <= true * (1 + 1e-3 * np.sign(true)))
            assert np.all(true * (1 - 1e-3 * np.sign(true)) <= table[name.format("_high")])


@pytest.mark.parametrize(
    "closed, solved, said",
    [
        ([10.5, 2.0], [10.0, 2.1], "can be believed: its shift is within 10 % of the solution at every width"),
        ([10.5, 2.0], [10.0, 1.0], "is within 10 % of the solution only at W = 0.1 um: at W = 1 um it is 2 times too large"),
        ([3.0, -2.0], [10.0, 1.0], "is more than 10 % off at every width asked for: at W = 0.1 um it is 3.33 times too small"),
        ([3.0, -2.0], [10.0, 1.0], "at W = 1 um it has the wrong sign (3 mV off)"),
        ([3.0, 1.0], [0.0, 1.0], "only at W = 1 um"),
    ],
)  # fmt: skip
def test_the_verdict_in_words(closed, solved, said):
    record = Edge(kind="field oxide")
    assert said in verdict(record, [0.1, 1.0], closed, solved)
    assert "shape 1.57" in verdict(record, [0.1, 1.0], closed, solved)


def test_command_files_and_figure(widthwise, make_plain_process, tmp_path):
    file = tmp_path / "weak.toml"
    file.write_text(
        'title = "weak"\n[device.n]\nchannel = "n"\noxide_thickness_nm = 20\ngate = "n+ polysilicon"\n'
        'doping_per_cm3 = 2e16\n[device.n.edge]\nkind = "field oxide"\nshape = 0.25\nfield_oxide_nm = 400\n'
    )
    assert tomllib.loads(file.read_text())["device"]["n"]["edge"]["shape"] == 0.25
    words = ["edge", file, "--device", "n", "--width-um", 0.15, 0.3, 2, "--jobs", 1]
    finished = widthwise(*words, "--out", tmp_path / "results")
    assert finished.code == 0, finished.err
    assert "The field oxide's closed form (shape 0.25)" in " ".join(finished.out.split())
    with open(tmp_path / "results" / "edge.csv", newline="") as content:
        assert [row["width_um"] for row in csv.DictReader(content)] == ["0.15", "0.3", "2.0"]
    assert (tmp_path / "results" / "edge_1_weak.png").stat().st_size > 20_000
    told = json.loads(widthwise(*words, "--json").out)["answers"][0]
    assert {"edge_shift_mv at width_um 0.15", "dopant_sigma_mv_um at width_um 2"} <= told["headlines"].keys()


@pytest.mark.parametrize("shape", [FIELD, TRENCH | {"divot_nm": 60.0}], ids=["field oxide", "divot"])
def test_the_picture_shows_the_narrowest_section(make_plain_process, shape):
    file = make_plain_process(WEAK | {"edge": shape})
    answer = ask(file, [0.2, 1.0])
    assert answer.drawn["half_width_nm"] == pytest.approx(100, rel=1e-9)
    weight = answer.drawn["dopant_weight"]
    assert weight.shape == (answer.drawn["depth_nm"].size, answer.drawn["lateral_nm"].size)
    asked = Asked(name="edge_1_plain", kind="edge", file=file, question=edge.Question(device="n", width_um=[0.2, 1.0]))
    with drawn(asked, answer) as (figure, title):
        assert len(figure.axes) == 4 and "W = 0.2" in title


REFUSED = [
    ({"edge": {"kind": "field oxide"}}, {}, "device.n.edge: 'field_oxide_nm' is needed to solve a field oxide"),
    ({"edge": {"kind": "trench", "field_oxide_nm": 300.0}}, {}, "'trench_depth_nm' is needed to solve a trench"),
    ({"edge": {"kind": "none"}}, {}, 'device.n.edge.kind = "none": nothing to solve'),
    ({"edge": {"kind": "table", "table_width_um": [0.1, 1.0], "table_factor": [1.2, 1.0]}}, {}, 'kind = "table"'),
    ({"edge": FIELD, "width_bias_nm": -200.0}, {}, "width_bias_nm = -200: leaves nothing of width_um = 0.15"),
    ({"edge": FIELD | {"field_oxide_nm": 19.0}}, {}, "field_oxide_nm = 19: must be more than oxide_thickness_nm"),
    (SOLVED, {"width_um": [0.05]}, 'edge.method = "solved": the table starts at 0.06'),
]


@pytest.mark.parametrize("changes, asked, said", REFUSED, ids=[said for *_, said in REFUSED])
def test_what_cannot_be_solved_is_refused_before_anything_is_solved(refusal, make_plain_process, changes, asked, said):
    question = edge.Question(**{"device": "n", "width_um": WIDTHS} | asked)
    message = refusal(edge.check, question, make_plain_process(WEAK | changes))
    assert "plain.toml: device.n" in message and said in message


@pytest.mark.parametrize(
    "shape, said",
    [
        ({"kind": "field oxide", "method": "solved"}, "method = \"solved\" needs 'field_oxide_nm'"),
        (TRENCH | {"trench_depth_nm": None, "method": "solved"}, "method = \"solved\" needs 'trench_depth_nm'"),
        ({"kind": "none", "method": "solved"}, "'method' has no effect with kind = \"none\""),
        (FIELD | {"trench_depth_nm": 300.0}, "'trench_depth_nm' has no effect with kind = \"field oxide\""),
        (TRENCH | {"taper_nm": 100.0}, "'taper_nm' has no effect with kind = \"trench\""),
        ({"kind": "field oxide", "taper_nm": 100.0}, "'taper_nm' has no effect without 'field_oxide_nm'"),
        (TRENCH | {"trench_depth_nm": None, "divot_nm": 9.0}, "'divot_nm' has no effect without 'trench_depth_nm'"),
        (TRENCH | {"divot_nm": 600.0}, "divot_nm = 600 must be less than trench_depth_nm, 600"),
        (FIELD | {"field_implant_per_cm3": 1e17}, "'field_implant_per_cm3' and 'field_implant_depth_nm' go together"),
        (FIELD | {"method": "exact"}, "input should be 'closed form' or 'solved'"),
    ],
)  # fmt: skip
def test_geometry_that_cannot_be_is_refused(refusal, make_plain_process, shape, said):
    given = {key: value for key, value in shape.items() if value is not None}
    assert said in refusal(make_plain_process, WEAK | {"edge": given})


def test_fringe_dopants_have_no_effect_on_a_solution(refusal, make_plain_process):
    changes = WEAK | SOLVED | {"scatter": {"dopants": "counted", "fringe_dopants": True}}
    assert 'no effect with edge.method = "solved"' in refusal(make_plain_process, changes)


def test_solved_edges_in_a_population_are_the_direct_solution_s(make_plain_process):
    """Twenty sampled devices, each solved by itself: doping, oxide and width all varied."""
    file = make_plain_process(WEAK | SOLVED | VARIED)
    population, random = Population(file, "n"), np.random.default_rng(5)
    geometry = population.geometry(0.25, 1.0)
    draws = {item.name: random.standard_normal(20) for item in population.inputs}
    silicon = population.silicon(draws)
    device, section = (
        population.devices(draws, geometry, silicon),
        edge_section(population.nominal, population.record, ""),
    )
    shift = population.thresholds(draws, geometry, silicon, 0.05) - population.thresholds(
        draws, replace(geometry, edge=NoEdge()), silicon, 0.05
    )
    sections = tuple(
        replace(
            section,
            width=float(device.width[number]),
            oxide_thickness=float(device.oxide_thickness[number]),
            profile=section.profile.scaled(float(device.profile.doping[number] / section.profile.doping)),
        )
        for number in range(20)
    )
    assert shift == pytest.approx(solutions(sections).shift, rel=0.01, abs=0)


@pytest.mark.parametrize("law", ["counted", "normal"])
def test_the_dopants_sigma_and_skew_are_the_solution_s(make_plain_process, law):
    population = Population(make_plain_process(WEAK | SOLVED | {"scatter.dopants": law}), "n")
    geometry, silicon = population.geometry(0.2, 0.3), population.silicon({})
    device = population.devices({}, geometry, silicon)
    quantiles = np.polynomial.hermite_e.hermegauss(60)
    shift = population.scatter({"n.dopants.device": quantiles[0]}, geometry, device, silicon.state)
    weight = quantiles[1] / quantiles[1].sum()
    mean = weight @ shift
    sigma = np.sqrt(weight @ (shift - mean) ** 2)
    section = replace(edge_section(population.nominal, population.record, ""), width=geometry.width)
    solved, place = solutions((section,)), (section.profile, silicon.state.depletion_width, geometry.width, 0.3e-6)
    true = dopant_sigma(*place, oxide_capacitance(20e-9)) * solved.sigma_ratio[0]
    assert abs(mean) < 0.01 * sigma  # the mean stays the threshold's
    assert sigma == pytest.approx(true, rel=0.01, abs=0)
    if law == "counted":
        skew = weight @ (shift - mean) ** 3 / sigma**3
        count = section.profile.doping * silicon.state.depletion_width * geometry.width * 0.3e-6
        assert skew == pytest.approx(solved.skewness_ratio[0] * 3**1.5 / 4 / np.sqrt(count), rel=0.05, abs=0)


def test_a_spread_with_solved_edges(make_plain_process):
    """Mean and sigma against the closed form are moved as the solutions say."""
    question = spread.Question(device="n", width_um=[0.2, 3.0], length_um=1.0)
    file = make_plain_process(WEAK | SOLVED | VARIED)
    answer = spread.answer(question, file, Settings(samples=20_000), Workers())
    population = Population(file, "n")
    assert isinstance(population.nominal.edge, SolvedEdge)
    section = edge_section(population.nominal, population.record, "")
    for row, width in zip(answer.table.to_dict("records"), (0.2e-6, 3e-6)):
        shift = row["vth_nominal_v"] - row["vth_nominal_without_edges_v"]
        assert shift == pytest.approx(solve_threshold(replace(section, width=width)).shift, rel=0.01, abs=0)
        assert row["vth_mean_v"] == pytest.approx(row["vth_nominal_v"], rel=0, abs=2e-3)
    assert answer.notes[0].startswith("Edges: field oxide, its cross-section solved")


def width_notes(file, widths, **conditions):
    population = Population(file, "n", **conditions)
    return edge_width_notes(population, tuple(population.geometry(width, 1.0) for width in widths))


def test_a_spread_says_where_the_closed_form_fails(make_plain_process):
    (note,) = width_notes(make_plain_process(WEAK), [0.3, 2.0])
    assert note.startswith("Edges of device n, by a solution of the file's geometry: The field oxide's closed form (shape 0.25)")
    assert 'method = "solved"' in note
    trench = width_notes(make_plain_process(WEAK | {"edge": TRENCH}), [0.3, 2.0])
    assert "The trench's closed form" in trench[0]
    assert width_notes(make_plain_process(WEAK | {"edge": {"kind": "field oxide"}}), [0.3]) == []
    assert width_notes(make_plain_process({"edge": {"kind": "none"}}), [0.3]) == []


def test_near_the_table_s_border_there_is_a_note(make_plain_process):
    file = make_plain_process(WEAK | SOLVED)
    assert width_notes(file, [0.3]) == []
    assert "its last slope goes on" in width_notes(file, [0.08, 0.3])[0]


def test_variation_beyond_the_table_is_told(make_plain_process):
    for percent, told in ((5.0, 0), (8.0, 1)):
        file = make_plain_process(WEAK | SOLVED | {"variation.doping": {"lot_percent": percent}})
        notes = solved_edge_notes(Population(file, "n"))
        assert sum("doping varies so much" in note for note in notes) == told


def test_an_edge_is_not_compared_as_a_sample_is(refusal, make_job):
    text = make_job().read_text()
    text = text[: text.index("[[question]]")] + (
        '[[question]]\nask = "edge"\nprocess = ["option_a", "option_b"]\ncompare = true\ndevice = "n"\nwidth_um = [0.2]\n'
    )
    assert "'edge' is not sampled and cannot be compared so" in refusal(load_job, make_job(text=text), {})
    assert len(load_job(make_job(text=text.replace("compare = true\n", "")), {}).asked) == 2


def test_a_p_channel_is_moved_the_other_way(make_plain_process):
    file = make_plain_process(WEAK | SOLVED | {"channel": "p", "gate": "p+ polysilicon"})
    population = Population(file, "n")
    geometry, silicon = population.geometry(0.2, 1.0), population.silicon({})
    bare = population.thresholds({}, replace(geometry, edge=NoEdge()), silicon, 0.05)
    assert population.thresholds({}, geometry, silicon, 0.05) < bare < 0
    assert ask(file, [0.2]).table.edge_shift_mv[0] > 0  # of the magnitude
