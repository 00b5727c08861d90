"""Digests of files, arrays and canonical JSON; the identity of a pulse."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

_BLOCK_BYTES = 1 << 20


def file_digest(path: Path) -> str:
    """Sha256 of a file's bytes as 64 hex digits, read in blocks so that size does not matter."""
    sha = hashlib.sha256()
    with path.open("rb") as file:
        while block := file.read(_BLOCK_BYTES):
            sha.update(block)
    return sha.hexdigest()


def array_digest(array: NDArray[Any]) -> str:
    """Sha256 of an array's little-endian bytes with its type and shape, as 64 hex digits."""
    little = np.ascontiguousarray(array).astype(array.dtype.newbyteorder("<"), copy=False)
    sha = hashlib.sha256(f"{little.dtype.str}{little.shape}".encode())
    sha.update(little.tobytes())
    return sha.hexdigest()


def canonical_json(value: object) -> str:
    """JSON with sorted keys and no spaces, so that equal values give equal bytes.

    Raises
    ------
    ValueError
        If a number is NaN or infinite: such a number has no JSON form.
    """
    return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)


def json_digest(value: object) -> str:
    """Sha256 of the canonical JSON (UTF-8) of a value, as 64 hex digits."""
    return hashlib.sha256(canonical_json(value).encode()).hexdigest()


def pulse_id(capture_digest: str, sensor: str, onset_sample: int) -> str:
    """The name of a pulse that was found in a capture: 16 hex digits that any later run finds again."""
    return hashlib.sha256(f"{capture_digest}|{sensor}|{onset_sample}".encode()).hexdigest()[:16]


def loose_pulse_id(wave_v: NDArray[np.float32], circuit: str, session: str) -> str:
    """The name of a pulse without a capture, from its wave's bytes [V, float32 little-endian]."""
    sha = hashlib.sha256(np.ascontiguousarray(wave_v, dtype="<f4").tobytes())
    sha.update(f"|{circuit}|{session}".encode())
    return sha.hexdigest()[:16]
