"""Ranges quoted in the trade for attenuation and velocity, and where drawn cables lie beside them."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from pdclass.report.gallery_physics import TABLE_MHZ, Spread
from pdclass.verdict.sentences import three_digits

#: Ranges quoted in the trade, from memory, orders of magnitude: attenuation [MHz: least, most dB/km], velocity [m/us].
QUOTED_DB_PER_KM: Mapping[str, Mapping[float, tuple[float, float]]] = {
    "XLPE": {1.0: (1.0, 10.0), 10.0: (10.0, 60.0)},
    "EPR": {10.0: (10.0, 600.0)},
    "paper": {1.0: (2.0, 50.0), 10.0: (20.0, 300.0)},
    "belted": {1.0: (2.0, 50.0), 10.0: (20.0, 300.0)},
}
QUOTED_M_PER_US: Mapping[str, tuple[float, float]] = {
    "XLPE": (160.0, 180.0),
    "EPR": (150.0, 170.0),
    "paper": (150.0, 165.0),
    "belted": (150.0, 165.0),
}
#: Up to such a ratio of attenuations or velocities a line lies "a little" outside.
_A_LITTLE_LOSS, _A_LITTLE_SPEED = 1.5, 1.05


def beside_quoted(spread: Spread) -> str:
    """Where the band of drawn cables leaves the quoted ranges, in words; that it does not, if so."""
    found = [*_losses(spread), *_speeds(spread)]
    if not found:
        return "The band lies within what the trade quotes."
    return f"Beside the trade's figures: {'; '.join(found)}."


def _losses(spread: Spread) -> Iterator[str]:
    for mhz, (least, most) in QUOTED_DB_PER_KM.get(spread.kind, {}).items():
        at = _at(spread, mhz)
        where, (low, _, high) = _where(spread, at), spread.db_per_km[:, at]
        if low < least:
            far = _far(least / low, _A_LITTLE_LOSS)
            yield f"{where} the 10 % line lies {far} below the bar ({_pair(low, least)} dB/km)"
        if high > most:
            far = _far(high / most, _A_LITTLE_LOSS)
            yield f"{where} the 90 % line lies {far} above the bar ({_pair(high, most)} dB/km)"


def _speeds(spread: Spread) -> Iterator[str]:
    """At the frequency of the table where the band lies farthest out on each side."""
    quoted = QUOTED_M_PER_US.get(spread.kind)
    if quoted is None:
        return
    least, most = quoted
    places = [_at(spread, mhz) for mhz in TABLE_MHZ]
    slow = min(places, key=lambda at: spread.m_per_us[0, at])
    fast = max(places, key=lambda at: spread.m_per_us[2, at])
    low, high = spread.m_per_us[0, slow], spread.m_per_us[2, fast]
    if low < least:
        far = _far(least / low, _A_LITTLE_SPEED)
        yield f"{_where(spread, slow)} the 10 % velocity lies {far} below the lower line ({_pair(low, least)} m/µs)"
    if high > most:
        far = _far(high / most, _A_LITTLE_SPEED)
        yield f"{_where(spread, fast)} the 90 % velocity lies {far} above the upper line ({_pair(high, most)} m/µs)"


def _at(spread: Spread, mhz: float) -> int:
    return int(np.argmin(np.abs(spread.mhz - mhz)))


def _where(spread: Spread, at: int) -> str:
    return f"at {spread.mhz[at]:g} MHz"


def _far(ratio: float, a_little: float) -> str:
    return "a little" if ratio <= a_little else "well"


def _pair(found: float, bound: float) -> str:
    return f"{three_digits(float(found))} against {bound:g}"
