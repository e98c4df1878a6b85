"""A column of measured values is read whole, or refused with file, row and column."""

import pytest

from studies.measured import read_column


@pytest.fixture
def write(tmp_path):
    """A function that writes a CSV file and gives its path."""

    def write_bytes(content):
        path = tmp_path / "oxide.csv"
        path.write_bytes(content)
        return path

    return write_bytes


@pytest.mark.parametrize(
    "content",
    [
        b"site,thickness_nm\n1,3.1\n2,3.3\n3,-0.2e1\n",
        b"site,thickness_nm\r\n1,3.1\r\n2,3.3\r\n3,-2\r\n",
        b"\xef\xbb\xbfthickness_nm\n3.1\n3.3\n-2",
        b'"thickness_nm","site, row"\n"3.1","a\nb"\n 3.3 ,c\n-2,d\n\n',
    ],
    ids=["plain", "windows", "byte-order mark", "quoted"],
)
def test_a_column_is_read(write, content):
    assert read_column(write(content), "thickness_nm") == (3.1, 3.3, -2.0)


@pytest.mark.parametrize(
    "content, said",
    [
        (b"thickness_nm\n3.1\nthick\n", "oxide.csv: line 3, thickness_nm = 'thick': a finite number is needed"),
        (b"thickness_nm\n3.1\nnan\n", "line 3, thickness_nm = 'nan': a finite number is needed"),
        (b"thickness_nm\n-inf\n3.1\n", "line 2, thickness_nm = '-inf': a finite number is needed"),
        (b"thickness_nm\n3.1\n1e999\n", "line 3, thickness_nm = '1e999': a finite number is needed"),
        (b"site,thickness_nm\n1,3.1\n2,\n", "line 3, thickness_nm = '': a finite number is needed"),
        (b"site,thickness_nm\n1,3.1\n2\n", "line 3, thickness_nm = None: a finite number is needed"),
        (b"thickness_nm\n3.1\n\x1b[31m\n", "line 3, thickness_nm = '\\x1b[31m': a finite number is needed"),
        (b"thickness_nm\n3.1\n", "oxide.csv: column 'thickness_nm' needs two values or more"),
        (b"thickness_nm\n", "oxide.csv: column 'thickness_nm' needs two values or more"),
        (b"thicknes_nm\n3.1\n3.3\n", "oxide.csv: no column 'thickness_nm'; did you mean 'thicknes_nm'?"),
        (b"a,b\n1,2\n3,4\n", "oxide.csv: no column 'thickness_nm'; known: a, b"),
        (b"", "oxide.csv: no column 'thickness_nm'; none is known"),
        (b"thickness_nm\n\xff\n", "oxide.csv: cannot be read ("),
        (b"thickness_nm\n" + 200_000 * b"1" + b"\n", "oxide.csv: cannot be read (field larger than field limit"),
    ],
)
def test_a_bad_column_is_refused(refusal, write, content, said):
    assert said in refusal(read_column, write(content), "thickness_nm")


def test_a_file_that_is_not_there(refusal, tmp_path):
    assert refusal(read_column, tmp_path / "no.csv", "a").endswith("no.csv: cannot be read (No such file or directory)")
    assert refusal(read_column, tmp_path, "a").endswith(": cannot be read (Is a directory)")
