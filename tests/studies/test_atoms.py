"""The atoms question: the same bits however it is computed, right against the physics, refused in one line."""

import csv
import json

import numpy as np
import pytest

from mc.ledger import Ledger
from physics.atom_dopants import place_dopants
from physics.atomistic import solve_device, uniform_threshold
from physics.edges import NoEdge
from physics.section_geometry import FieldStep, TrenchWall
from studies import atoms, atoms_devices
from studies.atoms_devices import only_dopants, prepared_kind
from studies.figures import drawn
from studies.job import Asked, load_job
from studies.population import Population
from studies.settings import Settings, Workers

# boxes of 2 nm: a device in some 30 ms
HEAVY = {"doping_per_cm3": 5e18}
TRENCH = {"kind": "trench", "field_oxide_nm": 300.0, "trench_depth_nm": 60.0}
FIELD = {"kind": "field oxide", "field_oxide_nm": 100.0}
ASKED = {"device": "n", "width_um": [0.03], "length_um": 0.03, "devices": 20, "mesh_nm": 2.0}


def ask(file, workers=None, seed=1, **changes):
    """Answer an atoms question."""
    return atoms.answer(atoms.Question(**ASKED | changes), file, Settings(seed=seed), workers or Workers())


def kind_of(file, **changes):
    """Devices of the first width asked for, and their population."""
    question = atoms.Question(**ASKED | changes)
    population = only_dopants(file, question)
    return population, prepared_kind(population, question, question.width_um[0])


@pytest.fixture
def part(tmp_path):
    """A part of a ledger."""
    ledger = Ledger(tmp_path / "blocks.sqlite")
    yield ledger.part("atoms_1_plain")
    ledger.close()


@pytest.mark.parametrize("backend", ["loky", "threading"])
def test_workers_do_not_change_a_bit(make_plain_process, backend):
    file = make_plain_process(HEAVY)
    one, two = (ask(file, workers) for workers in (Workers(), Workers(jobs=2, backend=backend)))
    assert one.table.equals(two.table)
    for name, value in one.drawn.items():
        assert np.array_equal(value, two.drawn[name], equal_nan=True), name


def test_more_devices_and_widths_keep_the_first_ones(make_plain_process):
    file = make_plain_process(HEAVY)
    few, many = ask(file), ask(file, devices=25, width_um=[0.03, 0.04])
    assert np.array_equal(many.drawn["shift_mv"][:20], few.drawn["shift_mv"])
    assert list(many.table.devices) == [25, 25] and many.evaluations == 50
    assert not np.array_equal(ask(file, seed=2).drawn["shift_mv"], few.drawn["shift_mv"])


def test_a_stopped_run_goes_on(make_plain_process, part, monkeypatch):
    file, question, place = make_plain_process(HEAVY), atoms.Question(**ASKED), Workers().keeping(part)
    whole = ask(file)

    def stop(done, total):
        assert total == 20
        if done == 7:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        atoms.answer(question, file, Settings(), place, stop)
    solutions, solve = [], atoms_devices.solve_device
    monkeypatch.setattr(atoms_devices, "solve_device", lambda *given: solutions.append(1) or solve(*given))
    seen = []
    again = atoms.answer(question, file, Settings(), place, lambda done, total: seen.append(done))
    assert len(solutions) == 13 and seen == list(range(7, 21))
    assert again.table.equals(whole.table)
    assert np.array_equal(again.drawn["surface_potential_v"], whole.drawn["surface_potential_v"])


def test_thresholds_are_the_physics_own(make_plain_process):
    file = make_plain_process(HEAVY)
    answer, (population, kind) = ask(file, body_bias_v=0.3), kind_of(file, body_bias_v=0.3)
    device, uniform = kind.device, uniform_threshold(kind.device)
    assert device.body_bias == 0.3 and device.mesh_spacing == 2e-9 and device.profile.doping == 5e24
    for number in (0, 11):
        lowering = solve_device(device, kind.placed(1, number), uniform).lowering
        assert answer.drawn["shift_mv"][number] == pytest.approx(-1e3 * lowering, rel=1e-9)
    fast = population.thresholds({}, kind.geometry, population.silicon({}), 0.05)
    # read where the sheet holds C_ox kT/q, some kT/q above 2 phi_F
    assert 0 < answer.table.threshold_uniform_v[0] - fast < 0.1


