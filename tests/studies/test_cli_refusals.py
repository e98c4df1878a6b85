"""What cannot be used: exit code 2, one line on the error stream, nothing on the other, nothing on the disk."""

import pytest

SPREAD = ["--width-um", "0.12", "--length-um", "0.13", "--device", "n", "--samples", "1000", "--jobs", "1"]


@pytest.fixture
def refused(widthwise):
    """A function giving the one line that a command line is refused with."""

    def run(*words):
        finished = widthwise(*words)
        assert (finished.code, finished.out) == (2, "")
        assert finished.err.endswith("\n") and finished.err[:-1].isprintable()
        return finished.err

    return run


@pytest.mark.parametrize(
    "words, said",
    [
        (["sprad"], "widthwise: no command 'sprad'; did you mean 'spread'?"),
        (["\x1b[31m\n"], "widthwise: no command '\\x1b[31m\\x0a'; known: new, keys, run, fit, compare, spread, timing, loss, edge, atoms, pair"),
        (["--versio"], "widthwise: unknown argument --versio; did you mean '--version'?"),
        (["-x"], "widthwise: unknown argument -x; see widthwise --help"),
        (["new"], "widthwise new: the following arguments are required: DIR"),
        (["run"], "widthwise run: the following arguments are required: JOB.toml"),
        (["run", "job.toml", "--sample", "9"], "widthwise run: unknown argument --sample; did you mean '--samples'?"),
        (["run", "job.toml", "--out", "x", "--jbos", "1"], "unknown argument --jbos; did you mean '--jobs'?"),
        (["run", "job.toml", "more"], "widthwise run: unknown argument more"),
        (["run", "job.toml", "--seed", "one"], "argument --seed: invalid int value: 'one'"),
        (["run", "job.toml", "--seed"], "argument --seed: expected one argument"),
        (["run", "nowhere.toml"], "nowhere.toml: no such file"),
        (["spread", "nowhere.toml", *SPREAD], "nowhere.toml: no such file"),
        (["spread", "p.toml", "--temp", "3"], "unknown argument --temp"),  # no abbreviations: they break later
        (["timing", "p.toml", "--paths", "1.5"], "argument --paths: invalid int value: '1.5'"),
    ],
)
def test_bad_command_lines(refused, words, said):
    assert said in refused(*words)


@pytest.mark.parametrize(
    "words, said",
    [
        (["--seed", "-1"], "command line: seed = -1: input should be greater than or equal to 0"),
        (["--samples", "10"], "command line: samples = 10: input should be greater than or equal to 1000"),
        (["--precision", "0.1"], "command line: give 'samples' or 'precision', not both"),
        (["--jobs", "0"], "command line: jobs = 0: input should be greater than or equal to 1"),
        (["--backend", "dask"], "command line: backend = 'dask': input should be 'loky'"),
        (["--width-um", "0.2", "0.1"], "widthwise spread: width_um: widths must increase, each given once"),
        (["--width-um", "nan"], "widthwise spread: width_um.0 = nan: input should be a finite number"),
        (["--width-um", "-0.1"], "widthwise spread: width_um.0 = -0.1: input should be greater than 0"),
        (["--length-um", "0"], "widthwise spread: length_um = 0.0: input should be greater than 0"),
        (["--drain-v", "-1"], "widthwise spread: drain_v = -1.0: input should be greater than or equal to 0"),
        (["--device", "m"], "option_a.toml: device 'm' is not there; known: n, p"),
        (["--width-um", "0.019"], "option_a.toml: device.n.width_bias_nm = -20: leaves nothing of width_um = 0.019"),
    ],
)
def test_bad_questions(refused, make_job, tmp_path, words, said):
    folder = tmp_path / "results"
    process = make_job().parent / "option_a.toml"
    assert said in refused("spread", process, *SPREAD, *words, "--out", folder)  # of a flag given twice the last counts
    assert not folder.exists()


@pytest.mark.parametrize(
    "words, said",
    [
        (["--p-device", "n"], 'device.n.channel: p_device needs a device with channel = "p"'),
        (["--n-device", "p"], 'device.p.channel: n_device needs a device with channel = "n"'),
        (["--stages", "1"], "widthwise timing: stages = 1: input should be greater than or equal to 2"),
        (["--yield", "1"], "widthwise timing: yield = 1.0: input should be less than 1"),
    ],
)
def test_bad_timing_questions(refused, make_job, words, said):
    timing = ["--width-um", "0.12", "--length-um", "0.13", "--period-ps", "4500", "--paths", "10"]
    timing += ["--stages", "4", "--supply-v", "0.6", "--jobs", "1"]
    assert said in refused("timing", make_job().parent / "option_a.toml", *timing, *words)


def test_timing_needs_a_mobility(refused, make_job, demo_text):
    process = make_job().parent / "option_a.toml"
    process.write_text(demo_text.replace("mobility_cm2_per_vs = 85\n", ""))
    timing = ["--width-um", "0.12", "--length-um", "0.13", "--period-ps", "4500", "--paths", "10", "--stages", "4"]
    message = refused("timing", process, *timing, "--supply-v", "0.6")
    assert "option_a.toml: device.p: timing needs 'mobility_cm2_per_vs'" in message


def test_a_spread_of_nothing_is_refused(refused, tmp_path):
    process = tmp_path / "still.toml"
    process.write_text(
        'title = "still"\n[device.n]\nchannel = "n"\noxide_thickness_nm = 3\ngate = "n+ polysilicon"\n'
        'doping_per_cm3 = 5e17\nedge = { kind = "none" }\nscatter = { dopants = "off" }\n'
        "variation = { mobility = { die_percent = 2 } }\n"  # moves currents, not thresholds
    )
    assert "still.toml: device.n: nothing varies" in refused("spread", process, *SPREAD)


def test_new_writes_the_demo_and_refuses_to_overwrite(widthwise, refused, tmp_path):
    folder = tmp_path / "deep" / "demo"
    finished = widthwise("new", folder)
    assert finished.code == 0
    written = sorted(str(path) for path in folder.iterdir())
    assert finished.out.splitlines() == written and len(written) >= 3
    assert f"widthwise run {folder}/job.toml" in finished.err
    (folder / "job.toml").write_text("mine")
    (folder / "option_a.toml").unlink()
    assert "job.toml: is there already; choose another folder" in refused("new", folder)
    assert (folder / "job.toml").read_text() == "mine"
    assert not (folder / "option_a.toml").exists()  # all or nothing


def test_new_into_a_file(refused, tmp_path):
    (tmp_path / "file").write_text("")
    assert "file: cannot be written (File exists)" in refused("new", tmp_path / "file")


def test_stopping_by_hand(widthwise, make_job, monkeypatch):
    def stops(*_):
        raise KeyboardInterrupt

    monkeypatch.setattr("studies.job.Job.answers", stops)
    finished = widthwise("run", make_job(), "--out", make_job().parent / "results")
    assert finished == (130, "", "stopped; the same command goes on from here\n")
