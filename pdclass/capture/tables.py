"""Parquet pulse tables, own and foreign, into pulse sets: everything checked before it is built."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any, BinaryIO

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

from pdclass.capture.columns import column_values
from pdclass.capture.fields import Fields, chain_of, shown
from pdclass.capture.fill import OPTIONS, FillIns
from pdclass.capture.footer import Declared, read_footer
from pdclass.capture.guard import open_plain, parse_json
from pdclass.capture.tables_writer import ARROW_TYPES, TABLE_FORMAT, TABLE_KEY
from pdclass.capture.waves import check_waves, peak_v, pretrigger_noise_v, signal_to_noise_db, wave_rows
from pdclass.digest import loose_pulse_id
from pdclass.errors import InputError, complaint
from pdclass.pulses import (
    LABELS,
    SIMULATED_COLUMNS,
    TABLE_COLUMNS,
    Chain,
    PulseSet,
    WaveArray,
    is_own_class,
    typed_table,
    window_samples,
)

WAVE_LIMIT_BYTES = 16 << 30
COLUMN_LIMIT_BYTES = 2 << 30
COLUMN_LIMIT = 2000
CLASS_LIMIT = 100
ROW_LIMIT = 20_000_000
_ROWS_A_BATCH = 1024
# waves a few times too long are read, to name the row; a row that stands for a billion samples is not
_LONGEST_WAVES = 8
_KNOWN = {"pulse_id": "str", **TABLE_COLUMNS, **SIMULATED_COLUMNS}
_TEXTS = [name for name, kind in _KNOWN.items() if kind == "str"]
_FILLED = ("circuit", "site", "sensor", "session")


@dataclass(frozen=True)
class _Opened:
    """A Parquet file whose footer has been read, and what the footer says."""

    where: str
    file: Any
    names: tuple[str, ...]
    declared: Declared
    said: dict[str, Any]

    @property
    def rows(self) -> int:
        return self.declared.rows

    def wrong(self, field: str, expected: object, found: object, advice: str) -> InputError:
        return InputError(complaint(self.where, field, expected=expected, found=found, advice=advice))

    def type_of(self, name: str) -> Any:
        return self.file.schema_arrow.field(name).type


def read_pulses(path: Path | str, fill: FillIns | None = None) -> tuple[PulseSet, list[str]]:
    """The pulses of a Parquet pulse table, and notes of one line each on what was left out or derived.

    Needed are `circuit`, `session`, `wave` and the rate (file metadata `pdclass`, else a column `rate_hz` of one
    value, else the fill-in); the rest is derived (`pulse_id`, `noise_v`, `peak_v`, `snr_db`) or null. Page
    checksums are verified where the file has them; no pandas metadata and no extension type is honoured.

    Raises
    ------
    InputError
        If the file is not a Parquet file, is damaged or too large, lacks a needed field, or if a column or a row
        breaks the rules of the pulse table; the message names the row, counted from 0.
    """
    where, fill = str(path), fill or FillIns()
    try:
        with open_plain(Path(path)) as source:
            return _read(_opened(where, source), fill)
    except (pa.ArrowException, OSError, EOFError) as error:
        reason = " ".join(str(error).split())[:200]
        raise InputError(f"{where}: damaged Parquet file ({reason}); copy or write the table again") from None
    except MemoryError:
        raise InputError(f"{where}: too large for this machine's memory; split the table") from None
    except (ValueError, LookupError, OverflowError) as error:
        raise InputError(f"{where}: not readable as a pulse table ({error}); write it again") from None


def _opened(where: str, source: BinaryIO) -> _Opened:
    try:
        declared = read_footer(source)
    except ValueError as error:
        raise InputError(f"{where}: {error}; give a pulse table, or copy it again") from None
    footer = pq.ParquetFile(source, arrow_extensions_enabled=False)
    texts = [field.name for field in footer.schema_arrow if field.name in _TEXTS and _is_text(field.type)]
    file = pq.ParquetFile(
        source,
        metadata=footer.metadata,
        page_checksum_verification=True,
        arrow_extensions_enabled=False,
        read_dictionary=texts,
    )
    names = tuple(file.schema_arrow.names)
    said = _said(where, file.schema_arrow.metadata or {})
    opened = _Opened(where, file, names, declared, said)
    _check_size(opened)
    return opened


def _is_text(kind: Any) -> bool:
    inner = kind.value_type if pa.types.is_dictionary(kind) else kind
    return bool(pa.types.is_string(inner) or pa.types.is_large_string(inner))


def _said(where: str, metadata: dict[bytes, bytes]) -> dict[str, Any]:
    if TABLE_KEY not in metadata:
        return {}
    said = parse_json(metadata[TABLE_KEY], f"{where}: file metadata 'pdclass'")
    advice = "use a version of the program that reads it"
    found = said.get("format") if isinstance(said, dict) else said
    if not isinstance(said, dict) or isinstance(found, bool) or found != TABLE_FORMAT:
        raise InputError(complaint(where, "pdclass.format", expected=TABLE_FORMAT, found=shown(found), advice=advice))
    return said


def _check_size(opened: _Opened) -> None:
    declared = opened.declared
    if len(opened.names) > COLUMN_LIMIT or len(set(opened.names)) < len(opened.names):
        expected = f"at most {COLUMN_LIMIT} columns, each name once"
        raise opened.wrong("columns", expected, f"{len(opened.names)} columns", "write the pulse table's columns only")
    if declared.rows > ROW_LIMIT:
        raise opened.wrong("rows", f"at most {ROW_LIMIT}", declared.rows, "split the table")
    for name in (name for name in opened.names if name == "wave" or name in _KNOWN):
        limit = WAVE_LIMIT_BYTES if name == "wave" else COLUMN_LIMIT_BYTES
        # eight bytes a value: a few bytes on disk may stand for a very long run of equal values
        found = max(declared.uncompressed_bytes.get(name, 0), 8 * declared.values.get(name, 0))
        if found > limit:
            raise opened.wrong(name, f"at most {limit} bytes", f"{found} bytes declared", "split the table")


def _read(opened: _Opened, fill: FillIns) -> tuple[PulseSet, list[str]]:
    _check_needed(opened, fill)
    notes = _left_out(opened)
    chains = _chains(opened, fill)
    waves = _waves(opened, window_samples(chains[0].rate_hz))
    check_waves(opened.where, waves)
    filled = Fields(opened.where, {}, "", {name: getattr(fill, name) for name in _FILLED}, OPTIONS)
    texts = {name: filled.text(name) for name in _FILLED}
    own_classes = _own_classes(opened)
    columns = _columns(opened, len(chains), texts, notes, own_classes)
    columns |= {
        name: np.full(opened.rows, text, object)
        for name, text in texts.items()
        if text is not None and name not in columns
    }
    ids = columns.pop("pulse_id", None)
    if ids is None:
        ids = _loose_ids(waves, columns)
        notes.append(f"{opened.where}: pulse_id: absent, derived from wave, circuit and session")
    _check_unique(opened, ids)
    _derive(opened, columns, waves, notes)
    simulated = any(name in columns for name in SIMULATED_COLUMNS)
    table = typed_table(pd.DataFrame(columns, index=ids), ids, simulated=simulated)
    return PulseSet(waves, chains, _with_lost_parents(opened.where, table, notes), own_classes), notes


def _with_lost_parents(where: str, table: pd.DataFrame, notes: list[str]) -> pd.DataFrame:
    """Echoes whose parent is not in the table are kept as pulses that may be echoes: none gets lost unsaid."""
    lost = table["echo_of"].notna() & ~table["echo_of"].isin(table.index)
    if not lost.any():
        return table
    notes.append(f"{where}: {lost.sum()} echoes without their parent are kept as pulses whose every label stays open")
    maybe = table["maybe_echo_of"].where(~lost, table["echo_of"])
    return table.assign(maybe_echo_of=maybe, echo_of=table["echo_of"].where(~lost, None))


def _check_needed(opened: _Opened, fill: FillIns) -> None:
    for name in ("circuit", "session", "wave"):
        if name not in opened.names and getattr(fill, name, None) is None:
            option = f", or give {OPTIONS[name]}" if name in OPTIONS else ""
            found = "only " + shown(", ".join(opened.names))
            raise opened.wrong(name, "a column", found, f"write the column{option}")


def _left_out(opened: _Opened) -> list[str]:
    unknown = [name for name in opened.names if name not in _KNOWN and name not in ("wave", "rate_hz")]
    if not unknown:
        return []
    listed = ", ".join(repr(name) for name in unknown[:10]) + (" ..." if len(unknown) > 10 else "")
    return [f"{opened.where}: {len(unknown)} unknown columns left out: {listed}"]


def _chains(opened: _Opened, fill: FillIns) -> tuple[Chain, ...]:
    supplied = {name: getattr(fill, name) for name in ("volts_per_count", "band_hz", "mains_hz")}
    rate_hz = _rate_hz(opened, fill)
    rows = opened.said.get("chains")
    rows = [{}] if rows is None else rows
    if not isinstance(rows, list) or not all(isinstance(row, dict) for row in rows) or not 0 < len(rows) <= 2**15:
        raise opened.wrong("pdclass.chains", "a list of 1 to 32768 objects", shown(rows), "write the table again")
    return tuple(
        chain_of(Fields(opened.where, row, f"pdclass.chains[{place}].", supplied, OPTIONS), "", rate_hz)
        for place, row in enumerate(rows)
    )


def _rate_hz(opened: _Opened, fill: FillIns) -> float:
    content = {"rate_hz": opened.said.get("rate_hz")}
    place = "pdclass."
    if content["rate_hz"] is None and "rate_hz" in opened.names:
        content, place = {"rate_hz": _one_rate(opened)}, ""
    fields = Fields(opened.where, content, place, {"rate_hz": fill.rate_hz}, OPTIONS)
    return fields.needed("rate_hz", fields.number("rate_hz", above=0.0, high=1e12))


def _one_rate(opened: _Opened) -> float | None:
    if not (pa.types.is_floating(opened.type_of("rate_hz")) or pa.types.is_integer(opened.type_of("rate_hz"))):
        raise opened.wrong("rate_hz", "numbers", opened.type_of("rate_hz"), "write the column as double")
    rates: set[float] = set()
    for batch in _batches(opened, "rate_hz"):
        rates |= {float(rate) for rate in batch.drop_null().unique().to_pylist()}
    if len(rates) > 1:
        found = " and ".join(f"{rate:g}" for rate in sorted(rates)[:4])
        raise opened.wrong("rate_hz", "one rate a table", found, "write one table for each rate")
    return rates.pop() if rates else None


def _batches(opened: _Opened, name: str) -> Iterator[Any]:
    for batch in opened.file.iter_batches(batch_size=_ROWS_A_BATCH, columns=[name], use_threads=False):
        column = batch.column(0)
        # a damaged page header (it has no checksum) can leave indices beyond their dictionary
        column.validate(full=True)
        yield column


def _waves(opened: _Opened, samples: int) -> WaveArray:
    kind = opened.type_of("wave")
    lists = (pa.types.is_fixed_size_list, pa.types.is_list, pa.types.is_large_list)
    if not any(check(kind) for check in lists) or kind.value_type not in (pa.float32(), pa.float64()):
        raise opened.wrong("wave", "lists of float (volts)", kind, "write the waves in volts as list<float>")
    if samples < 4:
        raise opened.wrong("rate_hz", "at least 4 samples in a window of 20 us", f"{samples}", "check the rate")
    if pa.types.is_fixed_size_list(kind) and kind.list_size != samples:
        raise _other_window(opened, "wave", samples, kind.list_size)
    values = opened.declared.values.get("wave", 0)
    if values > _LONGEST_WAVES * samples * opened.rows or 4 * samples * opened.rows > WAVE_LIMIT_BYTES:
        expected = f"{samples * opened.rows} samples in {opened.rows} rows, at most {WAVE_LIMIT_BYTES} bytes"
        raise opened.wrong("wave", expected, f"{values} samples", "cut the windows to 20 us, or split the table")
    waves, row = np.empty((opened.rows, samples), np.float32), 0
    for column in _batches(opened, "wave"):
        if column.null_count:
            place = row + int(np.argmin(column.is_valid().to_numpy(zero_copy_only=False)))
            raise opened.wrong(f"wave, row {place}", "a wave", "nothing", "leave the row out")
        lengths = column.value_lengths().to_numpy(zero_copy_only=False)
        if (lengths != samples).any():
            place = int(np.argmax(lengths != samples))
            raise _other_window(opened, f"wave, row {row + place}", samples, int(lengths[place]))
        _check_rows(opened, "wave", max(opened.rows, row + len(column)))
        waves[row : row + len(column)] = wave_rows(column, samples)
        row += len(column)
    _check_rows(opened, "wave", row)
    return waves


def _other_window(opened: _Opened, field: str, samples: int, found: int) -> InputError:
    expected = f"{samples} samples (20 us at the table's rate)"
    return opened.wrong(field, expected, f"{found} samples", "cut the windows to 20 us, or correct the rate")


def _check_rows(opened: _Opened, name: str, found: int) -> None:
    if found != opened.rows:
        raise opened.wrong(name, f"{opened.rows} rows", f"{found} rows", "the file is damaged; copy it again")


def _own_classes(opened: _Opened) -> dict[str, str]:
    classes = opened.said.get("classes", {})
    fits = isinstance(classes, dict) and len(classes) <= CLASS_LIMIT
    if not fits or not all(is_own_class(name) and kind in ("", *LABELS) for name, kind in classes.items()):
        expected = f'at most {CLASS_LIMIT} own classes, each with one of ours or ""'
        raise opened.wrong("pdclass.classes", expected, shown(classes), "write the table again")
    return {str(name): str(kind) for name, kind in classes.items()}


def _columns(
    opened: _Opened, chains: int, texts: dict[str, str | None], notes: list[str], own_classes: dict[str, str]
) -> dict[str, Any]:
    columns: dict[str, Any] = {}
    for name in (name for name in _KNOWN if name in opened.names):
        parts = list(_batches(opened, name))
        _check_rows(opened, name, sum(len(part) for part in parts))
        kind = ARROW_TYPES[_KNOWN[name]]
        found = opened.type_of(name)
        columns[name] = column_values(opened.where, name, found, kind, parts, notes, texts.get(name), own_classes)
    if "chain" in columns and not np.all((columns["chain"] >= 0) & (columns["chain"] < chains)):
        row = int(np.argmax((columns["chain"] < 0) | (columns["chain"] >= chains)))
        found = int(columns["chain"][row])
        raise opened.wrong(f"chain, row {row}", f"0 to {chains - 1}", found, "correct it, or list the chain")
    return columns


def _loose_ids(waves: WaveArray, columns: dict[str, Any]) -> Any:
    rows = zip(waves, columns["circuit"], columns["session"], strict=True)
    return np.array([loose_pulse_id(wave, circuit, session) for wave, circuit, session in rows], object)


def _check_unique(opened: _Opened, ids: Any) -> None:
    seen: dict[str, int] = {}
    for row, name in enumerate(ids):
        if name in seen:
            found = f"{name} in rows {seen[name]} and {row}"
            raise opened.wrong("pulse_id", "each pulse once", found, "leave one of the rows out")
        seen[name] = row


def _derive(opened: _Opened, columns: dict[str, Any], waves: WaveArray, notes: list[str]) -> None:
    derived = [name for name in ("noise_v", "peak_v", "snr_db") if name not in columns]
    if "noise_v" in derived:
        columns["noise_v"] = pretrigger_noise_v(waves)
    if "peak_v" in derived:
        columns["peak_v"] = peak_v(waves)
    if "snr_db" in derived:
        columns["snr_db"] = signal_to_noise_db(columns["peak_v"], columns["noise_v"])
    if derived:
        notes.append(f"{opened.where}: {', '.join(derived)}: absent, measured on each window")
