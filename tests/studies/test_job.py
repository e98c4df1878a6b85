"""A job: read whole and refused whole, answered the same wherever it is computed."""

from pathlib import Path

import pytest

from studies import figures, spread, timing
from studies.demo import write_demo
from studies.job import load_job
from studies.settings import Workers

PLACES = [(1, "loky"), (2, "loky"), (4, "loky"), (2, "threading"), (4, "threading")]
TABLES = ("spread.csv", "spread_shares.csv", "timing.csv")


@pytest.fixture
def refused(refusal, make_job):
    """A function giving what is said of the small job with some text replaced."""
    return lambda replacements: refusal(load_job, make_job(replacements), {})


def test_a_job_is_read(make_job):
    job = load_job(make_job(), {})
    assert job.title == "small"
    assert job.settings.model_dump() == {"seed": 7, "samples": 2000, "precision": None}
    assert [(asked.name, asked.kind, asked.file.name, asked.file.path.name) for asked in job.asked] == [
        ("spread_1_option_a", "spread", "option_a", "option_a.toml"),
        ("spread_1_option_b", "spread", "option_b", "option_b.toml"),
        ("timing_2_option_a", "timing", "option_a", "option_a.toml"),
        ("timing_2_option_b", "timing", "option_b", "option_b.toml"),
    ]
    assert job.asked[0].question.device == "n"
    assert job.asked[2].question.wire_capacitance_ff == 0.4


def test_the_demo_s_own_job_is_read(make_job):
    folder = make_job().parent / "fresh"
    write_demo(folder)
    assert len(load_job(folder / "job.toml", {}).asked) >= 2


@pytest.mark.parametrize(
    "old, new, said",
    [
        ('title = "small"', "", "job.toml: title is missing"),
        ("seed = 7", "sede = 7", "job.toml: settings: unknown key 'sede'; did you mean 'seed'?"),
        ("seed = 7", "seed = -7", "job.toml: settings.seed = -7: input should be greater than or equal to 0"),
        ("seed = 7", "seed = 7.0", "job.toml: settings.seed = 7.0: input should be a valid integer"),
        (
            "samples = 2000",
            "samples = 999",
            "job.toml: settings.samples = 999: input should be greater than or equal to 1000",
        ),
        ("seed = 7", "precision = 0.1", "job.toml: settings: give 'samples' or 'precision', not both"),
        ('"option_a.toml"', '"option_c.toml"', "process.option_a = 'option_c.toml': no such file"),
        ('"option_a.toml"', '"."', ": is a folder, a TOML file is needed"),
        ('"option_a.toml"', "3", "job.toml: process.option_a = 3: input should be a valid string"),
        (
            '["option_a", "option_b"]',
            '"option_c"',
            "question 1.process: no process 'option_c' in this job; did you mean",
        ),
        ('["option_a", "option_b"]', '["option_a", "option_a"]', "job.toml: question 1.process: a name is given twice"),
        (
            '["option_a", "option_b"]',
            "[]",
            "question 1.process: the name of a process option, or a list of names, is needed",
        ),
        (
            '["option_a", "option_b"]',
            "[1]",
            "question 1.process: the name of a process option, or a list of names, is needed",
        ),
        ('ask = "spread"', 'ask = "sprad"', "job.toml: question 1.ask = 'sprad': did you mean 'spread'?"),
        ('ask = "spread"', "", "job.toml: question 1.ask = None: known: spread, timing"),
        ('device = "n"', "divice = 'n'", "job.toml: question 1: unknown key 'divice'; did you mean 'device'?"),
        ('device = "n"', "", "job.toml: question 1: device is missing"),
        ("stages = 40", "stages = 40.5", "job.toml: question 2: stages = 40.5: input should be a valid integer"),
        ("period_ps = 4500", "period_ns = 4.5", "question 2: unknown key 'period_ns'; did you mean 'period_ps'?"),
        (
            "period_ps = 4500",
            "period_nm = 4.5",
            "question 2: key 'period_nm' has the wrong unit; this quantity is given as",
        ),
        ("[0.12, 0.16]", "0.12", "job.toml: question 2: width_um = 0.12: input should be a valid list"),
        ("[0.12, 0.16]", "[]", "job.toml: question 2: width_um: list should have at least 1 item"),
        ("[[question]]", "[question]", "not TOML"),
        ("[process]", "[prozess]", "job.toml: unknown key 'prozess'; did you mean 'process'?"),
    ],
)
def test_a_bad_job_is_refused(refused, old, new, said):
    assert said in refused({old: new})


