"""SigMF recordings (open standard, v1.x) into captures: every field checked before a sample is looked at."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from difflib import get_close_matches
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from pdclass.capture.fields import CONDUCTORS, Fields, chain_of, shown
from pdclass.capture.fill import OPTIONS, FillIns
from pdclass.capture.guard import read_json
from pdclass.capture.recording import DATATYPES, Layout, map_samples, recording_paths, recording_stem
from pdclass.errors import InputError, complaint
from pdclass.pulses import BASES, LABELS, Annotation, Capture, Chain, FloatArray, IntArray

EXTENSION = "pdclass"
EXTENSION_VERSION = "1.0.0"
COUPLINGS = ("strap", "cable-strap-led-back", "core")
ARROWS = ("to-earth", "to-cable")
PHASE_REFERENCES = ("own", "L1-earth", "L2-earth", "L3-earth", "low-voltage-socket")

#: Fields of `global` that a file of another kind may have, under the same names without prefix.
PLAIN_FIELDS = (
    *("sample_rate", "volts_per_count", "circuit", "sensor", "session", "adc_bits", "transfer_ohm", "band_hz"),
    *("mains_hz", "response", "site", "conductor", "coupling", "arrow", "phase_reference", "phase_uncertainty_deg"),
    *("sampled_with", "sample_count"),
)
_FILL_FIELDS = {"rate_hz": "core:sample_rate"} | {name: f"pdclass:{name}" for name in OPTIONS if name != "rate_hz"}
_OWN_FIELDS = tuple(
    f"pdclass:{name}"
    for name in (
        *("volts_per_count", "circuit", "sensor", "session", "adc_bits", "transfer_ohm", "band_hz", "mains_hz"),
        *("response", "site", "conductor", "coupling", "arrow", "phase_reference", "phase_uncertainty_deg"),
        *("sampled_with", "sample_count"),
    )
)
_TIME = re.compile(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d(?:\.(\d+))?Z")
# below this the mains turns at most once between two marks, whatever its frequency (45 to 65 Hz)
_ONE_TURN_S = 1 / 65.0
_CLOCK_SLACK_S = 2e-3


@dataclass(frozen=True)
class _Start:
    """One entry of `captures[]`: where it starts in the file and on the clock, and what is known there."""

    sample: int
    index: int
    stated: bool
    time: pd.Timestamp | None
    resolution_s: float
    phase_deg: float | None


def read_sigmf(path: Path, fill: FillIns) -> Capture:
    """A recording as a capture, its samples memory-mapped, read-only and never rescaled.

    `path` is the metadata file, the sample file or their common stem. What the file says wins over the
    fill-ins. `core:sha512`, where given, is checked, at a cost: the one pass over the file then
    takes about four times as long.
    Entries of `captures[]` that follow each other without a gap on the clock (`core:global_index`) are one
    segment. Phase marks (`pdclass:phase_deg`) are unwrapped with the mains frequency: whole turns are added so
    that each mark lies nearest to where the mains would be. Without a mains frequency turns can be counted only
    between marks less than one turn at 65 Hz apart, each mark then lying ahead of the one before; the marks from
    the first that is further away are left out, and phases there are null.
    Labels other than the four classes, and makers of an annotation other than `human:...` and `simulated`, go
    into the annotation's comment.

    Raises
    ------
    InputError
        If anything in the metadata or the sample file is missing, out of bounds or contradictory.
    """
    meta_path, samples_path = recording_paths(path)
    content = read_json(meta_path)
    fields = _global_fields(meta_path, content, fill)
    capture, layout = describe(fields, content, recording_stem(path).name)
    counts, digest = map_samples(samples_path, layout)
    return _placed(replace(capture, counts=counts, digest=digest), fields, content)


def read_fields(
    path: Path,
    datatype: str,
    said: Mapping[str, Any],
    starts: Sequence[Mapping[str, Any]],
    samples: int,
    fill: FillIns,
) -> tuple[Capture, Layout]:
    """A capture without its samples from fields of the same names without prefix, as other kinds of file have them.

    Parameters
    ----------
    path : the file.
    datatype : SigMF name of the samples' type.
    said : fields of `PLAIN_FIELDS`.
    starts : entries of `captures[]`.
    samples : samples of the file.
    fill : what the file lacks.

    Raises
    ------
    InputError
        If a field is missing, out of bounds or contradictory; it is named without prefix.
    """
    stated = {("core:" if name == "sample_rate" else "pdclass:") + name: value for name, value in said.items()}
    content = {
        "global": {"core:version": "1.2.0", "core:datatype": datatype, **stated},
        "captures": [{_start_field(name): value for name, value in start.items()} for start in starts],
    }
    try:
        fields = _global_fields(path, content, fill)
        capture, layout = describe(fields, content, path.stem)
        return _placed(replace(capture, counts=np.zeros(1, layout.dtype)), fields, content, samples), layout
    except InputError as error:
        raise InputError(str(error).replace("pdclass:", "").replace("core:", "")) from None


def _start_field(name: str) -> str:
    return ("pdclass:" if name == "phase_deg" else "core:") + name


def describe(fields: Fields, content: Mapping[str, Any], name: str) -> tuple[Capture, Layout]:
    """What the `global` object alone says: a capture without samples, and the layout of its sample file.

    Raises
    ------
    InputError
        If a field is missing, out of bounds or contradictory.
    """
    _check_standard(fields)
    rate_hz = fields.needed("core:sample_rate", fields.number("core:sample_rate", above=0.0, high=1e12))
    chain = chain_of(fields, "pdclass:", rate_hz)
    fields.needed("pdclass:volts_per_count", chain.volts_per_count)
    layout = _layout(fields, chain, _listed(fields, content, "captures"))
    for own, choices in (("coupling", COUPLINGS), ("arrow", ARROWS), ("sampled_with", None)):
        fields.text(f"pdclass:{own}", choices)
    fields.number("pdclass:phase_uncertainty_deg", low=0.0, high=360.0)
    capture = Capture(
        chain=chain,
        counts=np.zeros(0, layout.dtype),
        circuit=fields.needed("pdclass:circuit", fields.text("pdclass:circuit")),
        sensor=fields.needed("pdclass:sensor", fields.text("pdclass:sensor")),
        session=fields.needed("pdclass:session", fields.text("pdclass:session")),
        digest="",
        name=name,
        site=fields.text("pdclass:site"),
        conductor=fields.text("pdclass:conductor", CONDUCTORS),
        phase_reference=fields.text("pdclass:phase_reference", PHASE_REFERENCES),
    )
    return capture, layout


def check_metadata(where: Path, content: Mapping[str, Any], name: str, samples: int) -> None:
    """Refuse metadata that this reader would refuse for a sample file of so many samples."""
    fields = _global_fields(where, content, FillIns())
    capture, layout = describe(fields, content, name)
    _placed(replace(capture, counts=np.zeros(1, layout.dtype)), fields, content, samples)


def _global_fields(path: Path, content: Mapping[str, Any], fill: FillIns) -> Fields:
    for name in ("global", "captures", "annotations"):
        kind = dict if name == "global" else list
        if name in content and not isinstance(content[name], kind):
            expected = "an object" if kind is dict else "a list"
            raise InputError(
                complaint(path, name, expected=expected, found=shown(content[name]), advice="correct it in the file")
            )
    if "global" not in content:
        advice = "is this the metadata of a recording?"
        raise InputError(complaint(path, "global", expected="an object", found="nothing", advice=advice))
    values = {field: getattr(fill, name) for name, field in _FILL_FIELDS.items()}
    options = {field: OPTIONS[name] for name, field in _FILL_FIELDS.items()}
    return Fields(str(path), content["global"], "", values, options)


def _check_standard(fields: Fields) -> None:
    version = fields.needed("core:version", fields.text("core:version"))
    if not re.fullmatch(r"[01]\.\d+\.\d+", version):
        raise fields.wrong("core:version", "0.x.y or 1.x.y", shown(version), "convert the recording to SigMF 1")
    if fields.content.get("core:dataset") is not None:
        found = shown(fields.content["core:dataset"])
        advice = "name the sample file as the metadata with .sigmf-data, and take the field out"
        raise fields.wrong("core:dataset", "no such field", found, advice)
    if fields.content.get("core:metadata_only"):
        raise fields.wrong("core:metadata_only", "a recording with samples", "true", "fetch the sample file")
    channels = fields.whole("core:num_channels", low=1)
    if channels not in (None, 1):
        raise fields.wrong("core:num_channels", 1, channels, "write one recording for each channel")
    _check_extensions(fields)
    for name in fields.content:
        if name.startswith("pdclass:") and name not in _OWN_FIELDS:
            near = get_close_matches(name, _OWN_FIELDS, n=1, cutoff=0.85)
            if near:
                raise fields.wrong(name, "a known field", "an unknown one", f"the nearest known one is {near[0]}")


def _check_extensions(fields: Fields) -> None:
    extensions = fields.value("core:extensions") or []
    if not isinstance(extensions, list) or not all(isinstance(item, dict) for item in extensions):
        raise fields.wrong("core:extensions", "a list of objects", shown(extensions))
    for number, item in enumerate(extensions):
        each = Fields(fields.where, item, f"core:extensions[{number}].")
        name, version = each.text("name"), each.text("version") or ""
        if name == EXTENSION and version.split(".")[0] not in ("0", "1"):
            raise each.wrong("version", f"{EXTENSION} 1.x.y", shown(version), "use a newer version of the program")
        if name != EXTENSION and item.get("optional") is False:
            raise each.wrong("name", "only optional extensions", shown(name), "write it as optional, if it is")


def _layout(fields: Fields, chain: Chain, captures: list[Fields]) -> Layout:
    datatype = fields.needed("core:datatype", fields.text("core:datatype"))
    if datatype not in DATATYPES:
        advice = "convert the samples to real counts or floats, little-endian"
        raise fields.wrong("core:datatype", "one of " + ", ".join(DATATYPES), shown(datatype), advice)
    dtype = DATATYPES[datatype]
    if chain.adc_bits is not None and dtype.kind == "i" and chain.adc_bits > 8 * dtype.itemsize:
        expected = f"at most {8 * dtype.itemsize} bits in {datatype}"
        raise fields.wrong("pdclass:adc_bits", expected, chain.adc_bits)
    sha512 = fields.text("core:sha512")
    if sha512 is not None and not re.fullmatch(r"[0-9a-fA-F]{128}", sha512):
        raise fields.wrong("core:sha512", "128 hex digits", shown(sha512))
    headers = [each.whole("core:header_bytes") or 0 for each in captures]
    if any(headers[1:]):
        place = next(number for number, size in enumerate(headers) if number and size)
        advice = "write the samples as one stretch, with a header before the first only"
        raise captures[place].wrong("core:header_bytes", 0, headers[place], advice)
    return Layout(
        dtype=dtype,
        header_bytes=headers[0] if headers else 0,
        trailing_bytes=fields.whole("core:trailing_bytes") or 0,
        samples=fields.whole("pdclass:sample_count"),
        adc_bits=chain.adc_bits,
        sha512=sha512,
    )


def _listed(fields: Fields, content: Mapping[str, Any], name: str) -> list[Fields]:
    items = content.get(name) or []
    for number, item in enumerate(items):
        if not isinstance(item, dict):
            place = replace(fields, content={}, place="", fill={})
            raise place.wrong(f"{name}[{number}]", "an object", shown(item))
    return [Fields(fields.where, item, f"{name}[{number}].") for number, item in enumerate(items)]


def _placed(capture: Capture, fields: Fields, content: Mapping[str, Any], samples: int | None = None) -> Capture:
    """The capture with everything that has a place in the samples."""
    total = int(capture.counts.size) if samples is None else samples
    offset = fields.whole("core:offset") or 0
    captures = _listed(fields, content, "captures") or [Fields(fields.where, {}, "captures[0].")]
    starts = _starts(captures, offset, total, capture.chain.rate_hz)
    annotations = [_annotation(each, offset, total) for each in _listed(fields, content, "annotations")]
    return replace(
        capture,
        start_utc=starts[0].time,
        segments=_segments(starts),
        phase_marks=_phase_marks(starts, capture.chain),
        annotations=tuple(sorted(annotations, key=lambda each: each.onset_sample)),
    )


def _starts(captures: list[Fields], offset: int, total: int, rate_hz: float) -> list[_Start]:
    starts: list[_Start] = []
    for each in captures:
        sample = _sample(each, offset, total) if each.content else 0
        stated = each.whole("core:global_index")
        time, resolution_s = _time(each)
        phase = each.number("pdclass:phase_deg", low=-1e9, high=1e9)
        index = sample + offset if stated is None else stated
        starts.append(_Start(sample, index, stated is not None, time, resolution_s, phase))
        if len(starts) == 1 and sample != 0:
            raise each.wrong(
                "core:sample_start", offset, sample + offset, "the first capture starts at the first sample"
            )
        if len(starts) > 1:
            _check_order(each, starts[-2], starts[-1], rate_hz)
    return starts


def _sample(each: Fields, offset: int, total: int) -> int:
    start = each.needed("core:sample_start", each.whole("core:sample_start"))
    if not offset <= start < offset + total:
        expected = f"from {offset} to {offset + total - 1} (the sample file holds {total} samples)"
        raise each.wrong("core:sample_start", expected, start, "copy the sample file again, or correct the field")
    return start - offset


def _time(each: Fields) -> tuple[pd.Timestamp | None, float]:
    text = each.text("core:datetime")
    if text is None:
        return None, 0.0
    match = _TIME.fullmatch(text)
    try:
        time = pd.Timestamp(text).as_unit("ns") if match else None
    except ValueError:
        time = None
    if match is None or time is None:
        raise each.wrong("core:datetime", "a time in UTC such as 2031-05-04T03:02:01.5Z", shown(text))
    return time, 10.0 ** -len(match[1] or "")


def _check_order(each: Fields, before: _Start, start: _Start, rate_hz: float) -> None:
    step = start.sample - before.sample
    if step <= 0:
        advice = "captures stand in rising order"
        raise each.wrong("core:sample_start", f"more than {before.sample}", start.sample, advice)
    if start.index - before.index < step:
        expected = f"at least {before.index + step} (after the samples of the capture before)"
        raise each.wrong("core:global_index", expected, start.index, "correct it in the file")
    if start.stated or start.time is None or before.time is None:
        return
    elapsed_s = (start.time - before.time).total_seconds()
    slack_s = _CLOCK_SLACK_S + before.resolution_s + start.resolution_s
    if abs(elapsed_s - step / rate_hz) > slack_s:
        expected = f"about {before.index + round(elapsed_s * rate_hz)} by core:datetime"
        raise each.wrong("core:global_index", expected, "nothing", "write it: there is a gap before this capture")


def _segments(starts: list[_Start]) -> IntArray:
    kept = [(starts[0].sample, starts[0].index)]
    for start in starts[1:]:
        if start.index - start.sample != kept[-1][1] - kept[-1][0]:
            kept.append((start.sample, start.index))
    return np.array(kept, np.int64)


def _phase_marks(starts: list[_Start], chain: Chain) -> FloatArray | None:
    marks: list[tuple[float, float]] = []
    last_index = 0
    for start in starts:
        if start.phase_deg is None:
            continue
        phase = start.phase_deg
        if marks:
            elapsed_s = (start.index - last_index) / chain.rate_hz
            if chain.mains_hz is None and elapsed_s >= _ONE_TURN_S:
                break
            phase = _unwrapped(phase, marks[-1][1], elapsed_s, chain.mains_hz)
        marks.append((float(start.sample), phase))
        last_index = start.index
    return np.array(marks, np.float64) if marks else None


def _unwrapped(phase_deg: float, before_deg: float, elapsed_s: float, mains_hz: float | None) -> float:
    if mains_hz is None:
        return before_deg + (phase_deg - before_deg) % 360.0
    turns = round((before_deg + 360.0 * mains_hz * elapsed_s - phase_deg) / 360.0)
    return phase_deg + 360.0 * turns


def _annotation(each: Fields, offset: int, total: int) -> Annotation:
    onset = _sample(each, offset, total)
    count = each.whole("core:sample_count")
    if count is None:
        count = total - onset
    if onset + count > total:
        expected = f"at most {total - onset} (the sample file ends at sample {offset + total})"
        raise each.wrong("core:sample_count", expected, count, "copy the sample file again, or correct the field")
    label, generator = each.value("core:label"), each.text("core:generator")
    comment = each.value("core:comment")
    for name, value in (("core:label", label), ("core:comment", comment)):
        if value is not None and not isinstance(value, str):
            raise each.wrong(name, "text", shown(value))
    human = generator is not None and generator.startswith("human:")
    remarks = [f"label: {label}"] if label and label not in LABELS else []
    remarks += [comment] if comment else []
    remarks += [f"generator: {generator}"] if generator and not human and generator != "simulated" else []
    basis = each.text("pdclass:basis", BASES)
    return Annotation(
        onset_sample=onset,
        sample_count=count,
        label=label if label in LABELS else None,
        basis="simulated" if basis is None and generator == "simulated" else basis,
        labelled_by=generator.removeprefix("human:") if generator is not None and human else None,
        comment="; ".join(remarks) or None,
        family=each.text("pdclass:family"),
        distance_m=each.number("pdclass:distance_m", low=0.0),
        charge_pc=each.number("pdclass:charge_pc"),
    )
