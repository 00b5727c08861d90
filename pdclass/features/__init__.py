"""Numbers with units, measured on pulses: the catalogue and the table."""

from pdclass.features.catalogue import BY_NAME, CATALOGUE, FAMILIES, feature_digests
from pdclass.features.feature import Feature, why_missing
from pdclass.features.table import Measured, feature_table, measured, measured_edges
from pdclass.features.window import ANALYSIS_BAND_HZ, ANALYSIS_RATE_HZ

__all__ = [
    "ANALYSIS_BAND_HZ",
    "ANALYSIS_RATE_HZ",
    "BY_NAME",
    "CATALOGUE",
    "FAMILIES",
    "Feature",
    "Measured",
    "feature_digests",
    "feature_table",
    "measured",
    "measured_edges",
    "why_missing",
]
