"""Names, streams and flags as rough hands give them: refused or obeyed in one line, never a traceback."""

import subprocess
import sys
import tomllib

import pytest

from studies.job import load_job
from studies.measured import read_column

SPREAD = ["--device", "n", "--width-um", "0.12", "--length-um", "0.13", "--samples", "1000", "--jobs", "1"]


@pytest.mark.parametrize("kind", ["[3]", "{}"])
def test_a_kind_that_is_no_name(refusal, make_job, kind):
    assert "question 1.ask = " in refusal(load_job, make_job({'ask = "spread"': f"ask = {kind}"}), {})


def test_known_words_with_controls(refusal, make_plain_process, make_demo_process, tmp_path):
    (tmp_path / "measured.csv").write_text('"a\nb\x1b"\n1\n2\n')
    assert "known: a\\x0ab" in refusal(read_column, tmp_path / "measured.csv", "zzz")


def test_a_row_with_more_cells_than_columns(refusal, tmp_path):
    (tmp_path / "measured.csv").write_text("thickness_nm\n3,1\n3,2\n")
    assert "line 2" in refusal(read_column, tmp_path / "measured.csv", "thickness_nm")


def test_a_long_path_still_names_its_file(refusal, tmp_path):
    assert "measured.csv" in refusal(read_column, tmp_path / ("x" * 120) / "measured.csv", "a")


@pytest.mark.parametrize("place", ["nul", "new nul", "new long", "out long"])
def test_names_that_no_file_can_have(widthwise, refusal, one_spread, tmp_path, place):
    if place == "nul":
        refusal(read_column, tmp_path / "a\0b", "a")
    elif place == "out long":
        assert widthwise("run", one_spread(), "--jobs", 1, "--out", tmp_path / ("y" * 300)).code == 2
    else:
        assert widthwise("new", tmp_path / ("a\0b" if place == "new nul" else "y" * 300)).code == 2


@pytest.mark.parametrize("name", ["a/b", "../x", r"nul\u0000", "x" * 300, r"line\nbreak"])
def test_names_that_are_no_file_names_are_refused_first(refusal, one_spread, name):
    changes = {'process = "option_a"': f'process = "{name}"', "option_a =": f'"{name}" ='}
    refusal(load_job, one_spread(changes), {})


@pytest.mark.filterwarnings("ignore:Glyph")
@pytest.mark.parametrize("control", [r"\u001b", r"\u009b"])
def test_controls_in_a_device_s_name_are_not_obeyed(widthwise, make_job, control):
    process = make_job().parent / "option_a.toml"
    head = process.read_text().split("# The two devices of a die")[0]
    process.write_text(head.replace("[device.n", f'[device."n{control}[31m"'))
    name = tomllib.loads(f'name = "n{control}[31m"')["name"]
    finished = widthwise("spread", process, *SPREAD, "--device", name)
    assert finished.code == 0
    assert not {"\x1b", "\x9b"} & set(finished.out)


def test_controls_in_json(widthwise, make_job):
    process = make_job().parent / "option_a.toml"
    process.write_text(process.read_text().replace('title = "Option A', 'title = "\\u009b31m \\u202e Option A'))
    finished = widthwise("spread", process, *SPREAD, "--json")
    assert finished.code == 0 and not {"\x9b", "\u202e"} & set(finished.out)


def test_every_question_is_checked_before_the_first_is_answered(make_job, widthwise, monkeypatch):
    def begun(*_, **__):
        raise AssertionError("the first question was begun")

    monkeypatch.setattr("studies.spread.run", begun)
    job = make_job({"wire_capacitance_ff = 0.4": "n_device = 'm'"})
    assert "device 'm' is not there" in widthwise("run", job, "--jobs", 1).err


def test_a_bad_flag_is_not_the_file_s_fault(widthwise, make_job):
    assert "job.toml" not in widthwise("run", make_job(), "--samples", 5).err


def test_every_backend_offered_works(widthwise, make_job):
    words = [*SPREAD, "--samples", "70000", "--jobs", "2", "--backend", "multiprocessing"]
    assert widthwise("spread", make_job().parent / "option_a.toml", *words).code == 0


@pytest.mark.parametrize("place", ["closed pipe", "/dev/full"])
def test_output_that_cannot_be_written_is_no_missed_target(make_job, place):
    words = [sys.executable, "-m", "studies.cli", "spread", make_job().parent / "option_a.toml", *SPREAD]
    with open("/dev/full", "w") as full:
        output = subprocess.PIPE if place == "closed pipe" else full
        process = subprocess.Popen(words, stdout=output, stderr=subprocess.PIPE, text=True)
    if place == "closed pipe":
        process.stdout.close()
    said = process.stderr.read()
    assert process.wait(60) != 1 and "Traceback" not in said


def test_a_stream_of_plain_ascii(make_job):
    words = [sys.executable, "-m", "studies.cli", "spread", str(make_job().parent / "option_a.toml"), *SPREAD]
    finished = subprocess.run(words, capture_output=True, env={"PYTHONIOENCODING": "ascii"}, timeout=60)
    assert finished.returncode == 0


def test_a_negative_number_with_an_exponent(widthwise, make_job):
    words = [*SPREAD, "--temperature-c", "-2e1"]
    assert widthwise("spread", make_job().parent / "option_a.toml", *words).code == 0
