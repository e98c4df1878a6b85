"""The command line: exit codes, flags that come from the records, one line for whatever cannot be used."""

import subprocess
import sys
from importlib import import_module

import pytest

from studies import __version__, cli, questions
from studies.job import load_job
from studies.questions import SUMMARIES
from studies.settings import Settings

HEAVY = ("numpy", "scipy", "pandas", "matplotlib", "seaborn", "pydantic", "joblib", "rich")
COMMANDS = ("new", "run", *SUMMARIES)
TIMING = {"width_um": [0.12], "length_um": 0.13, "period_ps": 4500.0, "paths": 100, "stages": 11, "supply_v": 0.6}
PAIR = {"device": "n", "pairs": 8, "yield": 0.97, "length_um": [0.2, 0.5]}
LOSS = {"device": "n", "width_um": [0.12, 0.2], "length_um": 0.13, "devices": 1000}
FLAGS = {  # a kind's questions, as a person types them; together every field with a value that is not its default
    "spread": [
        {"width_um": [0.12, 0.4], "length_um": 0.13, "device": "n"},
        {
            "width_um": [0.12],
            "length_um": 0.13,
            "device": "n",
            "temperature_c": -20.0,
            "body_bias_v": 0.5,
            "drain_v": 0.1,
        },
    ],
    "edge": [
        {"width_um": [0.12, 0.4], "device": "n"},
        {"width_um": [0.12], "device": "n", "length_um": 0.13, "temperature_c": -20.0, "body_bias_v": 0.5},
    ],
    "atoms": [
        {"width_um": [0.05, 0.1], "length_um": 0.05, "device": "n"},
        {"width_um": [0.05], "length_um": 0.05, "device": "n", "devices": 30, "charge_level": 0.1, "mesh_nm": 2.0}
        | {"field_nm": 40.0, "body_bias_v": 0.5, "temperature_c": -20.0},
    ],
    "timing": [
        TIMING,
        TIMING | {"temperature_c": 85.0, "fan_out": 2.0, "wire_capacitance_ff": 0.4, "width_ratio": 2.5, "yield": 0.9},
        TIMING | {"n_device": "n1", "p_device": "p1"},
    ],
    "pair": [
        PAIR | {"kind": "differential pair", "limit_mv": 4.0, "drain_current_ua": 2.0, "drain_v": 0.7},
        PAIR | {"kind": "current mirror", "limit_percent": 3.0, "current_per_square_ua": 0.1, "body_bias_v": 0.2},
        PAIR
        | {"kind": "differential pair", "limit_mv": 4.0, "gm_over_i_per_v": 20.0, "temperature_c": 0.0, "fingers": 2},
        PAIR
        | {"kind": "differential pair", "limit_mv": 4.0, "gm_over_i_per_v": 20.0, "grid_nm": 10.0, "distance_um": 9.0}
        | {"layout": "common centroid", "width_min_um": 0.3, "width_max_um": 50.0},
    ],
    "loss": [
        LOSS | {"vth_window_mv": 70.0, "fixed_area_mm2": 2.0, "spares": 4, "blocks": 2, "temperature_c": 85.0},
        LOSS | {"vth_low_v": 0.1, "vth_high_v": 0.3, "cell_area_um2": 0.4, "cell_length_um": 1.5, "body_bias_v": 0.2},
        LOSS
        | {"drive_floor_ua": 5.0, "leakage_ceiling_na": 100.0, "supply_v": 1.2, "fixed_area_mm2": 2.0, "drain_v": 0.1}
        | {"wafer_diameter_mm": 300.0, "edge_exclusion_mm": 3.0, "defects_per_cm2": 0.5, "clustering": 3.0},
        LOSS | {"drive_floor_percent": 70.0, "leakage_ceiling_times": 9.0, "supply_v": 1.2, "fixed_area_mm2": 2.0},
    ],
}


def fields_of(model):
    """Fields by the key that a person writes."""
    return {field.alias or name: field for name, field in model.model_fields.items()}


def flag(key):
    """A key as a flag."""
    return f"--{key.replace('_', '-')}"


def as_flags(values):
    """Values as a person types them."""
    words = []
    for name, value in values.items():
        words += [flag(name), *map(str, value if isinstance(value, list) else [value])]
    return words


@pytest.fixture
def asked(monkeypatch, make_job, widthwise):
    """A function giving the job that a command line asks for, without answering it."""

    def ask(kind, flags):
        seen = []
        monkeypatch.setattr(cli, "_answer", lambda job, given: seen.append(job) or 0)
        place = make_job() if kind == "run" else make_job().parent / "option_a.toml"
        finished = widthwise(kind, place, *flags)
        assert finished.code == 0, finished.err
        return seen[0]

    return ask


