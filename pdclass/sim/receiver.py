"""The receiving chain: current transformer on the strap, its lead, anti-alias filter, sampling and quantisation.

The transformer is a coupled circuit: the strap is its primary of one turn, the winding on the core its secondary.
Seen from the secondary, the strap current over the number of turns feeds the magnetising inductance and the winding
capacitance side by side; leakage inductance and winding resistance lie between these and the burden, to which the
lead is parallel. Without leakage and capacitance its transfer impedance is that of one zero and one pole,
(R/N) s / (s + R/L): a coupled circuit of real poles and zeros as in A. Rodrigo-Mor, F. A. Munoz, L. C.
Castro-Heredia, Sensors 20(9), 2520, 2020. Kinds and values of all elements: common practice, no source.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Literal

import numpy as np
import scipy.ndimage
import scipy.signal
from numpy.typing import NDArray

from pdclass.errors import InputError, complaint
from pdclass.pulses import FloatArray, WaveArray
from pdclass.sim.grid import ComplexArray, band_end

FilterKind = Literal["butterworth", "bessel"]

#: No digitiser of this world passes more [Hz].
WIDEST_HZ = 48e6
#: Travel time of a coaxial lead with solid polyethylene [s/m].
_LEAD_S_PER_M = 5.05e-9
_LEAST_NOISE_DB_OF_COUNT = 3.5
_THIRD_OCTAVE = np.log(2.0) / 3
_BAND_POINTS = 2401
_PIECE = 1 << 15
#: Slope of a sampled signal per sample from differences of samples 1, 2, 3 and 4 to both sides, eighth order.
_SLOPE = (4 / 5, -1 / 5, 4 / 105, -1 / 280)


@dataclass(frozen=True)
class Transformer:
    """A current transformer as a coupled circuit, all elements on the side of the winding.

    Attributes
    ----------
    turns : of the winding, >= 1; the strap is one turn.
    magnetising_henry : inductance of the winding on its core without mains current [H], > 0.
    leakage_henry : inductance that the strap does not share [H], >= 0.
    winding_farad : capacitance of the winding [F], >= 0.
    winding_ohm : resistance of the winding [ohm], >= 0.
    burden_ohm : resistance in the sensor's housing, parallel to the lead [ohm]; infinite without one.
    """

    turns: int
    magnetising_henry: float
    leakage_henry: float
    winding_farad: float
    winding_ohm: float
    burden_ohm: float


@dataclass(frozen=True)
class SensorLead:
    """The coaxial lead from the sensor to the digitiser, and the digitiser's input.

    Attributes
    ----------
    length_m : its length [m], >= 0.
    impedance_ohm : its characteristic impedance [ohm].
    skin_s : loss along it as K of exp(-K sqrt(s) length) [s^0.5/m], >= 0.
    input_ohm, input_farad : resistance and capacitance of the input [ohm, F].
    """

    length_m: float
    impedance_ohm: float
    skin_s: float
    input_ohm: float
    input_farad: float


@dataclass(frozen=True)
class AntiAlias:
    """The low-pass before the sampler: its kind, order, and -3 dB corner [Hz]."""

    kind: FilterKind
    order: int
    corner_hz: float


@dataclass(frozen=True)
class Receiver:
    """A high-frequency current transformer, its lead and its digitiser.

    Attributes
    ----------
    rate_hz : samples a second [Hz].
    bits : resolution [bit], 8 to 16.
    mains_hz : frequency of the mains current in the strap [Hz].
    transformer, lead, anti_alias : what the strap current passes.
    saturation : share of its inductance that the core loses at the peaks of the mains current, 0 to below 1.
    strap_lag_deg : phase by which the mains current in the strap follows the reference voltage [deg].
    jitter_s : standard deviation of the sampling instants [s], >= 0.
    """

    rate_hz: float
    bits: int
    mains_hz: float
    transformer: Transformer
    lead: SensorLead
    anti_alias: AntiAlias
    saturation: float = 0.0
    strap_lag_deg: float = 0.0
    jitter_s: float = 0.0

    @property
    def load_ohm(self) -> float:
        """Burden and input side by side [ohm]."""
        return 1 / (1 / self.transformer.burden_ohm + 1 / self.lead.input_ohm)

    @property
    def transfer_ohm(self) -> float:
        """Mid-band transfer impedance at the digitiser, without the lead's loss and mismatch [V/A].

        With them 0.85 to 1.02 of it remains (median over the band; 99 of 100 chains of the base world).
        """
        return self.load_ohm / self.transformer.turns

    @property
    def inserted_ohm(self) -> float:
        """Resistance that the transformer inserts into the strap in mid-band [ohm]."""
        return self.load_ohm / self.transformer.turns**2

    @property
    def low_hz(self) -> float:
        """Lower -3 dB corner of the transformer without mains current [Hz]."""
        resistance = self.load_ohm + self.transformer.winding_ohm
        return float(resistance / (2 * np.pi * self.transformer.magnetising_henry))

    @property
    def high_hz(self) -> float:
        """Upper -3 dB corner of the transformer into a resistive input [Hz]; infinite without winding capacitance."""
        transformer = self.transformer
        resistance = self.load_ohm + transformer.winding_ohm
        # where |1 + linear s + square s^2|^2 = 2
        linear = resistance * transformer.winding_farad
        square = transformer.leakage_henry * transformer.winding_farad
        half = linear**2 / 2 - square
        with np.errstate(divide="ignore"):
            return float(np.sqrt(1 / (half + np.sqrt(half**2 + square**2))) / (2 * np.pi))


def transformer_of(
    transfer_ohm: float,
    band_hz: tuple[float, float],
    *,
    turns: int,
    quality: float,
    winding_ohm: float,
    input_ohm: float,
) -> Transformer:
    """The transformer that has the given mid-band transfer and -3 dB corners into a resistive input.

    Parameters
    ----------
    transfer_ohm : mid-band transfer impedance [V/A], at most `input_ohm / turns`.
    band_hz : lower and upper corner [Hz].
    turns : of the winding.
    quality : of the pair of poles at the upper corner, > 0; towards 0 the leakage vanishes, sqrt(1/2) is flattest.
    winding_ohm, input_ohm : resistances of the winding and of the digitiser's input [ohm].

    Raises
    ------
    InputError
        If so many turns cannot give so high a transfer impedance.
    """
    load = transfer_ohm * turns
    if load > input_ohm:
        found = f"{transfer_ohm:g} V/A with {turns} turns"
        limit = f"at most {input_ohm / turns:g} V/A"
        advice = "take fewer turns"
        raise InputError(complaint("current transformer", "transfer_ohm", expected=limit, found=found, advice=advice))
    resistance = load + winding_ohm
    omega = 2 * np.pi * band_hz[1] / _corner_of_quality(quality)
    return Transformer(
        turns=turns,
        magnetising_henry=float(resistance / (2 * np.pi * band_hz[0])),
        leakage_henry=float(quality * resistance / omega),
        winding_farad=float(1 / (quality * omega * resistance)),
        winding_ohm=winding_ohm,
        burden_ohm=float(1 / (1 / load - 1 / input_ohm)) if load < input_ohm else np.inf,
    )


def sensor_response(receiver: Receiver, s: ComplexArray, saturation: FloatArray | float = 0.0) -> ComplexArray:
    """Transfer impedance from strap current to the digitiser's input [V/A].

    Parameters
    ----------
    s : complex frequencies [1/s], (frequencies,).
    saturation : share of its inductance that the core has lost at the instant, 0 to below 1, any shape.

    Returns
    -------
    ComplexArray
        (..., frequencies), with the leading shape of `saturation`.
    """
    transformer = receiver.transformer
    load = 1 / (1 / transformer.burden_ohm + _lead_admittance(receiver.lead, s))
    winding = transformer.winding_ohm + s * transformer.leakage_henry + load
    # times s, so that nothing is divided by zero at standstill
    shunt = s + winding * (s**2 * transformer.winding_farad + 1 / transformer.magnetising_henry)
    unsaturated = s * load * _lead_transfer(receiver.lead, s) / (transformer.turns * shunt)
    return np.asarray(unsaturated * saturated(core_sensitivity(receiver, s), saturation))


def core_sensitivity(receiver: Receiver, s: ComplexArray) -> ComplexArray:
    """How much of the strap current the core takes without mains current, (frequencies,): 1 at standstill, 0 far up.

    It is what `saturated` needs, computed once a circuit.
    """
    transformer = receiver.transformer
    load = 1 / (1 / transformer.burden_ohm + _lead_admittance(receiver.lead, s))
    winding = transformer.winding_ohm + s * transformer.leakage_henry + load
    core = winding / transformer.magnetising_henry
    return np.asarray(core / (s * (1 + s * winding * transformer.winding_farad) + core))


def saturated(sensitivity: ComplexArray, saturation: FloatArray | float) -> ComplexArray:
    """Response with a core that has lost a share of its inductance, over the response without loss.

    Parameters
    ----------
    sensitivity : of `core_sensitivity`, (frequencies,).
    saturation : share lost, 0 to below 1, any shape.

    Returns
    -------
    ComplexArray
        (..., frequencies): 1 / (1 + lost / (1 - lost) sensitivity), exact for the circuit.
    """
    lost = np.asarray(saturation, np.float64)[..., None]
    return np.asarray(1 / (1 + lost / (1 - lost) * sensitivity))


def saturation_at(receiver: Receiver, phase_deg: FloatArray) -> FloatArray:
    """Share of its inductance that the core has lost at phases of the reference voltage [deg], same shape.

    The flux follows x / sqrt(1 + x^2) of the current x, so that the inductance for small signals falls with
    (1 + x^2)^(-3/2): common practice for a core without remanence, no source.
    """
    peak = (1 - receiver.saturation) ** (-2 / 3) - 1
    current = np.sin(np.deg2rad(phase_deg - receiver.strap_lag_deg))
    return np.asarray(1 - (1 + peak * current**2) ** -1.5)


def anti_alias_response(anti_alias: AntiAlias, s: ComplexArray) -> ComplexArray:
    """Response of the low-pass before the sampler, (frequencies,), 1 at 0 Hz and sqrt(1/2) at its corner."""
    poles, gain = _low_pass(anti_alias)
    return np.asarray(gain / np.prod([s - pole for pole in poles], axis=0))


def chain_response(receiver: Receiver, s: ComplexArray) -> ComplexArray:
    """Strap current to sampled voltage on `laplace_grid()` without mains current [V/A], (frequencies,)."""
    return np.asarray(sensor_response(receiver, s) * anti_alias_response(receiver.anti_alias, s) * band_end())


def chain_band_hz(receiver: Receiver) -> tuple[float, float]:
    """Lower and upper -3 dB corner of the whole chain without mains current [Hz].

    The level is taken over a third of an octave and compared with its median between three times the transformer's
    lower corner and a third of its upper one, so that the ripple of the lead moves neither corner far.
    """
    hz = np.geomspace(receiver.low_hz / 6, receiver.rate_hz / 2, _BAND_POINTS)
    s = (2j * np.pi * hz).astype(np.complex128)
    level_db = 20 * np.log10(np.abs(sensor_response(receiver, s) * anti_alias_response(receiver.anti_alias, s)))
    width = round(_THIRD_OCTAVE / np.log(hz[1] / hz[0]))
    smooth = scipy.ndimage.uniform_filter1d(level_db, width, mode="nearest")
    upper_hz = min(receiver.high_hz, receiver.anti_alias.corner_hz)
    usual = np.interp(np.geomspace(3 * receiver.low_hz, upper_hz / 3, 64), hz, smooth)
    within = hz[smooth >= np.median(usual) - 20 * np.log10(np.sqrt(2))]
    return float(within[0]), float(within[-1])


def jittered(signal: WaveArray, rate_hz: float, jitter_s: float, *, rng: np.random.Generator) -> WaveArray:
    """The signal taken at instants that stray, to first order: slope times time error.

    Parameters
    ----------
    signal : samples [V], (samples,).
    rate_hz : samples a second [Hz].
    jitter_s : standard deviation of the instants [s], independent from sample to sample; they are drawn evenly, which
        gives the same power as a Gaussian in a fraction of the time.
    """
    reach = len(_SLOPE)
    padded = np.pad(signal, reach, mode="edge")
    taken = np.empty_like(signal)
    # in pieces that stay in the processor's cache
    for first in range(0, signal.size, _PIECE):
        piece = padded[first : first + _PIECE + 2 * reach]
        stray = _slope(piece)
        stray *= rng.random(stray.size, np.float32) - np.float32(0.5)
        stray *= np.float32(np.sqrt(12) * jitter_s * rate_hz)
        taken[first : first + _PIECE] = piece[reach:-reach] + stray
    return taken


def most_full_scale_db(bits: int) -> float:
    """Highest full scale over the noise at which the noise still has 1.5 counts [dB]: `bits`, 8 to 16."""
    return float(20 * np.log10(2) * (bits - 1) - _LEAST_NOISE_DB_OF_COUNT)


def quantise(signal_v: FloatArray | WaveArray, volts_per_count: float, bits: int) -> NDArray[Any]:
    """Counts of a digitiser: rounded, clipped to the range; int8 up to 8 bits, else int16.

    Parameters
    ----------
    signal_v : samples [V], any shape.
    volts_per_count : size of one count [V], > 0.
    bits : resolution [bit], 2 to 16.
    """
    half = 1 << (bits - 1)
    counts = np.rint(signal_v / np.asarray(volts_per_count, signal_v.dtype))
    np.clip(counts, -half, half - 1, out=counts)
    return np.asarray(counts, np.int8 if bits <= 8 else np.int16)


def _slope(padded: WaveArray) -> WaveArray:
    """Slope per sample of what lies between four samples of padding at both ends."""
    reach = len(_SLOPE)
    slope = np.zeros(padded.size - 2 * reach, np.float32)
    for apart, weight in enumerate(_SLOPE, 1):
        later = padded[reach + apart : padded.size - reach + apart]
        slope += (later - padded[reach - apart : -reach - apart]) * np.float32(weight)
    return slope


def _corner_of_quality(quality: float) -> float:
    """-3 dB corner of a low-pass of second order over its natural frequency."""
    bend = 1 - 1 / (2 * quality**2)
    return float(np.sqrt(bend + np.sqrt(bend**2 + 1)))


def _lead_waves(lead: SensorLead, s: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
    """Travel along the lead once, and the voltage reflected by the input."""
    shown = lead.impedance_ohm * (1 / lead.input_ohm + s * lead.input_farad)
    once = np.exp(-(s * _LEAD_S_PER_M + lead.skin_s * np.sqrt(s)) * lead.length_m)
    return np.asarray(once), np.asarray((1 - shown) / (1 + shown))


def _lead_admittance(lead: SensorLead, s: ComplexArray) -> ComplexArray:
    once, back = _lead_waves(lead, s)
    return np.asarray((1 - back * once**2) / (lead.impedance_ohm * (1 + back * once**2)))


def _lead_transfer(lead: SensorLead, s: ComplexArray) -> ComplexArray:
    once, back = _lead_waves(lead, s)
    return np.asarray((1 + back) * once / (1 + back * once**2))


@lru_cache(maxsize=256)
def _low_pass(anti_alias: AntiAlias) -> tuple[ComplexArray, float]:
    corner = 2 * np.pi * anti_alias.corner_hz
    if anti_alias.kind == "bessel":
        _, poles, gain = scipy.signal.bessel(anti_alias.order, corner, analog=True, output="zpk", norm="mag")
    else:
        _, poles, gain = scipy.signal.butter(anti_alias.order, corner, analog=True, output="zpk")
    return np.asarray(poles, np.complex128), float(np.real(gain))
