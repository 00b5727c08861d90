"""Files into the in-memory types and back: captures (SigMF) and pulse tables (Parquet)."""

from pdclass.capture.fill import OPTIONS, FillIns
from pdclass.capture.opening import check_name, open_capture
from pdclass.capture.sigmf_writer import counts_digest, write_sigmf
from pdclass.capture.tables import read_pulses
from pdclass.capture.tables_writer import write_pulses

__all__ = [
    "OPTIONS",
    "FillIns",
    "check_name",
    "counts_digest",
    "open_capture",
    "read_pulses",
    "write_pulses",
    "write_sigmf",
]
