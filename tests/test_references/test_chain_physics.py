"""The simulated receiving chain against published values, formulas and rules of the trade."""

import numpy as np
import pytest

from pdclass.sim.drawn_chain import ChainRanges, draw_receiver
from pdclass.sim.grid import LEAD_S, laplace_grid, to_samples
from pdclass.sim.receiver import (
    AntiAlias,
    Receiver,
    SensorLead,
    anti_alias_response,
    chain_band_hz,
    jittered,
    quantise,
    sensor_response,
    transformer_of,
)
from pdclass.sim.source import SourceCurrent, source_spectrum

BOLTZMANN = 1.380649e-23
SHORT_LEAD = SensorLead(0.0, 50.0, 0.0, 50.0, 0.0)


def receiver_of(transfer_ohm, band_hz, *, turns=5, quality=0.7, rate_hz=250e6):
    transformer = transformer_of(transfer_ohm, band_hz, turns=turns, quality=quality, winding_ohm=1e-6, input_ohm=50.0)
    return Receiver(rate_hz, 14, 50.0, transformer, SHORT_LEAD, AntiAlias("butterworth", 4, 48e6))


def test_current_transformer_of_one_zero_and_two_poles():
    """Z_T = (R/N) s/(s + w_L) 1/(1 + s/w_H), R/N in mid-band (usual first-order model, from memory).

    Zeros and poles are real (A. Rodrigo-Mor et al., Sensors 20(9), 2520, 2020). Here the upper pole is that of
    winding capacitance and burden; the two poles of the coupled circuit differ from it by their ratio, 1 in 200.
    """
    receiver = receiver_of(5.0, (100e3, 20e6), quality=1e-3)
    s = laplace_grid()
    model = 5.0 * s / (s + 2 * np.pi * receiver.low_hz) / (1 + s / (2 * np.pi * receiver.high_hz))
    assert np.abs(sensor_response(receiver, s) / model - 1).max() < 1.2 / 200


def test_charge_is_the_double_integral_of_the_output():
    """The charge is the double time integral of the output (A. Rodrigo-Mor et al., Sensors 20(9), 2520, 2020).

    For a sensor that passes no direct current the single integral ends at nothing, the double one at charge times
    inductance over turns.
    """
    receiver = receiver_of(5.0, (200e3, 20e6))
    s, rate_hz = laplace_grid(), 250e6
    pulse = source_spectrum(SourceCurrent("gaussian", 20e-9, 20e-9), s) * np.exp(-s * LEAD_S)
    wave = to_samples(pulse * sensor_response(receiver, s), rate_hz)[: round(60e-6 * rate_hz)]
    once = np.cumsum(wave) / rate_hz
    twice = np.cumsum(once) / rate_hz
    assert abs(once[-1]) < 1e-3 * np.abs(once).max()
    assert twice[-1] == pytest.approx(receiver.transformer.magnetising_henry / receiver.transformer.turns, rel=0.01)


@pytest.mark.parametrize(
    ("transfer_ohm", "band_hz"),
    [
        (9.1, (34e3, 60e6)),  # work at TU Delft, from memory
        (5.0, (0.3e6, 50e6)),  # C. Zachariades et al., IEEE Sensors J. 2016, doi:10.1109/JSEN.2016.2600272
        (5.0, (1e6, 80e6)),  # controlled sources at 125 MS/s, A. Melo et al., doi:10.21227/a3r5-zs61, second hand
    ],
)
def test_published_sensors_can_be_built(transfer_ohm, band_hz):
    """Sensors with the published bands and transfer impedance have them, within 3 % of a decibel-wise 3 dB."""
    receiver = receiver_of(transfer_ohm, band_hz)
    s = 2j * np.pi * np.array([band_hz[0], np.sqrt(band_hz[0] * band_hz[1]), band_hz[1]])
    gain = np.abs(sensor_response(receiver, s)) / transfer_ohm
    assert gain == pytest.approx([np.sqrt(0.5), 1.0, np.sqrt(0.5)], rel=0.03)


def test_drawn_sensors_span_what_is_used():
    """Drawn bands span those of papers, some tens of kilohertz to tens of megahertz (X. Hu et al., abstract).

    Transfer impedances are 1 to 15 V/A into 50 ohm (from memory).
    """
    receivers = [draw_receiver(ChainRanges(), rng=np.random.default_rng(seed)) for seed in range(200)]
    bands = np.array([chain_band_hz(one) for one in receivers])
    transfers = [one.transfer_ohm for one in receivers]
    assert bands[:, 0].min() < 40e3
    assert bands[:, 0].max() > 200e3
    assert bands[:, 1].max() > 40e6
    assert min(transfers) == pytest.approx(1.0, abs=0.2)
    assert max(transfers) == pytest.approx(15.0, abs=1.0)


def test_quantisation_of_14_bits():
    """A full-scale sine of 14 bits: 86.05 dB (W. Kester, tutorial MT-001: 6.02 N + 1.76 dB, as published)."""
    turns = 4_097 * np.arange(65_536) / 65_536
    sine = (2**13 - 0.5) * np.sin(2 * np.pi * turns + 0.1)
    error = quantise(sine, 1.0, 14) - sine
    ratio_db = 10 * np.log10(np.mean(sine**2) / np.mean(error**2))
    assert ratio_db == pytest.approx(86.05, abs=0.05)


@pytest.mark.parametrize("bits", [8, 10, 12, 16])
def test_quantisation_of_other_resolutions(bits):
    """The same formula for the other resolutions: 6.0206 N + 1.7609 dB (W. Kester, tutorial MT-001)."""
    turns = 4_097 * np.arange(65_536) / 65_536
    sine = (2 ** (bits - 1) - 0.5) * np.sin(2 * np.pi * turns + 0.1)
    error = quantise(sine, 1.0, bits) - sine
    assert 10 * np.log10(np.mean(sine**2) / np.mean(error**2)) == pytest.approx(6.0206 * bits + 1.7609, abs=0.2)


