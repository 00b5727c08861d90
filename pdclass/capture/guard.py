"""The guard that opens a stranger's file first: plain files, inside their folder, of bounded size and depth."""

from __future__ import annotations

import json
import math
import os
import stat
from pathlib import Path
from typing import Any, BinaryIO, NoReturn

from pdclass.errors import InputError, complaint

JSON_LIMIT_BYTES = 64 << 20
JSON_LIMIT_DEPTH = 16


def open_plain(path: Path) -> BinaryIO:
    """An ordinary file, opened to be read; pipes, devices and folders are refused without waiting on them.

    Raises
    ------
    InputError
        If there is no such file, it cannot be read, or it is not an ordinary file.
    """
    try:
        # a named pipe without a writer would block for ever without O_NONBLOCK
        number = os.open(path, os.O_RDONLY | getattr(os, "O_NONBLOCK", 0) | getattr(os, "O_BINARY", 0))
    except FileNotFoundError:
        raise InputError(f"{path}: no such file; check the name and the folder") from None
    except (OSError, ValueError) as error:
        raise InputError(f"{path}: cannot be opened ({_reason(error)}); check the path and its rights") from None
    if not stat.S_ISREG(os.fstat(number).st_mode):
        os.close(number)
        raise InputError(
            complaint(path, "kind", expected="an ordinary file", found="a folder, pipe or device", advice="give a file")
        )
    return os.fdopen(number, "rb")


def refuse_escape(path: Path, folder: Path) -> None:
    """Refuse a file that is a symbolic link to somewhere outside of its folder.

    Raises
    ------
    InputError
        If the path, links resolved, does not lie in the folder.
    """
    try:
        target, home = path.resolve(), folder.resolve()
    except (OSError, RuntimeError, ValueError) as error:
        raise InputError(f"{path}: cannot be resolved ({_reason(error)}); check for circular links") from None
    if not target.is_relative_to(home):
        raise InputError(
            complaint(
                path,
                "symbolic link",
                expected=f"a file inside {home}",
                found=target,
                advice="copy the file beside its metadata",
            )
        )


def read_json(path: Path) -> dict[str, Any]:
    """The JSON object in a file, as plain content that passed every limit.

    Raises
    ------
    InputError
        If the file is too large, is not strict UTF-8, is not JSON, nests too deep, repeats a key, or holds
        NaN, an infinite number, or text that has no UTF-8 form; or if it is not an object.
    """
    with open_plain(path) as file:
        size = os.fstat(file.fileno()).st_size
        if size > JSON_LIMIT_BYTES:
            raise InputError(
                complaint(
                    path,
                    "size",
                    expected=f"at most {JSON_LIMIT_BYTES} bytes of metadata",
                    found=f"{size} bytes",
                    advice="split the recording",
                )
            )
        content = file.read(JSON_LIMIT_BYTES)
    value = parse_json(content, str(path))
    if not isinstance(value, dict):
        raise InputError(
            complaint(path, "content", expected="a JSON object", found=type(value).__name__, advice="write it again")
        )
    return value


def parse_json(content: bytes, where: str) -> Any:
    """A JSON value from bytes, strictly; see `read_json` for what is refused."""
    try:
        value = json.loads(content.decode("utf-8"), parse_constant=_no_constant, object_pairs_hook=_no_repeats)
    except UnicodeDecodeError as error:
        raise InputError(
            complaint(
                where,
                f"byte {error.start}",
                expected="strict UTF-8",
                found=f"0x{content[error.start]:02x}",
                advice="save the metadata as UTF-8",
            )
        ) from None
    except RecursionError:
        raise _too_deep(where) from None
    except ValueError as error:
        raise InputError(f"{where}: not readable as JSON: {error}; write the metadata again") from None
    _check_plain(value, where)
    return value


def _no_constant(token: str) -> NoReturn:
    raise ValueError(f"expected a number, found {token}")


def _no_repeats(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    content = dict(pairs)
    if len(content) < len(pairs):
        names = [name for name, _ in pairs]
        twice = next(name for name in names if names.count(name) > 1)
        raise ValueError(f"field {twice!r}: expected once, found {names.count(twice)} times")
    return content


def _check_plain(value: object, where: str) -> None:
    layer: list[object] = [value]
    for _ in range(JSON_LIMIT_DEPTH + 1):
        inner: list[object] = []
        for item in layer:
            if isinstance(item, dict):
                inner += [*item.keys(), *item.values()]
            elif isinstance(item, list):
                inner += item
            elif isinstance(item, float) and not math.isfinite(item):
                raise InputError(f"{where}: number: expected finite, found one beyond 1.8e308; correct it")
            elif isinstance(item, str) and not _is_text(item):
                raise InputError(f"{where}: text: expected UTF-8, found a lone surrogate {item[:40]!a}; correct it")
        layer = inner
    if layer:
        raise _too_deep(where)


def _is_text(text: str) -> bool:
    try:
        text.encode("utf-8")
    except UnicodeEncodeError:
        return False
    return True


def _too_deep(where: str) -> InputError:
    return InputError(
        complaint(
            where,
            "nesting",
            expected=f"at most {JSON_LIMIT_DEPTH} levels",
            found="more",
            advice="write plain metadata without deep nesting",
        )
    )


def _reason(error: Exception) -> str:
    return getattr(error, "strerror", None) or str(error) or type(error).__name__
