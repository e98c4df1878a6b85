"""What is not a TOML file of ours is refused in one line; what differs only in its bytes is read."""

import errno
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from studies.errors import InputError
from studies.process_file import Process, load_process


@pytest.fixture
def said_of(refusal, tmp_path):
    """A function giving what is said of a process file that holds some bytes."""

    def read(content):
        path = tmp_path / "option_a.toml"
        path.write_bytes(content)
        return refusal(load_process, path)

    return read


@pytest.mark.parametrize(
    "content, said",
    [
        (b"", "empty file"),
        (b" \r\n\t\n", "empty file"),
        (b"# nothing but a remark\n", "title is missing"),
        (b"title = \xff", "not UTF-8 text"),
        ("title = 'A'".encode("utf-16"), "not UTF-8 text"),
        (b"\x89PNG\r\n\x1a\n", "not UTF-8 text"),
        (b"PK\x03\x04", "not TOML ("),
        (b"title: Option A", "not TOML ("),
        (b"title = 'A'\ntitle = 'B'", "not TOML (Cannot overwrite a value (at"),
        (b"a = " + 5000 * b"[", "not TOML ("),
        (b"a = " + 5000 * b"1", "not TOML ("),
        (b"a = \x1b[31m", "not TOML ("),
        (b"'\x00' = 1", "not TOML ("),
        (b"title = 1", "title = 1: input should be a valid string"),
        (b"title = 'A'\ndevice = 3", "device = 3: input should be a valid dictionary"),
        (b"title = 'A'\ndevice = {}", "device: dictionary should have at least 1 item"),
        (b"title = 'A'\n[device]\nn = 1979-05-27", "device.n = datetime.date(1979, 5, 27): "),
    ],
)
def test_not_a_process_file(said_of, content, said):
    assert f"option_a.toml: {said}" in said_of(content)


@pytest.mark.parametrize(
    "path, said",
    [("nowhere.toml", "no such file"), (".", "is a folder, a TOML file is needed"), ("a\0b", "cannot be read")],
)
def test_no_file_there(refusal, tmp_path, path, said):
    assert said in refusal(load_process, tmp_path / path)


@pytest.mark.parametrize("number, said", [(errno.EACCES, "Permission denied"), (errno.EIO, "Input/output error")])
def test_a_file_that_cannot_be_read(refusal, tmp_path, demo_text, monkeypatch, number, said):
    def fails(path):
        raise OSError(number, said)

    (tmp_path / "option_a.toml").write_text(demo_text)
    monkeypatch.setattr(Path, "read_bytes", fails)  # a mode of 0 would not keep root out
    assert refusal(load_process, tmp_path / "option_a.toml").endswith(f"option_a.toml: cannot be read ({said})")


def test_a_file_too_large_to_be_ours(refusal, tmp_path):
    path = tmp_path / "option_a.toml"
    with open(path, "wb") as file:
        file.truncate(33_000_000)  # a hole, no blocks on the disk
    assert "option_a.toml: larger than 32 MB" in refusal(load_process, path)


@pytest.mark.parametrize(
    "dress",
    [
        lambda text: b"\xef\xbb\xbf" + text,
        lambda text: text.replace(b"\n", b"\r\n"),
        lambda text: b"\xef\xbb\xbf" + text.replace(b"\n", b"\r\n"),
        lambda text: text.rstrip(b"\n"),
    ],
    ids=["byte-order mark", "windows", "both", "no last line end"],
)
def test_other_editors_files_are_read(tmp_path, demo_text, dress):
    (tmp_path / "plain.toml").write_bytes(demo_text.encode())
    (tmp_path / "other.toml").write_bytes(dress(demo_text.encode()))
    assert load_process(tmp_path / "other.toml").process == load_process(tmp_path / "plain.toml").process


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """One folder for all of hypothesis' files."""
    return tmp_path_factory.mktemp("mutants")


STEADY = settings(
    max_examples=150, derandomize=True, database=None, deadline=None, suppress_health_check=list(HealthCheck)
)
TOKENS = [
    "nan",
    "-inf",
    "1e999",
    "-0.0",
    "true",
    '"x"',
    "[]",
    "{}",
    "[[1]]",
    "1979-05-27",
    "\x1b",
    "\n",
    "'''",
    "\u202e",
    "=",
    "]",
]


def understood_or_refused(path):
    """A valid process, or one line."""
    try:
        assert isinstance(load_process(path).process, Process)
    except InputError as error:
        assert str(error).isprintable()


@STEADY
@given(data=st.data())
def test_mutants_of_values(folder, demo_text, data):
    """The value of one line becomes something else."""
    lines = demo_text.splitlines()
    chosen = data.draw(st.sampled_from([number for number, line in enumerate(lines) if " = " in line]))
    value = st.sampled_from(TOKENS) | st.floats().map(repr) | st.integers().map(str) | st.text(max_size=8).map(repr)
    lines[chosen] = lines[chosen].split(" = ")[0] + " = " + data.draw(value)
    path = folder / "value.toml"
    path.write_text("\n".join(lines), encoding="utf-8", errors="surrogateescape")
    understood_or_refused(path)


@STEADY
@given(data=st.data())
def test_mutants_of_bytes(folder, demo_text, data):
    """A stretch of bytes is cut out and other bytes or tokens stand in its place."""
    content = demo_text.encode()
    start = data.draw(st.integers(0, len(content)))
    length = data.draw(st.integers(0, 60))
    put_in = data.draw(st.binary(max_size=6) | st.sampled_from(TOKENS).map(str.encode))
    path = folder / "bytes.toml"
    path.write_bytes(content[:start] + put_in + content[start + length :])
    understood_or_refused(path)
