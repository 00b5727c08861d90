"""A path of any kind into a capture, or one line that says why not."""

from __future__ import annotations

from pathlib import Path

from pdclass.capture.arrays import HDF5_ENDINGS, NPZ_ENDINGS
from pdclass.capture.fill import FillIns
from pdclass.capture.recording import META_ENDING, SAMPLES_ENDING
from pdclass.capture.sigmf import read_sigmf
from pdclass.capture.traces import read_array_capture, read_trace
from pdclass.errors import InputError, complaint
from pdclass.pulses import Capture

TRACE_ENDING = ".csv"
_LONGEST_NAME = 120
_READ = "a SigMF recording (NAME.sigmf-meta, NAME.sigmf-data or NAME), .npz, .h5, or .csv with a map"


def open_capture(path: Path | str, fill: FillIns | None = None) -> Capture:
    """The capture in a file, chosen by the file's ending; fill-ins supply what the file does not say.

    Raises
    ------
    InputError
        If the path is a folder, has an ending that is not read, or anything about the file is wrong.
    MissingPartError
        If the extra that reads this kind is not installed.
    """
    path = Path(path)
    check_name(path)
    try:
        if path.suffix in (*NPZ_ENDINGS, *HDF5_ENDINGS):
            return read_array_capture(path, fill or FillIns())
        if path.suffix == TRACE_ENDING:
            return read_trace(path, fill or FillIns())
        _refuse_other_kinds(path)
        return read_sigmf(path, fill or FillIns())
    except OSError as error:
        raise InputError(f"{path}: cannot be read ({error.strerror or error}); check the disk and its rights") from None
    except (ValueError, LookupError, OverflowError) as error:
        raise InputError(f"{path}: not readable as a capture ({error}); write it again") from None


def check_name(path: Path) -> None:
    """Refuse a name that cannot stand in a verdict folder or on a line of a report.

    Raises
    ------
    InputError
        If it is longer than 120 characters or holds a line break or another control character.
    """
    name = path.name
    shown = "".join(letter if letter.isprintable() else "?" for letter in name)[:60]
    if not name.isprintable() or len(name) > _LONGEST_NAME:
        expected = f"at most {_LONGEST_NAME} printable characters"
        found = f"{len(name)} characters" if name.isprintable() else "a character that cannot be printed"
        raise InputError(complaint(shown, "file name", expected=expected, found=found, advice="rename the file"))


def _refuse_other_kinds(path: Path) -> None:
    if path.name.endswith((META_ENDING, SAMPLES_ENDING)) or Path(f"{path}{META_ENDING}").exists():
        return
    if not path.exists():
        raise InputError(f"{path}: no such file or folder; check the name")
    if path.is_dir():
        advice = f"give its recordings: {path}/*{META_ENDING}"
        raise InputError(complaint(path, "kind", expected=_READ, found="a folder", advice=advice))
    if path.suffix == ".parquet":
        found, advice = "a pulse table", "its pulses are already extracted: score it as it is"
    elif path.suffix == ".sigmf":
        found, advice = "a SigMF archive", "unpack it and give the two files"
    else:
        found, advice = f"ending {path.suffix!r}", "convert the file, or check its name"
    raise InputError(complaint(path, "ending", expected=_READ, found=found, advice=advice))
