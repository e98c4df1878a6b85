"""What a job from somebody else may not do: read outside its folder, or put formulas into a spreadsheet."""

import pandas as pd
import pytest

from studies.demo import write_demo
from studies.errors import InputError
from studies.job import load_job
from studies.record import FORMULA_STARTS, inert_cells

JOB = """
title = "t"
[settings]
samples = 1000
[process]
NAME = FILE
[[question]]
ask = "spread"
process = NAME
device = "n"
length_um = 0.13
width_um = [0.2]
"""


@pytest.fixture
def job(tmp_path):
    write_demo(tmp_path / "elsewhere")
    write_demo(tmp_path / "jobs")

    def write(file, name="a"):
        text = JOB.replace("NAME", f"'{name}'").replace("FILE", f"'{file}'")
        (tmp_path / "jobs" / "job.toml").write_text(text)
        return tmp_path / "jobs" / "job.toml"

    return write


def ways_out(tmp_path):
    (tmp_path / "jobs" / "link.toml").symlink_to(tmp_path / "elsewhere" / "option_a.toml")
    return [
        "../elsewhere/option_a.toml",
        str(tmp_path / "elsewhere" / "option_a.toml"),
        "link.toml",
        "../jobs/../elsewhere/x",
    ]


@pytest.mark.parametrize("number", range(4))
def test_a_path_that_leads_out_is_refused(job, tmp_path, number):
    path = job(ways_out(tmp_path)[number])
    with pytest.raises(InputError, match="leads out of the job's folder; move it there or add --allow-outside"):
        load_job(path, {})


def test_it_can_be_allowed(job, widthwise):
    path = job("../elsewhere/option_a.toml")
    assert widthwise("run", path, "--jobs", 1).code == 2
    assert widthwise("run", path, "--jobs", 1, "--allow-outside").code == 0


def test_paths_inside_are_read(job, tmp_path):
    (tmp_path / "jobs" / "deep").mkdir()
    (tmp_path / "jobs" / "deep" / "p.toml").write_text((tmp_path / "jobs" / "option_a.toml").read_text())
    for file in ("deep/p.toml", "deep/../option_b.toml", str(tmp_path / "jobs" / "option_a.toml")):
        assert load_job(job(file), {}).asked


def test_measured_values_outside_are_refused(job, tmp_path):
    (tmp_path / "elsewhere" / "t.csv").write_text("t\n3.1\n3.2\n")
    law = '{ law = "empirical", values_csv = "../elsewhere/t.csv", values_column = "t", values_level = "wafer" }'
    option = tmp_path / "jobs" / "option_a.toml"
    lines = option.read_text().splitlines()
    place = next(number for number, line in enumerate(lines) if line.startswith("[device.n.variation]"))
    lines.insert(place + 1, f"flat_band = {law}")
    option.write_text("\n".join(lines))
    with pytest.raises(InputError, match="process.a: measured values = '.*t.csv': leads out"):
        load_job(job("option_a.toml"), {})
    assert load_job(job("option_a.toml"), {}, allow_outside=True).asked


@pytest.mark.parametrize("start", FORMULA_STARTS)
def test_no_cell_is_a_formula(start):
    table = pd.DataFrame({"process": [f"{start}1+1", "plain"], "value": [-1.5, 2.0]})
    found = inert_cells(table)
    assert list(found.process) == [f"'{start}1+1", "plain"] and list(found.value) == [-1.5, 2.0]


def test_a_process_named_like_a_formula(job, widthwise, tmp_path):
    assert widthwise("run", job("option_a.toml", "=1+1"), "--out", tmp_path / "out", "--jobs", 1).code == 0
    cells = [
        cell for line in (tmp_path / "out" / "spread.csv").read_text().splitlines()[1:] for cell in line.split(",")
    ]
    assert "'=1+1" in cells and not [cell for cell in cells if cell.startswith(("=", "@"))]