def test_help_is_quick_and_version_is_told():
    """`--help` imports no heavy library: the first thing a person types must not take a second."""
    script = (
        "import sys, studies.cli\n"
        "try: studies.cli.main(sys.argv[1:])\n"
        "except SystemExit as stop: print(stop.code)\n"
        f"print([name for name in {HEAVY} if name in sys.modules])"
    )
    for flag, said in (("--help", "usage: widthwise COMMAND"), ("--version", f"widthwise {__version__}")):
        words = [sys.executable, "-W", "error", "-c", script, flag]
        finished = subprocess.run(words, capture_output=True, text=True, timeout=60)
        assert finished.stdout.startswith(said), finished.stderr
        assert finished.stdout.endswith("\n0\n[]\n")


@pytest.mark.parametrize("command", COMMANDS)
def test_help_of_every_command(widthwise, command):
    finished = widthwise(command, "--help")
    assert (finished.code, finished.err) == (0, "")
    assert finished.out.startswith(f"usage: widthwise {command}")
    assert command in widthwise("--help").out


def test_no_arguments_is_help_and_bad_input(widthwise):
    finished = widthwise()
    assert finished.code == 2
    assert finished.out.startswith("usage: widthwise COMMAND")


@pytest.mark.parametrize("kind", SUMMARIES)
def test_summaries_are_the_questions_docstrings(kind):
    assert questions.question_module(kind) is import_module(f"studies.{kind}")
    assert questions.question_module(kind).Question.__doc__.splitlines()[0] == SUMMARIES[kind]


@pytest.mark.parametrize("kind", SUMMARIES)
def test_help_says_what_the_fields_say(widthwise, monkeypatch, kind):
    monkeypatch.setenv("COLUMNS", "2000")  # argparse breaks no line then
    text = widthwise(kind, "--help").out
    usage = text.split("\n\n")[0]
    for model in (questions.question_module(kind).Question, Settings):
        for key, field in fields_of(model).items():
            start = text.index(f"\n  {flag(key)} ") + 1
            entry = text[start : text.index("\n  --", start)]
            assert " ".join(field.description.split()) in " ".join(entry.split())
            assert (f"[{flag(key)} " in usage) != field.is_required()
            if not field.is_required() and field.default is not None:
                assert f"(default: {field.default})" in entry


@pytest.mark.parametrize("kind", SUMMARIES)
def test_every_field_has_a_flag_of_its_type(asked, kind):
    model = questions.question_module(kind).Question
    seen = set()
    for values in FLAGS[kind]:
        assert asked(kind, as_flags(values)).asked[0].question == model.model_validate(values)
        # a value that is the default would not show a flag that does nothing
        seen |= {key for key, value in values.items() if value != fields_of(model)[key].default}
    assert seen == set(fields_of(model))


@pytest.mark.parametrize("kind", SUMMARIES)
def test_settings_are_the_defaults_when_none_is_given(asked, kind):
    assert asked(kind, as_flags(FLAGS[kind][0])).settings == Settings()


@pytest.mark.parametrize("kind", SUMMARIES)
def test_required_flags_are_required(widthwise, make_job, kind):
    process = make_job().parent / "option_a.toml"
    fields = fields_of(questions.question_module(kind).Question)
    for required in (key for key, field in fields.items() if field.is_required()):
        given = as_flags({key: value for key, value in FLAGS[kind][0].items() if key != required})
        finished = widthwise(kind, process, *given)
        assert finished.code == 2
        assert f"required: {flag(required)};" in finished.err


@pytest.mark.parametrize("given", [{"seed": 0}, {"samples": 3000}, {"precision": 0.02}, {"seed": 9, "samples": 1000}])
def test_a_flag_beats_the_file_and_the_file_the_default(asked, given):
    from_file = {"seed": 7, "samples": 2000, "precision": None}
    assert asked("run", []).settings.model_dump() == from_file
    # samples and precision stand for each other: the one on the command line drives out the one in the file
    kept = from_file | ({"samples": None} if "precision" in given else {})
    assert asked("run", as_flags(given)).settings.model_dump() == kept | given


def test_samples_beat_a_precision_in_the_file(make_job):
    job = load_job(make_job({"samples = 2000": "precision = 0.05"}), {"samples": 3000})
    assert job.settings.model_dump() == {"seed": 7, "samples": 3000, "precision": None}


@pytest.mark.parametrize("name, value", [("seed", 3), ("samples", 1500), ("precision", 0.1)])
def test_single_questions_take_settings_too(asked, name, value):
    job = asked("spread", as_flags(FLAGS["spread"][0] | {name: value}))
    assert getattr(job.settings, name) == value
