"""CSV files, as spreadsheets and oscilloscopes write them, into typed columns: checked line by line, never guessed."""

from __future__ import annotations

import codecs
import csv
import io
import os
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.csv as pc
from numpy.typing import NDArray

from pdclass.capture.guard import open_plain
from pdclass.capture.maps import nearest
from pdclass.errors import InputError, complaint

SIZE_LIMIT_BYTES = 2 << 30
COLUMN_LIMIT = 50_000
HEADER_LIMIT_BYTES = 4 << 20
_DELIMITERS = ",;\t"
_NUMBER_WITH_COMMA = re.compile(r"[+-]?\d+,\d+(?:[eE][+-]?\d+)?")
_NOTHING = ["", "NaN", "nan", "NA", "null", "NULL"]
_OTHER_ENCODINGS = {codecs.BOM_UTF16_LE: "UTF-16", codecs.BOM_UTF16_BE: "UTF-16", codecs.BOM_UTF32_BE: "UTF-32"}
_UTF8_ADVICE = "save the file as CSV in UTF-8"


@dataclass(frozen=True)
class Delimited:
    """A CSV file whose first lines have been read: its bytes without byte order mark, delimiter and header."""

    where: str
    content: bytes
    delimiter: str
    names: tuple[str, ...]

    def wrong(self, field: str, expected: object, found: object, advice: str) -> InputError:
        """The error that says what is wrong with a field."""
        return InputError(complaint(self.where, field, expected=expected, found=found, advice=advice))

    def place(self, name: str, *, of: str) -> int:
        """Place of a column by its name.

        Raises
        ------
        InputError
            If there is none; the message names what asked for it and the nearest name.
        """
        if name in self.names:
            return self.names.index(name)
        shown = ", ".join(self.names[:6]) + (" ..." if len(self.names) > 6 else "")
        raise self.wrong(of, f"a column '{name}'", f"columns {shown}", f"correct the name{nearest(name, self.names)}")

    def span(self, selector: str, *, of: str) -> list[str]:
        """Names of the columns that a selector means: one, or `FIRST:LAST` with all that stand between."""
        if ":" not in selector or selector in self.names:
            return [self.names[self.place(selector, of=of)]]
        first, last = (self.place(part.strip(), of=of) for part in selector.split(":", 1))
        if first > last:
            raise self.wrong(of, "the first column before the last", f"'{selector}'", "turn the range round")
        return list(self.names[first : last + 1])


def read_header(path: Path, *, skip_lines: int = 0) -> Delimited:
    """Open a CSV file and read the names of its columns, from the line after `skip_lines` others.

    Raises
    ------
    InputError
        If the file is too large, not UTF-8 (with or without byte order mark), has no line of names, names a
        column twice, or has more columns than any such file should.
    """
    where = str(path)
    with open_plain(path) as file:
        size = os.fstat(file.fileno()).st_size
        if size > SIZE_LIMIT_BYTES:
            expected, found = f"at most {SIZE_LIMIT_BYTES} bytes", f"{size} bytes"
            raise InputError(complaint(where, "size", expected=expected, found=found, advice="split the file"))
        content = file.read(SIZE_LIMIT_BYTES + 1)
    _check_text(where, content)
    content = content.removeprefix(codecs.BOM_UTF8)
    rest = _without_lines(where, content, skip_lines)
    line = rest[:HEADER_LIMIT_BYTES].split(b"\n", 1)[0].decode("utf-8").rstrip("\r")
    delimiter = max(_DELIMITERS, key=line.count) if any(mark in line for mark in _DELIMITERS) else ","
    cells = [name.strip() for name in next(csv.reader(io.StringIO(line), delimiter=delimiter), [])]
    # a mark at the end of each line makes a column without a name; nobody can ask for it
    names = tuple(name or f"(column {place + 1})" for place, name in enumerate(cells)) if any(cells) else ()
    opened = Delimited(where, rest, delimiter, names)
    _check_names(opened, skip_lines + 1)
    return opened