@pytest.mark.parametrize("changes", [{}, {"edge": TRENCH}, {"edge": FIELD}], ids=["none", "trench", "field oxide"])
@pytest.mark.parametrize(
    "layer", [{}, {"surface_doping_per_cm3": 1e18, "surface_depth_nm": 5.0}], ids=["even", "layer"]
)
def test_the_fast_model_s_shift_of_placed_dopants_has_its_law(make_plain_process, changes, layer):
    """It helps the estimates only if its mean is zero and its sigma the one that is told."""
    _, kind = kind_of(make_plain_process(HEAVY | layer | changes))
    random = np.random.default_rng(6)
    shifts = np.array([kind.fast_shift(place_dopants(kind.device, random)) for _ in range(2000)])
    assert abs(shifts.mean()) < 4 * kind.fast_channel_sigma / np.sqrt(2000)
    assert shifts.std() == pytest.approx(kind.fast_channel_sigma, rel=4 / np.sqrt(4000), abs=0)
    assert kind.fast_sigma == pytest.approx(kind.fast_channel_sigma, rel=1e-12, abs=0)


def test_the_fast_model_is_the_studies_own(make_plain_process):
    """The law that is drawn has the sigma that is told, also where the file counts the fringe."""
    changes = HEAVY | {"edge": FIELD, "scatter": {"dopants": "normal", "fringe_dopants": True}, "width_bias_nm": -5.0}
    population, kind = kind_of(make_plain_process(changes), field_nm=0.0)
    nodes, weights = np.polynomial.hermite_e.hermegauss(60)
    law = kind.fast_law(population, nodes)
    assert np.sqrt(weights @ law**2 / weights.sum()) == pytest.approx(kind.fast_sigma, rel=1e-2, abs=0)
    assert kind.fast_sigma > 1.1 * kind.fast_channel_sigma
    assert kind.device.width == pytest.approx(25e-9, rel=1e-12, abs=0) == kind.geometry.width


def test_sigma_ratio_and_lowering_at_a_measured_place(make_plain_process):
    """50 by 50 nm, 3 nm, 5e18 per cm3: 53 mV and no lowering; it is 22 mV at a tenth of the charge."""
    file, large = make_plain_process(HEAVY), {"width_um": [0.05], "length_um": 0.05, "devices": 100}
    row, low = (ask(file, **large, charge_level=level).table.iloc[0] for level in (1.0, 0.1))
    assert row.fast_sigma_mv == pytest.approx(46, rel=0.01) and row.vth_sigma_low_mv < 53 < row.vth_sigma_high_mv
    assert row.sigma_ratio == pytest.approx(row.vth_sigma_mv / row.fast_sigma_mv, rel=1e-12)
    assert row.lowering_low_mv < 0 < row.lowering_high_mv and row.lowering_high_mv - row.lowering_low_mv < 12
    assert low.lowering_low_mv > 0 and low.lowering_low_mv < 22 < low.lowering_high_mv


def test_every_number_has_its_interval(make_plain_process):
    answer = ask(make_plain_process(HEAVY))
    exact = {"threshold_uniform_v", "fast_sigma_mv"}
    asked = {"process", "device", *atoms.Question.model_fields}
    for name in set(answer.table) - exact - asked:
        if "_low" not in name and "_high" not in name:
            quantity = name.removesuffix("_mv")
            low, high = (answer.table[name.replace(quantity, f"{quantity}_{end}")][0] for end in ("low", "high"))
            assert low < answer.table[name][0] < high, name
    for estimate in answer.headlines.values():
        assert estimate.low < estimate.value < estimate.high and estimate.n == 20


