"""What the user supplies for a file that does not say it; a fill-in never overrides what the file says."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from pdclass.capture.maps import Map
from pdclass.settings import Settings

#: The command-line option that supplies each fill-in.
OPTIONS: Mapping[str, str] = MappingProxyType(
    {
        "rate_hz": "--rate-hz",
        "volts_per_count": "--volts-per-count",
        "circuit": "--circuit",
        "site": "--site",
        "sensor": "--sensor",
        "session": "--session",
        "band_hz": "--band-hz",
        "mains_hz": "--mains-hz",
    }
)


class FillIns(Settings):
    """Values for fields that a file lacks; where the file has the field, the file wins.

    Bounds are checked where a fill-in is used, by the rules of the field that it stands in for, so that
    the message can name the option. `map` says what the columns of a CSV trace are; other kinds of capture need none.
    """

    map: Map | None = None
    rate_hz: float | None = None
    volts_per_count: float | None = None
    circuit: str | None = None
    site: str | None = None
    sensor: str | None = None
    session: str | None = None
    band_hz: tuple[float, float] | None = None
    mains_hz: float | None = None
