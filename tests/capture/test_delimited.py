"""CSV as spreadsheets and oscilloscopes write it, and one line on each way in which it can be wrong."""

import numpy as np
import pytest

from pdclass.capture import delimited
from pdclass.capture.delimited import read_columns, read_header
from pdclass.errors import InputError


@pytest.fixture
def written(tmp_path):
    """Write bytes into a CSV file."""

    def write(content):
        path = tmp_path / "x.csv"
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return path

    return write


def read(path, numbers=("a",), texts=(), skip_lines=0):
    opened = read_header(path, skip_lines=skip_lines)
    return read_columns(opened, [n for n in numbers if opened.place(n, of="here") >= 0], list(texts))


@pytest.mark.parametrize("mark", [",", ";", "\t"])
@pytest.mark.parametrize("end", ["\n", "\r\n"])
@pytest.mark.parametrize("bom", [b"", b"\xef\xbb\xbf"])
def test_every_mark_and_line_end_is_read(written, mark, end, bom):
    """Commas, semicolons and tabs, both line ends, with and without byte order mark give the same columns."""
    text = end.join([f"a{mark}b", f"1.5{mark}x", f"{mark}", f"-2e3{mark} y "]) + end
    columns = read(written(bom + text.encode()), texts=["b"])
    assert np.array_equal(columns["a"], [1.5, np.nan, -2000.0], equal_nan=True)
    assert columns["b"].tolist() == ["x", None, "y"]


def test_lines_before_the_names_are_skipped(written):
    """An oscilloscope's settings above the header are passed over when the map says how many lines they take."""
    path = written("model,X\nrange,5\na,b\n1,2\n")
    assert read(path, skip_lines=2)["a"].tolist() == [1.0]
    with pytest.raises(InputError, match="more than 9 lines"):
        read(path, skip_lines=9)


def test_a_mark_at_the_end_of_each_line_is_no_column(written):
    """A trailing mark gives a column without a name that nobody asks for."""
    assert read(written("a,b,\n1,2,\n"))["a"].tolist() == [1.0]


def test_a_span_is_what_stands_between(written):
    """`FIRST:LAST` means both and all between, in the file's order."""
    opened = read_header(written("x,s0,s1,s2,y\n"))
    assert opened.span("s0:s2", of="wave") == ["s0", "s1", "s2"]
    assert opened.span("y", of="wave") == ["y"]
    for selector, words in (("s2:s0", "turn the range round"), ("s0:s9", "'s9'"), ("z", "'z'")):
        with pytest.raises(InputError, match=words):
            opened.span(selector, of="wave")


@pytest.mark.parametrize(
    ("content", "words"),
    [
        ("a;b\n1,5;x\n", "column 'a': expected numbers, found '1,5'; write the decimal mark as a point"),
        ("a,b\n1,5,x\n", "expected 2 cells as in the header, found 3"),
        ("a,b\n1\n", "expected 2 cells as in the header, found 1"),
        ("a,b\nnine,x\n", "column 'a': expected numbers, found 'nine'"),
        ("A,b\n1,x\n", "expected a column 'a'"),
        ("a,a\n1,2\n", "'a' twice"),
        ("", "the names of the columns"),
        ("\n1,2\n", "the names of the columns"),
        (b"a,b\n1,\xe4\n", "byte 6: expected UTF-8, found 0xe4"),
        (b"\xff\xfea\x00\n\x00", "expected UTF-8, found UTF-16"),
        (b"a,b\n1,\x00\n", "found 0x00"),
    ],
)
def test_wrong_files_are_refused_in_one_line(written, content, words):
    """Each way in which a CSV can be wrong is named with its place and what to do."""
    path = written(content)
    with pytest.raises(InputError) as caught:
        read(path)
    assert words in str(caught.value)
    assert str(caught.value).startswith(str(path))
    assert "\n" not in str(caught.value)


def test_too_large_is_refused_before_it_is_read(written, monkeypatch):
    """Size and number of columns have limits."""
    path = written("a,b\n1,2\n")
    monkeypatch.setattr(delimited, "COLUMN_LIMIT", 1)
    with pytest.raises(InputError, match="at most 1"):
        read_header(path)
    monkeypatch.setattr(delimited, "SIZE_LIMIT_BYTES", 3)
    with pytest.raises(InputError, match="split the file"):
        read_header(path)