def test_a_p_channel_is_the_mirror_image(make_plain_process):
    n, p = (ask(make_plain_process(HEAVY | change)) for change in ({}, {"channel": "p", "gate": "p+ polysilicon"}))
    assert np.array_equal(p.drawn["shift_mv"], -n.drawn["shift_mv"])
    assert p.table.lowering_mv[0] == n.table.lowering_mv[0] and p.table.vth_skew[0] == pytest.approx(
        -n.table.vth_skew[0]
    )
    assert p.table.threshold_uniform_v[0] < 0 < n.table.threshold_uniform_v[0]
    assert np.all(p.drawn["surface_potential_v"] == -n.drawn["surface_potential_v"])


@pytest.mark.parametrize(
    "changes, field, edge, said",
    [
        ({"edge": TRENCH}, None, TrenchWall, "Edges: trench, its geometry solved"),
        ({"edge": FIELD}, 30.0, FieldStep, "30 nm beside each edge"),
        ({"edge": FIELD | {"taper_nm": 20.0}}, None, FieldStep, "Edges: field oxide, its geometry solved"),
        ({"edge": FIELD}, 0.0, NoEdge, "left away here, mirrors along the channel (as field_nm = 0 asks)"),
        ({"edge": {"kind": "field oxide"}}, None, NoEdge, 'kind = "field oxide" without a geometry to solve'),
        ({}, None, NoEdge, "Edges: none, mirrors"),
    ],
)
def test_the_edges_are_the_file_s_where_it_gives_a_geometry(make_plain_process, changes, field, edge, said):
    question = atoms.Question(**ASKED, field_nm=field)
    file = make_plain_process(HEAVY | changes)
    population, kind = kind_of(file, field_nm=field)
    assert isinstance(kind.device.edge, edge)
    assert said in atoms.atoms_notes(population, question, [atoms.Row(
        kind=kind, level=0.0, found={}, correlation=0.9, shifts=np.zeros(1))])[3]  # fmt: skip
    if field is None and edge is not NoEdge:
        taper = 1e-9 * changes["edge"].get("taper_nm", 0.0)
        assert kind.device.edge.field_width == pytest.approx(taper + 2 * kind.depletion_width, rel=1e-9)


def test_notes_say_what_is_left_out(make_plain_process):
    notes = " ".join(ask(make_plain_process(HEAVY), charge_level=0.2).notes)
    for said in (
        "Only dopants vary",
        "quantum shift",
        "0.2 C_ox kT/q",
        "a square device",
        "mesh_nm",
        "mirrors",
        "no effect",
    ):
        assert said in notes
    wide, narrow = (ask(make_plain_process(HEAVY), width_um=[width]).notes[1] for width in (0.06, 0.015))
    assert "wider than long is lowered" in wide and "longer than wide is raised" in narrow


@pytest.mark.parametrize("widths", [[0.03], [0.03, 0.04]])
def test_the_figure_shows_one_device_and_all_thresholds(make_plain_process, widths):
    file = make_plain_process(HEAVY | {"edge": TRENCH})
    answer = ask(file, width_um=widths, field_nm=10.0)
    potential = answer.drawn["surface_potential_v"]
    assert potential.shape == (25, 15) and np.isfinite(potential[5:20]).all() and np.isnan(potential[:5]).all()
    asked = Asked(
        name="atoms_1_plain", kind="atoms", file=file, question=atoms.Question(**ASKED | {"width_um": widths})
    )
    with drawn(asked, answer) as (figure, title):
        assert len(figure.axes) == 1 + len(widths) and "W = 0.03" in title and "boxes of 2 nm" in title
        line = figure.axes[1].get_lines()[0]
        assert np.array_equal(line.get_ydata(), np.sort(answer.drawn["shift_mv"]))


