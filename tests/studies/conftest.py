"""What the tests of the studies share: processes to vary, a refusal to read, the command to run.

Comparisons say abs=0 wherever they say rel: pytest.approx else allows 1e-12 besides, more than a dopant layer in metres.
"""

import copy
import io
import json
import tomllib
from contextlib import redirect_stderr, redirect_stdout
from importlib.resources import files
from typing import NamedTuple

import pytest

from studies.cli import main
from studies.demo import write_demo
from studies.errors import InputError
from studies.process_file import Process, ProcessFile
from studies.validated import validated

DEMO_TEXT = (files("studies.examples") / "option_a.toml").read_text(encoding="utf-8")
PLAIN = {
    "channel": "n",
    "oxide_thickness_nm": 3.0,
    "gate": "n+ polysilicon",
    "doping_per_cm3": 5e17,
    "edge": {"kind": "none"},
    "scatter": {"dopants": "off"},
}
SMALL_JOB = """
title = "small"
[settings]
seed = 7
samples = 2000
[process]
option_a = "option_a.toml"
option_b = "option_b.toml"
[[question]]
ask = "spread"
process = ["option_a", "option_b"]
device = "n"
length_um = 0.13
width_um = [0.12, 0.4]
[[question]]
ask = "timing"
process = ["option_a", "option_b"]
length_um = 0.13
width_um = [0.12, 0.16]
period_ps = 4500
paths = 1500
stages = 40
wire_capacitance_ff = 0.4
supply_v = 0.6
"""


@pytest.fixture(scope="session")
def demo_text():
    """The demo's process file, option A."""
    return DEMO_TEXT


def changed(table, changes):
    """A copy of nested tables with values put in by dotted key; None takes a key away."""
    table, changes = copy.deepcopy(table), copy.deepcopy(dict(changes))
    for dotted, value in changes.items():
        *path, key = dotted.split(".")
        place = table
        for part in path:
            place = place.setdefault(part, {})
        if value is None:
            del place[key]
        else:
            place[key] = value
    return table


@pytest.fixture
def make_demo_process(tmp_path):
    """A function giving the demo's option A, with values put in by dotted key."""

    def make(changes=()):
        path = tmp_path / "option_a.toml"
        table = changed(tomllib.loads(DEMO_TEXT), dict(changes))
        return ProcessFile(name="option_a", path=path, process=validated(Process, table, path))

    return make


@pytest.fixture
def make_plain_process(tmp_path):
    """A function giving a process of one device, "n", of which nothing varies, with the device's keys changed."""

    def make(changes=(), **top):
        path = tmp_path / "plain.toml"
        table = {"title": "plain", "device": {"n": changed(PLAIN, dict(changes))}} | top
        return ProcessFile(name="plain", path=path, process=validated(Process, table, path))

    return make


@pytest.fixture
def refusal():
    """A function that calls and gives the InputError's text, which must be one printable line."""

    def read(call, *arguments):
        with pytest.raises(InputError) as caught:
            call(*arguments)
        assert str(caught.value).isprintable()
        return str(caught.value)

    return read


class Finished(NamedTuple):
    """What a run of the command left."""

    code: int
    out: str
    err: str


def run_command(*arguments) -> Finished:
    """Run the command in this process."""
    out, err = io.StringIO(), io.StringIO()
    with redirect_stdout(out), redirect_stderr(err):
        try:
            code = main([str(argument) for argument in arguments])
        except SystemExit as stop:  # argparse's own way out, after --help
            code = stop.code
    return Finished(code, out.getvalue(), err.getvalue())


@pytest.fixture(scope="session")
def widthwise():
    """The command, run in this process."""
    return run_command


@pytest.fixture
def make_job(tmp_path):
    """A function that writes the demo's process files and a small job into a folder of the test; gives the job's path."""

    def make(replacements=(), text=SMALL_JOB):
        if not (tmp_path / "job.toml").exists():
            write_demo(tmp_path)
        for old, new in dict(replacements).items():
            assert old in text
            text = text.replace(old, new)
        (tmp_path / "job.toml").write_text(text, encoding="utf-8")
        return tmp_path / "job.toml"

    return make