def test_paths_are_seen_from_the_job_s_folder(make_job, monkeypatch, tmp_path):
    path = make_job()
    monkeypatch.chdir(tmp_path.parent)
    assert load_job(Path(path.parent.name) / "job.toml", {}).asked[0].file.process.title.startswith("Option A")


def test_a_fingerprint_holds_what_determines_the_answers(make_job, tmp_path):
    first = load_job(make_job(), {}).fingerprint()
    assert load_job(make_job({"small": "another title"}), {}).fingerprint() == first
    assert load_job(make_job(), {"seed": 7}).fingerprint() == first
    assert load_job(make_job(), {"seed": 8}).fingerprint() != first
    assert load_job(make_job({"width_um = [0.12, 0.4]": "width_um = [0.12, 0.5]"}), {}).fingerprint() != first
    # a file of measured values counts with its content
    process = tmp_path / "option_a.toml"
    measured = 'doping = { law = "empirical", values_csv = "m.csv", values_column = "a", values_level = "lot" }'
    lines = ["doping = { lot" in line and measured or line for line in process.read_text().splitlines()]
    process.write_text("\n".join(lines))
    found = []
    for values in ("1\n2\n", "1\n3\n"):
        (tmp_path / "m.csv").write_text("a\n" + values)
        found.append(load_job(make_job(), {}).fingerprint())
    assert len({first, *found}) == 3


def test_physics_out_of_range_names_the_question(widthwise, make_job, tmp_path):
    """A channel near the trapezoid's shortest: nominal is inside, some samples are not."""
    process = tmp_path / "option_a.toml"
    job = make_job({"length_um = 0.13": "length_um = 0.094"})
    process.write_text(process.read_text().replace('kind = "quasi two-dimensional"', 'kind = "charge sharing"'))
    # the p device's trapezoid has closed already at nominal, so only the n device is asked
    job.write_text("[[question]]".join(job.read_text().split("[[question]]")[:2]))
    finished = widthwise("run", job, "--out", tmp_path / "results", "--jobs", 1)
    assert (finished.code, finished.out) == (2, "")
    assert "option_a.toml: spread_1_option_a: some samples leave the range of the physics" in finished.err
    assert finished.err[:-1].isprintable()
    assert not (tmp_path / "results").exists()


@pytest.fixture
def several_blocks(monkeypatch):
    """Blocks so small that even a few samples make several: the workers then have something to share."""
    monkeypatch.setattr(spread, "BLOCK", 512)
    monkeypatch.setattr(timing, "BLOCK", 256)
    monkeypatch.setattr(timing, "SLICE", 64)
    monkeypatch.setattr(figures, "draw_all", lambda *_: {})  # slow, and drawn in this process alone


@pytest.mark.usefixtures("several_blocks")
def test_the_same_bytes_on_any_workers_and_again(widthwise, make_job, tmp_path):
    job = make_job({"samples = 2000": "samples = 1100", '["option_a", "option_b"]': '"option_a"'})
    seen = []
    for number, (jobs, backend) in enumerate([*PLACES, (1, "loky")]):
        folder = tmp_path / f"results_{number}"
        finished = widthwise("run", job, "--jobs", jobs, "--backend", backend, "--out", folder)
        assert finished.code == 1, finished.err
        seen.append([(folder / name).read_bytes() for name in TABLES] + [finished.out])
    assert all(each == seen[0] for each in seen)


@pytest.mark.usefixtures("several_blocks")
def test_progress_is_told_to_its_end(make_job):
    told = {}

    def start(number, name):
        return lambda done, total: told.setdefault((number, name), []).append((done, total))

    answers = load_job(make_job(), {}).answers(Workers(jobs=1), start)
    assert [answer.samples for answer in answers] == [2000] * 4
    assert list(told) == list(
        enumerate(["spread_1_option_a", "spread_1_option_b", "timing_2_option_a", "timing_2_option_b"], 1)
    )
    assert all(counts[-1] == (2000, 2000) and len(counts) > 3 for counts in told.values())