REFUSED = [
    ({}, {"width_um": [3.0], "length_um": 3.0, "mesh_nm": 1.0}, "width_um = 3: the mesh would need"),
    ({}, {"width_um": [3.0], "length_um": 3.0, "mesh_nm": 1.0}, "widen mesh_nm"),
    ({}, {"width_um": [0.005]}, "must hold 4 boxes of mesh_nm, 2 nm"),
    ({"doping_per_cm3": 3e15}, {}, "dopants under a channel of 0.03 by 0.03 um"),
    ({"width_bias_nm": -40.0}, {}, "width_bias_nm = -40: leaves nothing of width_um = 0.03"),
    ({"length_bias_nm": -40.0}, {}, "length_bias_nm = -40: leaves nothing of length_um = 0.03"),
    ({"edge": TRENCH | {"divot_nm": 5.0}}, {}, "must be planar here, so the divot 0, not 5 nm; field_nm = 0 leaves"),
    ({"edge": FIELD | {"taper_nm": 50.0}}, {"field_nm": 20.0}, "longer than the field, 20 nm"),
]


@pytest.mark.parametrize("changes, asked, said", REFUSED, ids=[said for *_, said in REFUSED])
def test_what_cannot_be_solved_is_refused_before_anything_is_solved(refusal, make_plain_process, changes, asked, said):
    message = refusal(atoms.check, atoms.Question(**ASKED | asked), make_plain_process(HEAVY | changes))
    assert "plain.toml: device.n" in message and said in message


def test_a_device_without_a_solution_is_named(refusal, make_plain_process, monkeypatch):
    def lost(*_):
        raise RuntimeError("Newton's iteration did not end")

    monkeypatch.setattr(atoms_devices, "solve_device", lost)
    assert "width_um = 0.03, device 0: Newton's iteration did not end; change mesh_nm" in refusal(
        ask, make_plain_process(HEAVY)
    )
    monkeypatch.setattr(atoms_devices, "uniform_threshold", lost)
    assert "continuous doping: Newton's" in refusal(ask, make_plain_process(HEAVY))


def test_what_the_file_varies_has_no_effect(make_plain_process):
    changes = {
        "scatter": {"dopants": "off", "remainder_pair_mv_um": 3.0},
        "variation": {"doping": {"die_percent": 3.0}},
    }
    plain, varied = (ask(make_plain_process(HEAVY | change)).table for change in ({}, changes))
    assert plain.equals(varied)
    assert Population(make_plain_process(HEAVY | changes), "n").inputs  # the file's own population still varies


def test_command_files_and_growth(widthwise, tmp_path):
    file = tmp_path / "heavy.toml"
    file.write_text(
        'title = "heavy"\n[device.n]\nchannel = "n"\noxide_thickness_nm = 3\ngate = "n+ polysilicon"\n'
        'doping_per_cm3 = 5e18\n[device.n.edge]\nkind = "none"\n'
    )
    words = ["atoms", file, "--device", "n", "--width-um", 0.03, "--length-um", 0.03, "--mesh-nm", 2, "--jobs", 1]
    folder = tmp_path / "results"
    shifts = []
    for devices in (20, 30):  # the second goes on from the first
        finished = widthwise(*words, "--devices", devices, "--out", folder)
        assert finished.code == 0, finished.err
        with open(folder / "atoms.csv", newline="") as content:
            (row,) = csv.DictReader(content)
        assert row["devices"] == str(devices) and (folder / "atoms_1_heavy.png").stat().st_size > 20_000
        shifts.append(row["vth_sigma_mv"])
    with Ledger(folder / "blocks.sqlite")._connection as kept:
        assert kept.execute("select count(*) from results").fetchall() == [(30,)]
    assert shifts[0] != shifts[1]
    page = (folder / "report.html").read_text()
    assert "devices solved at each width" in page and "R. W. Hockney" in page
    told = json.loads(widthwise(*words, "--devices", 30, "--json").out)["answers"][0]
    assert str(told["headlines"]["vth_sigma_mv at width_um 0.03"]["value"]) == shifts[1]


def test_options_are_not_compared(refusal, make_job):
    text = make_job().read_text()
    text = text[: text.index("[[question]]")] + (
        '[[question]]\nask = "atoms"\nprocess = ["option_a", "option_b"]\ncompare = true\ndevice = "n"\n'
        "width_um = [0.05]\nlength_um = 0.05\n"
    )
    assert "'atoms' has dopants of its own for each option and cannot be compared so" in refusal(
        load_job, make_job(text=text), {}
    )
