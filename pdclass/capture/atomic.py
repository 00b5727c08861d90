"""Files that appear whole or not at all: a temporary sibling, flushed to disk, then renamed."""

from __future__ import annotations

import os
import secrets
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import BinaryIO

from pdclass.errors import InputError


@contextmanager
def whole_file(path: Path) -> Iterator[BinaryIO]:
    """A file to write into, which takes its name only when the block ends without an error.

    Raises
    ------
    InputError
        If the folder is not there or the file cannot be written; nothing is left behind.
    """
    sibling = path.with_name(f".{path.name}.{secrets.token_hex(4)}.part")
    try:
        with sibling.open("xb") as file:
            yield file
            file.flush()
            os.fsync(file.fileno())
        sibling.replace(path)
        _flush_folder(path.parent)
    except OSError as error:
        raise InputError(
            f"{path}: cannot be written ({error.strerror or error}); check the folder and its space"
        ) from None
    finally:
        sibling.unlink(missing_ok=True)


def _flush_folder(folder: Path) -> None:
    if os.name != "posix":
        return
    number = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(number)
    finally:
        os.close(number)