@pytest.fixture
def one_spread(make_job):
    """A function that writes a job that takes little, one spread of one option; replacements as in make_job."""
    quick = {'["option_a", "option_b"]\ndevice': '"option_a"\ndevice', "samples = 2000": "samples = 1000"}
    whole = make_job(quick).read_text()
    return lambda replacements=(): make_job(replacements, text=whole[: whole.rindex("[[question]]")])


class Results(NamedTuple):
    """A finished run and its folder."""

    finished: Finished
    folder: object


@pytest.fixture(scope="session")
def small_results(tmp_path_factory):
    """The small job, run once. Option A misses its period on purpose: some numbers are then infinite."""
    folder = tmp_path_factory.mktemp("small")
    write_demo(folder)
    (folder / "job.toml").write_text(SMALL_JOB, encoding="utf-8")
    finished = run_command("run", folder / "job.toml", "--out", folder / "results", "--jobs", 1)
    return Results(finished, folder / "results")


HOSTILE = ("<script>alert(1)</script>", '"><img src=x onerror=alert(2)>', "{{7*7}}", "</title><b>bold</b>", "\x1b[31m\u202e")
HOSTILE_TEXT = " ".join(HOSTILE)
HOSTILE_NAME = "{{7+7}} &lt;b&gt; 'onload=alert(3) a'"  # a process's short name may hold none of < > * "
HOSTILE_JOB = """
title = TEXT
[settings]
seed = 3
samples = 1000
[process]
NAME = "a FILE.toml"
option_b = "option_b.toml"
[[question]]
ask = "spread"
process = [NAME, "option_b"]
device = TEXT
length_um = 0.13
width_um = [0.12, 0.16, 0.2, 1]
[[question]]
ask = "timing"
process = NAME
n_device = TEXT
length_um = 0.13
width_um = [0.12, 0.16]
period_ps = 4500
paths = 1500
stages = 40
supply_v = 0.6
"""


def _hostile_process(text: str, quoted: str) -> str:
    """A demo process whose every string that a person can set is hostile."""
    lines = []
    for line in text.replace("[device.n", f"[device.{quoted}").replace('"n.', f'"{quoted[1:-1]}.').splitlines():
        key = line.split(" = ")[0]
        lines.append(f"{key} = {quoted}" if key in ("title", "source", "does_not_claim") else line)
    return "\n".join(lines).replace(
        "doping = { ", f"doping = {{ law = 'empirical', values_csv = 'm <img src=x onerror=1>.csv', values_column = {quoted}, "
        "values_level = 'device', ", 1
    )  # fmt: skip


class HostileReport(NamedTuple):
    """A report made of hostile strings, and the folder that holds it."""

    finished: Finished
    page: object


@pytest.fixture(scope="session")
def hostile_report(tmp_path_factory):
    """A small job all of whose strings try to be markup, run once through the command."""
    folder = tmp_path_factory.mktemp("hostile")
    write_demo(folder)
    quoted = json.dumps(HOSTILE_TEXT)  # a JSON string is a TOML string
    for name, written in (("option_a", "a <img src=x onerror=alert(4)>"), ("option_b", "option_b")):
        text = (folder / f"{name}.toml").read_text(encoding="utf-8")
        (folder / f"{written}.toml").write_text(_hostile_process(text, quoted), encoding="utf-8")
    rows = "\n".join(str(1 + 0.01 * (row % 7)) for row in range(40))
    (folder / "m <img src=x onerror=1>.csv").write_text(f'"{HOSTILE_TEXT.replace(chr(34), 2 * chr(34))}"\n{rows}\n')
    job = HOSTILE_JOB.replace("TEXT", quoted).replace("NAME", json.dumps(HOSTILE_NAME))
    job = job.replace("a FILE", "a <img src=x onerror=alert(4)>")
    (folder / "job.toml").write_text(job, encoding="utf-8")
    finished = run_command("run", folder / "job.toml", "--out", folder / "results", "--jobs", 1)
    return HostileReport(finished, folder / "results" / "report.html")