def test_step_of_14_bits():
    """One count of 14 bits over +-1 V is 122.07 uV, its rounding error 35.24 uV rms (LSB / sqrt 12)."""
    step_v = 2 / 2**14
    assert step_v == pytest.approx(122.07e-6, rel=1e-5)
    signal_v = np.random.default_rng(1).uniform(-0.9, 0.9, 200_000)
    error_v = quantise(signal_v, step_v, 14) * step_v - signal_v
    assert error_v.std() == pytest.approx(35.24e-6, rel=0.01)


@pytest.mark.parametrize("jitter_s", [5e-12, 100e-12])
@pytest.mark.parametrize("hz", [1e6, 10e6, 25e6])
def test_jitter_of_a_sine(hz, jitter_s):
    """A sine taken at straying instants: -20 log10(2 pi f t_j) dB (usual formula, as published)."""
    sine = np.sin(2 * np.pi * (hz / 100e6) * np.arange(400_000) + 0.3).astype(np.float32)
    error = jittered(sine, 100e6, jitter_s, rng=np.random.default_rng(2)).astype(float) - sine
    ratio_db = 10 * np.log10(np.mean(sine.astype(float) ** 2) / np.mean(error**2))
    assert ratio_db == pytest.approx(-20 * np.log10(2 * np.pi * hz * jitter_s), abs=0.35)


def test_the_chain_lies_above_the_thermal_floor():
    """50 ohm at 290 K over 50 MHz: 3.16 uV rms into a matched load, 6.33 uV of source voltage (k T R b).

    The band is that of an anti-alias filter: one of 50 MHz and order 5 passes the noise of 50 MHz within 2 %.
    """
    step_hz = 50e3
    s = 2j * np.pi * np.arange(step_hz / 2, 2e9, step_hz)
    band_hz = (np.abs(anti_alias_response(AntiAlias("butterworth", 5, 50e6), s)) ** 2).sum() * step_hz
    assert np.sqrt(BOLTZMANN * 290 * 50 * band_hz) == pytest.approx(3.16e-6, rel=0.015)
    assert np.sqrt(4 * BOLTZMANN * 290 * 50 * band_hz) == pytest.approx(6.33e-6, rel=0.015)


def step_time_s(anti_alias):
    """10-90 % time of the filter's step response, summed up from its poles' spectrum."""
    rate_hz, points = 8e9, 2**16
    s = 50e6 / 16 + 2j * np.pi * np.fft.rfftfreq(points, 1 / rate_hz)
    smooth = np.exp(-((s.imag / (2 * np.pi * 1.2e9)) ** 2))
    time_s = np.arange(points) / rate_hz
    step = np.fft.irfft(anti_alias_response(anti_alias, s) / s * smooth, points) * np.exp(50e6 / 16 * time_s) * rate_hz
    step = step[: round(400e-9 * rate_hz)]
    return (np.argmax(step > 0.9) - np.argmax(step > 0.1)) / rate_hz


@pytest.mark.parametrize(("kind", "order"), [("bessel", 3), ("bessel", 5), ("butterworth", 2), ("butterworth", 3)])
def test_edges_behind_the_anti_alias_filter(kind, order):
    """-3 dB at 40 MHz, 0.4 of 100 MS/s: 10-90 % in about 0.35/40 MHz = 8.7 ns (from memory), here within 12 %."""
    assert step_time_s(AntiAlias(kind, order, 40e6)) == pytest.approx(8.7e-9, rel=0.12)


def test_what_folds_back():
    """What folds onto f_max comes from f_s - f_max: order 4 with 40 MHz leaves -14.3 dB of 60 MHz (Butterworth)."""
    gain = np.abs(anti_alias_response(AntiAlias("butterworth", 4, 40e6), np.array([2j * np.pi * 60e6])))[0]
    assert 20 * np.log10(gain) == pytest.approx(-10 * np.log10(1 + 1.5**8), abs=1e-6)


def test_no_power_comes_from_nowhere():
    """The input never takes more power than the transformer takes from the strap: a passive circuit (textbook).

    The strap current drives what the transformer inserts into the strap, so that the real part of this impedance is
    the power taken per square ampere.
    """
    s = 2j * np.pi * np.geomspace(10e3, 60e6, 200)
    for seed in range(20):
        receiver = draw_receiver(ChainRanges(), rng=np.random.default_rng(seed))
        taken_ohm = np.abs(sensor_response(receiver, s)) ** 2 / receiver.lead.input_ohm
        inserted_ohm = seen_by_the_strap(receiver, s)
        assert (taken_ohm <= inserted_ohm * (1 + 1e-9)).all()
        assert (taken_ohm > 0.02 * inserted_ohm).any()


def seen_by_the_strap(receiver, s):
    """Real part of the impedance that the transformer inserts into the strap [ohm], from its own elements."""
    transformer, lead = receiver.transformer, receiver.lead
    travel = (s * 5.05e-9 + lead.skin_s * np.sqrt(s)) * lead.length_m
    end = 1 / (1 / lead.input_ohm + s * lead.input_farad)
    z = lead.impedance_ohm
    shown = z * (end * np.cosh(travel) + z * np.sinh(travel)) / (z * np.cosh(travel) + end * np.sinh(travel))
    branch = transformer.winding_ohm + s * transformer.leakage_henry + 1 / (1 / transformer.burden_ohm + 1 / shown)
    across = 1 / (1 / (s * transformer.magnetising_henry) + s * transformer.winding_farad + 1 / branch)
    return (across / transformer.turns**2).real
