"""Two thousand mutants of process, job and CSV files, run to their end: a valid answer, or exit 2 and one line.

The line names the file, and the key where one line's value was changed. Nothing is written outside the folder, nothing
takes ten seconds.
"""

import time

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from studies.demo import write_demo

JOB = """title = "fuzz"
[settings]
seed = 3
samples = 1000
[process]
option_a = "process.toml"
[[question]]
ask = "spread"
process = "option_a"
device = "n"
length_um = 0.13
width_um = [0.2, 0.5]
drain_v = 0.05
body_bias_v = 0.1
temperature_c = 40
"""
VALUES = "thickness,note\n3.1,a\n3.2,b\n3.3,c\n3.15,d\n3.25,e\n"
WORDS = [
    "nan", "-inf", "1e999", "-0.0", "0", "-1", "1e-30", "1e30", "99999999999999999999", "true", '"x"', '"1.0"', "[]", "{}",
    "[[1]]", "[1, 2]", "1979-05-27", "\x1b[31m", "\n", "'''", "\u202e", "=", "]", "\ufeff", "\r\n", "'../../etc/passwd'",
    '"<script>"', "\x00", '"' + "n" * 5000 + '"',
]  # fmt: skip


def steady(examples):
    return settings(
        max_examples=examples,
        derandomize=True,
        database=None,
        deadline=None,
        suppress_health_check=list(HealthCheck),
    )


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """A job of one small question, its process with measured values, and an empty place beside it."""
    place = tmp_path_factory.mktemp("fuzz") / "job"
    write_demo(place)
    process = (place / "option_a.toml").read_text(encoding="utf-8").split("[device.p]")[0]
    law = '{ law = "empirical", values_csv = "values.csv", values_column = "thickness", values_level = "wafer" }'
    lines = [
        f"oxide_thickness = {law}" if line.startswith("oxide_thickness =") else line for line in process.splitlines()
    ]
    for name in ("option_a.toml", "option_b.toml"):
        (place / name).unlink()
    (place / "pristine.toml").write_text("\n".join(lines), encoding="utf-8")
    return place


def put(folder, process=None, job=JOB, values=VALUES):
    """Write the three files, each text or bytes."""
    pristine = (folder / "pristine.toml").read_bytes()
    for name, content in (("process.toml", process or pristine), ("job.toml", job), ("values.csv", values)):
        data = content if isinstance(content, bytes) else content.encode("utf-8", "surrogatepass")
        (folder / name).write_bytes(data)


def everything(folder):
    return sorted(path.relative_to(folder.parent) for path in folder.parent.rglob("*"))


def answered_or_refused(widthwise, folder, key=None):
    """Run the job; a refusal is one line that names a file of the job and, where given, the key. Returns the code."""
    before, started = everything(folder), time.monotonic()
    finished = widthwise("run", folder / "job.toml", "--jobs", 1)
    assert time.monotonic() - started < 10
    assert everything(folder) == before
    if finished.code == 2:
        assert finished.out == "" and finished.err.count("\n") == 1 and finished.err[:-1].isprintable()
        named = [name for name in ("process.toml", "job.toml", "values.csv", "option_a") if name in finished.err]
        assert named or "spread_1" in finished.err, finished.err
        if key is not None:
            assert key in finished.err or "not TOML" in finished.err, (key, finished.err)
    else:
        assert finished.code == 0 and "sigma(Vth)" in finished.out
    return finished.code


def test_the_unchanged_job_is_answered(widthwise, folder):
    put(folder)
    assert answered_or_refused(widthwise, folder) == 0


VALUE = (
    st.sampled_from(WORDS)
    | st.floats().map(repr)
    | st.floats(-1e3, 1e3).map(repr)
    | st.integers().map(str)
    | st.text(max_size=8).map(repr)
)


def with_a_value_changed(text, data):
    lines = text.splitlines()
    chosen = data.draw(st.sampled_from([number for number, line in enumerate(lines) if " = " in line]))
    lines[chosen] = lines[chosen].split(" = ")[0] + " = " + data.draw(VALUE)
    return "\n".join(lines)


def with_bytes_changed(content, data):
    start, length = data.draw(st.integers(0, len(content))), data.draw(st.integers(0, 60))
    put_in = data.draw(st.binary(max_size=6) | st.sampled_from(WORDS).map(lambda word: word.encode("utf-8")))
    return content[:start] + put_in + content[start + length :]


@steady(600)
@given(data=st.data())
def test_values_of_a_process(widthwise, folder, data):
    put(folder, process=with_a_value_changed((folder / "pristine.toml").read_text(encoding="utf-8"), data))
    answered_or_refused(widthwise, folder)


@steady(400)
@given(data=st.data())
def test_bytes_of_a_process(widthwise, folder, data):
    put(folder, process=with_bytes_changed((folder / "pristine.toml").read_bytes(), data))
    answered_or_refused(widthwise, folder)


@steady(400)
@given(data=st.data())
def test_values_of_a_job(widthwise, folder, data):
    put(folder, job=with_a_value_changed(JOB, data))
    answered_or_refused(widthwise, folder)


@steady(300)
@given(data=st.data())
def test_bytes_of_a_job(widthwise, folder, data):
    put(folder, job=with_bytes_changed(JOB.encode(), data))
    answered_or_refused(widthwise, folder)


@steady(300)
@given(data=st.data())
def test_bytes_of_measured_values(widthwise, folder, data):
    put(folder, values=with_bytes_changed(VALUES.encode(), data))
    answered_or_refused(widthwise, folder)


@pytest.mark.parametrize("key", ["oxide_thickness_nm", "doping_per_cm3", "length_um", "drain_v", "width_um", "seed"])
@pytest.mark.parametrize("value", ["nan", '"1.0"', "[[1]]", "-1", "1e999", "true"])
def test_a_bad_value_is_refused_by_its_key(widthwise, folder, key, value):
    process = (folder / "pristine.toml").read_text(encoding="utf-8")
    in_job = any(line.startswith(f"{key} =") for line in JOB.splitlines())
    lines = (JOB if in_job else process).splitlines()
    changed = "\n".join(f"{key} = {value}" if line.startswith(f"{key} =") else line for line in lines)
    put(folder, **({"job": changed} if in_job else {"process": changed}))
    assert answered_or_refused(widthwise, folder, key) == 2


def test_a_table_of_a_million_entries(widthwise, folder):
    put(folder, process="\n".join(f"key_{number} = {number}" for number in range(1_000_000)))
    assert answered_or_refused(widthwise, folder) == 2
