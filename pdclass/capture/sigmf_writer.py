"""Captures into SigMF recordings: the same capture gives the same bytes, and a file is whole or not there."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pdclass.capture.recording import DATATYPES, META_ENDING, SAMPLES_ENDING
from pdclass.capture.sigmf import EXTENSION, EXTENSION_VERSION, check_metadata
from pdclass.errors import InputError, complaint
from pdclass.pulses import Annotation, Capture, IntArray, global_index
from pdclass.writing import whole_file

SIGMF_VERSION = "1.2.6"
_BLOCK_SAMPLES = 1 << 19


def write_sigmf(folder: Path, capture: Capture) -> Path:
    """Write a capture as `NAME.sigmf-meta` and `NAME.sigmf-data`; returns the path of the first.

    int8 counts become `ri8`, int16 `ri16_le`, float32 `rf32_le`. The number of samples is written too
    (`pdclass:sample_count`), so that a file cut short is found without a second checksum. Phases are written
    modulo 360 degrees; the reader unwraps them again.

    Raises
    ------
    InputError
        If the capture cannot be written faithfully: another type of counts, a name that is no file name, a phase
        mark that is not at a sample, fields that the reader would refuse, or a digest that is not that of the
        counts (pulses would lose their identity).
    """
    name = _file_name(folder, capture.name)
    meta_path = folder / f"{name}{META_ENDING}"
    content = metadata(capture)
    check_metadata(meta_path, content, name, int(capture.counts.size))
    _check_digest(meta_path, capture)
    with whole_file(folder / f"{name}{SAMPLES_ENDING}") as file:
        for start in range(0, capture.counts.size, _BLOCK_SAMPLES):
            file.write(_bytes(capture.counts[start : start + _BLOCK_SAMPLES]))
    with whole_file(meta_path) as file:
        file.write((json.dumps(content, indent=1, sort_keys=True, ensure_ascii=False) + "\n").encode())
    return meta_path


def counts_digest(counts: NDArray[Any]) -> str:
    """Sha256 of the bytes that `write_sigmf` writes for these counts: the digest of the capture."""
    sha = hashlib.sha256()
    for start in range(0, counts.size, _BLOCK_SAMPLES):
        sha.update(_bytes(counts[start : start + _BLOCK_SAMPLES]))
    return sha.hexdigest()


def metadata(capture: Capture) -> dict[str, Any]:
    """The three objects of the metadata file of a capture."""
    return {
        "global": _global(capture),
        "captures": _captures(capture),
        "annotations": [_annotation(each) for each in sorted(capture.annotations, key=lambda one: one.onset_sample)],
    }


def _global(capture: Capture) -> dict[str, Any]:
    chain = capture.chain
    own = {
        "volts_per_count": chain.volts_per_count,
        "circuit": capture.circuit,
        "sensor": capture.sensor,
        "session": capture.session,
        "adc_bits": chain.adc_bits,
        "transfer_ohm": chain.transfer_ohm,
        "band_hz": None if chain.band_hz is None else list(chain.band_hz),
        "mains_hz": chain.mains_hz,
        "response": None if chain.response is None else [list(row) for row in chain.response],
        "site": capture.site,
        "conductor": capture.conductor,
        "phase_reference": capture.phase_reference,
        "sample_count": int(capture.counts.size),
    }
    return {
        "core:datatype": _datatype(capture),
        "core:version": SIGMF_VERSION,
        "core:num_channels": 1,
        "core:sample_rate": chain.rate_hz,
        "core:extensions": [{"name": EXTENSION, "version": EXTENSION_VERSION, "optional": True}],
    } | {f"pdclass:{name}": value for name, value in own.items() if value is not None}


def _captures(capture: Capture) -> list[dict[str, Any]]:
    marks = {} if capture.phase_marks is None else dict(_whole_marks(capture))
    samples = sorted({int(start) for start in capture.segments[:, 0]} | set(marks))
    places: IntArray = np.array(samples, np.int64)
    entries: list[dict[str, Any]] = []
    for sample, index in zip(samples, global_index(capture, places).tolist(), strict=True):
        entry: dict[str, Any] = {"core:sample_start": sample, "core:global_index": index}
        if sample in marks:
            entry["pdclass:phase_deg"] = _wrapped(marks[sample])
        entries.append(entry)
    if capture.start_utc is not None:
        entries[0]["core:datetime"] = _utc(capture)
    return entries


def _whole_marks(capture: Capture) -> list[tuple[int, float]]:
    marks = [] if capture.phase_marks is None else capture.phase_marks.tolist()
    for sample, _ in marks:
        if sample != round(sample):
            advice = "move the phase mark to a whole sample"
            raise InputError(
                complaint(capture.name, "phase_marks", expected="a whole sample", found=sample, advice=advice)
            )
    return [(int(sample), float(phase)) for sample, phase in marks]


def _wrapped(phase_deg: float) -> float:
    wrapped = phase_deg % 360.0
    return 0.0 if wrapped >= 360.0 else wrapped


def _utc(capture: Capture) -> str:
    start = capture.start_utc
    if start is None or start.tz is None:
        advice = "give the time zone UTC"
        raise InputError(complaint(capture.name, "start_utc", expected="a time in UTC", found=start, advice=advice))
    return start.tz_convert("UTC").tz_localize(None).isoformat() + "Z"


def _annotation(each: Annotation) -> dict[str, Any]:
    generator = f"human:{each.labelled_by}" if each.labelled_by else None
    entry = {
        "core:sample_start": each.onset_sample,
        "core:sample_count": each.sample_count,
        "core:label": each.label,
        "core:generator": generator or ("simulated" if each.basis == "simulated" else None),
        "core:comment": each.comment,
        "pdclass:basis": each.basis,
        "pdclass:family": each.family,
        "pdclass:distance_m": each.distance_m,
        "pdclass:charge_pc": each.charge_pc,
    }
    return {name: value for name, value in entry.items() if value is not None}


def _datatype(capture: Capture) -> str:
    little = capture.counts.dtype.newbyteorder("<")
    for datatype, dtype in DATATYPES.items():
        if little == dtype and capture.counts.ndim == 1:
            return datatype
    found = f"{capture.counts.dtype} of shape {capture.counts.shape}"
    advice = "convert the counts first"
    raise InputError(
        complaint(capture.name, "counts", expected="(samples,) int8, int16 or float32", found=found, advice=advice)
    )


def _bytes(counts: NDArray[Any]) -> bytes:
    return np.ascontiguousarray(counts, counts.dtype.newbyteorder("<")).tobytes()


def _file_name(folder: Path, name: str) -> str:
    if not name or name.startswith(".") or Path(name).name != name or "\\" in name or "\0" in name:
        advice = "rename the capture"
        raise InputError(complaint(folder, "name", expected="a plain file name", found=repr(name), advice=advice))
    return name


def _check_digest(path: Path, capture: Capture) -> None:
    found = counts_digest(capture.counts)
    if capture.digest != found:
        advice = "set the capture's digest to that of its counts"
        shown = capture.digest or "nothing"
        raise InputError(complaint(path, "digest", expected=found, found=shown, advice=advice))
