"""Numbers with units, measured on pulses: the catalogue and the table."""

from pdclass.features.catalogue import BY_NAME, CATALOGUE, FAMILIES, feature_digests
from pdclass.features.feature import Feature
from pdclass.features.table import feature_table, measured_edges
from pdclass.features.window import ANALYSIS_BAND_HZ, ANALYSIS_RATE_HZ

__all__ = [
    "ANALYSIS_BAND_HZ",
    "ANALYSIS_RATE_HZ",
    "BY_NAME",
    "CATALOGUE",
    "FAMILIES",
    "Feature",
    "feature_digests",
    "feature_table",
    "measured_edges",
]