def read_columns(opened: Delimited, numbers: Sequence[str], texts: Sequence[str]) -> Mapping[str, NDArray[Any]]:
    """Columns by name: numbers as (rows,) float64 (NaN where nothing stands), texts as objects (None likewise).

    Raises
    ------
    InputError
        If a cell of a number column is no number (a decimal comma is named as such), or a line has another
        number of cells than the header.
    """
    kinds = dict.fromkeys(numbers, pa.float64()) | dict.fromkeys(texts, pa.string())
    try:
        table = pc.read_csv(
            io.BytesIO(opened.content),
            read_options=pc.ReadOptions(
                column_names=list(opened.names), skip_rows=1, use_threads=False, block_size=_block_bytes(opened)
            ),
            parse_options=pc.ParseOptions(delimiter=opened.delimiter),
            convert_options=pc.ConvertOptions(
                column_types=kinds,
                include_columns=list(kinds),
                null_values=_NOTHING,
                quoted_strings_can_be_null=True,
                strings_can_be_null=False,
                check_utf8=True,
            ),
        )
    except pa.ArrowException as error:
        raise _not_a_number(opened, str(error)) from None
    columns: dict[str, NDArray[Any]] = {}
    for name in numbers:
        columns[name] = np.asarray(table[name].combine_chunks().fill_null(np.nan).to_numpy(zero_copy_only=False))
    for name in texts:
        words = np.empty(table.num_rows, object)
        words[:] = [(word or "").strip() or None for word in table[name].to_pylist()]
        columns[name] = words
    return columns


def _block_bytes(opened: Delimited) -> int:
    """A block must hold the longest line; a header line says how long one may be."""
    return max(1 << 20, 64 * len(opened.names))


def _check_text(where: str, content: bytes) -> None:
    for mark, name in _OTHER_ENCODINGS.items():
        if content.startswith(mark):
            raise InputError(complaint(where, "encoding", expected="UTF-8", found=name, advice=_UTF8_ADVICE))
    try:
        content.decode("utf-8")
    except UnicodeDecodeError as error:
        found = f"0x{content[error.start]:02x}"
        raise InputError(
            complaint(where, f"byte {error.start}", expected="UTF-8", found=found, advice=_UTF8_ADVICE)
        ) from None
    if b"\0" in content:
        place = content.index(b"\0")
        raise InputError(complaint(where, f"byte {place}", expected="text", found="0x00", advice=_UTF8_ADVICE))


def _without_lines(where: str, content: bytes, count: int) -> bytes:
    place = 0
    for _ in range(count):
        end = content.find(b"\n", place)
        if end < 0:
            expected, advice = f"more than {count} lines", "correct skip_lines in the map"
            raise InputError(complaint(where, "lines", expected=expected, found="fewer", advice=advice))
        place = end + 1
    return content[place:]


def _check_names(opened: Delimited, line: int) -> None:
    names = opened.names
    if not names:
        raise opened.wrong(f"line {line}", "the names of the columns", "nothing", "write them, or correct skip_lines")
    if len(names) > COLUMN_LIMIT:
        raise opened.wrong("columns", f"at most {COLUMN_LIMIT}", len(names), "write one pulse a line")
    if len(set(names)) < len(names):
        twice = next(name for place, name in enumerate(names) if name in names[:place])
        raise opened.wrong(f"line {line}", "every column with a name of its own", f"'{twice}' twice", "correct it")


def _not_a_number(opened: Delimited, said: str) -> InputError:
    """What the reader of numbers complained about, in our words."""
    found = re.search(r"column #(\d+)(?:.*?Row #(\d+))?.*invalid value '(.*?)'", said, flags=re.DOTALL)
    if found is None:
        cut = re.search(r"Row #(\d+): Expected (\d+) columns, got (\d+)", said)
        if cut is None:
            return InputError(f"{opened.where}: not readable as CSV: {' '.join(said.split())[:200]}; write it again")
        advice = "write every cell, and the decimal mark as a point"
        return opened.wrong(f"line {cut[1]} from the header on", f"{cut[2]} cells as in the header", cut[3], advice)
    name, word = opened.names[int(found[1])], found[3][:40]
    advice = "leave the cell empty, or correct it"
    if _NUMBER_WITH_COMMA.fullmatch(word.strip()):
        advice = "write the decimal mark as a point (that of the spreadsheet's language is a comma)"
    return opened.wrong(f"column '{name}'", "numbers", f"'{word}'", advice)
