"""The sample file of a recording: its two paths, its layout, and one pass that proves every byte."""

from __future__ import annotations

import hashlib
import os
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, BinaryIO

import numpy as np
from numpy.typing import NDArray

from pdclass.capture.guard import open_plain, refuse_escape
from pdclass.errors import InputError, complaint

META_ENDING = ".sigmf-meta"
SAMPLES_ENDING = ".sigmf-data"
DATATYPES: Mapping[str, np.dtype[Any]] = {
    "ri16_le": np.dtype("<i2"),
    "ri8": np.dtype("i1"),
    "rf32_le": np.dtype("<f4"),
}
_BLOCK_BYTES = 1 << 20


@dataclass(frozen=True)
class Layout:
    """How the bytes of a sample file are to be read.

    Attributes
    ----------
    dtype : type of one sample.
    header_bytes, trailing_bytes : bytes before and after the samples that are none.
    samples : samples that the metadata promises, or None where it does not say.
    adc_bits : resolution that the counts must keep within, or None.
    sha512 : checksum that the metadata promises, or None.
    """

    dtype: np.dtype[Any]
    header_bytes: int = 0
    trailing_bytes: int = 0
    samples: int | None = None
    adc_bits: int | None = None
    sha512: str | None = None


def recording_stem(path: Path) -> Path:
    """The common path of a recording's two files, without ending."""
    for ending in (META_ENDING, SAMPLES_ENDING):
        if path.name.endswith(ending):
            return path.with_name(path.name.removesuffix(ending))
    return path


def recording_paths(path: Path) -> tuple[Path, Path]:
    """Metadata and sample file of a recording, from either of them or the common stem.

    Raises
    ------
    InputError
        If one is a symbolic link to a place outside of the folder.
    """
    stem = recording_stem(path)
    paths = (Path(f"{stem}{META_ENDING}"), Path(f"{stem}{SAMPLES_ENDING}"))
    for each in paths:
        refuse_escape(each, each.parent)
    return paths


def map_samples(path: Path, layout: Layout) -> tuple[NDArray[Any], str]:
    """The samples, memory-mapped read-only, and the sha256 of the file's bytes.

    The whole file is read once in blocks (the digest needs every byte); its memory does not grow with it.

    Raises
    ------
    InputError
        If the size disagrees with the metadata, the checksum does, the recording is empty, a sample is NaN or
        infinite, a count needs more bits than the digitiser has, or all samples are equal.
    """
    with open_plain(path) as file:
        count = _count(path, os.fstat(file.fileno()).st_size, layout)
        digest = _prove(path, file, count, layout)
        counts = np.memmap(file, layout.dtype, mode="r", offset=layout.header_bytes, shape=(count,))
    return counts, digest


def check_counts(path: Path, counts: NDArray[Any], layout: Layout) -> None:
    """Refuse samples in memory that `map_samples` would refuse in a file; errors as there."""
    if counts.size < 2:
        advice = "record again"
        raise InputError(complaint(path, "samples", expected="at least 2", found=str(counts.size), advice=advice))
    _check_finite(path, counts, 0)
    _check_extremes(path, float(counts.min()), float(counts.max()), layout)


def _count(path: Path, size: int, layout: Layout) -> int:
    room = size - layout.header_bytes - layout.trailing_bytes
    unit = layout.dtype.itemsize
    extra = f" + {layout.header_bytes} header + {layout.trailing_bytes} trailing bytes"
    extra = extra if layout.header_bytes or layout.trailing_bytes else ""
    advice = "copy the recording again, or correct its metadata"
    if layout.samples is not None and room != layout.samples * unit:
        wanted = layout.samples * unit + layout.header_bytes + layout.trailing_bytes
        expected = f"{wanted} bytes ({layout.samples} samples of {unit} bytes{extra})"
        raise InputError(complaint(path, "size", expected=expected, found=f"{size} bytes", advice=advice))
    if room < 0 or room % unit:
        expected = f"a whole number of samples of {unit} bytes{extra}"
        raise InputError(complaint(path, "size", expected=expected, found=f"{size} bytes", advice=advice))
    if room == 0:
        raise InputError(
            complaint(path, "samples", expected="at least 2", found=f"0 ({size} bytes)", advice="record again")
        )
    return room // unit


def _prove(path: Path, file: BinaryIO, count: int, layout: Layout) -> str:
    sha256, sha512 = hashlib.sha256(), hashlib.sha512() if layout.sha512 else None
    extremes = []
    header = file.read(layout.header_bytes)
    first = 0
    total_bytes = count * layout.dtype.itemsize
    for block in _blocks(path, file, total_bytes):
        sha256.update(header + block if first == 0 else block)
        if sha512 is not None:
            sha512.update(header + block if first == 0 else block)
        samples = np.frombuffer(block, layout.dtype)
        _check_finite(path, samples, first)
        extremes.append((samples.min(), samples.max()))
        first += samples.size
    tail = file.read(layout.trailing_bytes)
    sha256.update(tail)
    lowest, highest = min(low for low, _ in extremes), max(high for _, high in extremes)
    _check_extremes(path, float(lowest), float(highest), layout)
    if sha512 is not None:
        sha512.update(tail)
        _check_sum(path, sha512.hexdigest(), str(layout.sha512))
    return sha256.hexdigest()


def _blocks(path: Path, file: BinaryIO, total: int) -> Iterator[bytes]:
    done = 0
    while done < total:
        block = file.read(min(_BLOCK_BYTES, total - done))
        # a short read inside the file would leave a part of a sample: only a file that shrinks does that
        if len(block) < min(_BLOCK_BYTES, total - done):
            found = f"{done + len(block)} bytes"
            advice = "the file shrank while it was read; wait until the recorder is done"
            raise InputError(complaint(path, "size", expected=f"{total} bytes", found=found, advice=advice))
        done += len(block)
        yield block


def _check_finite(path: Path, samples: NDArray[Any], first: int) -> None:
    if samples.dtype.kind != "f":
        return
    finite = np.isfinite(samples)
    if finite.all():
        return
    place = int(np.argmin(finite))
    advice = "cut the recording there, or write the missing stretch as a gap between two captures"
    raise InputError(
        complaint(path, f"sample {first + place}", expected="a finite number", found=samples[place], advice=advice)
    )


def _check_extremes(path: Path, lowest: float, highest: float, layout: Layout) -> None:
    if lowest == highest:
        found = f"all samples equal ({lowest:g})"
        advice = "is the sensor connected?"
        raise InputError(complaint(path, "samples", expected="a signal", found=found, advice=advice))
    if layout.adc_bits is None or layout.dtype.kind == "f":
        return
    half = 2 ** (layout.adc_bits - 1)
    if lowest < -half or highest > half - 1:
        expected = f"counts from {-half} to {half - 1} (pdclass:adc_bits {layout.adc_bits})"
        advice = "counts are sign-extended, never shifted: write them so, or correct pdclass:adc_bits"
        found = f"{lowest:g} to {highest:g}"
        raise InputError(complaint(path, "samples", expected=expected, found=found, advice=advice))


def _check_sum(path: Path, found: str, stated: str) -> None:
    if found != stated.lower():
        advice = "the sample file is not the one that was recorded; copy it again"
        raise InputError(complaint(path, "core:sha512", expected=stated.lower(), found=found, advice=advice))
