"""From a capture's stream of samples to its pulses."""

from pdclass.extract.background import ExtractSettings
from pdclass.extract.stream import Extraction, extract

__all__ = ["ExtractSettings", "Extraction", "extract"]
