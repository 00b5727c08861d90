"""From a capture's stream of samples to its pulses."""

from pdclass.extract.stream import Extraction, ExtractSettings, extract

__all__ = ["ExtractSettings", "Extraction", "extract"]
