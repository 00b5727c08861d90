"""Files that appear whole or not at all: a temporary sibling, flushed to disk, then renamed."""

from __future__ import annotations

import os
import secrets
import shutil
from collections.abc import Collection, Iterator
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
        flush(path.parent)
    except OSError as error:
        raise InputError(
            f"{path}: cannot be written ({error.strerror or error}); check the folder and its space"
        ) from None
    finally:
        sibling.unlink(missing_ok=True)


def write_text(path: Path, text: str) -> None:
    """Write a text file (UTF-8), whole or not at all."""
    with whole_file(path) as file:
        file.write(text.encode())


def flush(place: Path) -> None:
    """Have a file, or the names in a folder, on the disk before going on."""
    if os.name != "posix":
        return
    number = os.open(place, os.O_RDONLY)
    try:
        os.fsync(number)
    finally:
        os.close(number)


def put_in_place(fresh: Path, place: Path, parts: Collection[str]) -> None:
    """Exchange a folder for a freshly written sibling; what is neither of `parts` nor ours moves along.

    A kill between the two renames leaves the old folder aside; `settle` takes it back or finishes.
    """
    if place.exists():
        place.rename(_aside(place))
    fresh.rename(place)
    flush(place.parent)
    settle(place, parts)


def settle(place: Path, parts: Collection[str]) -> None:
    """Finish, or take back, an exchange of folders that was killed half-way."""
    aside = _aside(place)
    if not aside.exists():
        return
    if not place.exists():
        aside.rename(place)
        return
    for path in aside.iterdir():
        if path.name not in parts:
            path.rename(place / path.name)
    shutil.rmtree(aside)
    flush(place.parent)


def _aside(place: Path) -> Path:
    return place.parent / f".{place.name}.old"
