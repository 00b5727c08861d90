"""Files into the in-memory types and back: captures, pulse tables, somebody else's pulses, labels."""

from pdclass.capture.arrays import HDF5_ENDINGS, NPZ_ENDINGS
from pdclass.capture.fill import OPTIONS, FillIns
from pdclass.capture.foreign import Rows, pulses_of, read_rows
from pdclass.capture.labels import (
    LABEL_COLUMNS,
    Joined,
    LabelFile,
    double_notes,
    join_labels,
    labels_text,
    read_labels,
)
from pdclass.capture.maps import Map, parse_classes, read_map, together
from pdclass.capture.opening import check_name, open_capture
from pdclass.capture.sigmf_writer import counts_digest, write_sigmf
from pdclass.capture.tables import read_pulses
from pdclass.capture.tables_writer import write_pulses

__all__ = [
    "HDF5_ENDINGS",
    "LABEL_COLUMNS",
    "NPZ_ENDINGS",
    "OPTIONS",
    "FillIns",
    "Joined",
    "LabelFile",
    "Map",
    "Rows",
    "check_name",
    "counts_digest",
    "double_notes",
    "join_labels",
    "labels_text",
    "open_capture",
    "parse_classes",
    "pulses_of",
    "read_labels",
    "read_map",
    "read_pulses",
    "read_rows",
    "together",
    "write_pulses",
    "write_sigmf",
]
