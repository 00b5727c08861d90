"""From raw high-frequency captures to reasoned, calibrated, replayable verdicts on discharge pulses."""

__version__ = "0.2.0"
