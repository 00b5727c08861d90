"""Noise, carriers and carrier communication are what they say."""

from dataclasses import replace

import numpy as np
import pytest
import scipy.signal

from pdclass.sim.grid import laplace_grid
from pdclass.sim.interference import (
    Background,
    Carrier,
    Communication,
    Noise,
    background_wave,
    carriers_wave,
    communication_wave,
    medium_wave_hz,
    noise_density,
    noise_shape,
    noise_wave,
    received,
)
from pdclass.sim.receiver import AntiAlias, Receiver, SensorLead, anti_alias_response, chain_response, transformer_of

RATE_HZ = 100e6
PLAIN = Carrier(909e3, 2.0, 0.0, 0.25, (1000.0,), ((1.0, 0.0),))
LIVELY = Carrier(6.1e6, 1.0, 0.5, 0.6, (700.0, 1300.0), ((0.4, 0.1), (0.6, 0.7)))
TONES_HZ = tuple(154.6875e3 + 4.6875e3 * np.arange(72))
OFDM = Communication("ofdm", TONES_HZ, (1.0,) * 72, 1.5, 231.7e-6, 2e-3, 3e-3, 0.4e-3, 50e-6, 11)
FSK = Communication("fsk", (63e3, 74e3), (1.0, 1.0), 1.0, 1 / 2400, 1e-3, 1.5e-3, 0.2e-3, 50e-6, 12)
RECEIVER = Receiver(
    RATE_HZ,
    14,
    50.0,
    transformer_of(5.0, (100e3, 20e6), turns=5, quality=0.7, winding_ohm=0.5, input_ohm=50.0),
    SensorLead(5.0, 50.0, 0.0, 50.0, 0.0),
    AntiAlias("butterworth", 4, 40e6),
)
QUIET = Noise(0.0, 0.0, 1e6, 0.0, "rural")


def loop_field():
    """A strap loop of 20 ohm and 1 uH that rings at 5 MHz, seen through the chain."""
    s = laplace_grid()
    ringing = 1 + 4 * s * 1e6 / (s**2 + 2e6 * s + (2 * np.pi * 5e6) ** 2)
    return s / (20 + 1e-6 * s) * ringing * chain_response(RECEIVER, s)


def level_db(wave, hz, width_hz, rate_hz=RATE_HZ):
    """Mean power per hertz round a frequency [dB]."""
    at_hz, density = scipy.signal.welch(wave.astype(float), rate_hz, nperseg=8192)
    return 10 * np.log10(density[np.abs(at_hz - hz) < width_hz].mean())


def test_an_unmodulated_carrier_is_a_cosine():
    """Without modulation a carrier is the exact cosine of its frequency, phase and height."""
    wave = carriers_wave([PLAIN], 0, 100_001, RATE_HZ)
    time_s = np.arange(100_001) / RATE_HZ
    assert np.abs(wave - 2 * np.cos(2 * np.pi * (909e3 * time_s + 0.25))).max() < 1e-5


def test_a_carrier_goes_on_over_a_gap():
    """A later stretch is the same oscillation, not a new one."""
    both = [LIVELY, PLAIN]
    whole, part = carriers_wave(both, 0, 64_000, RATE_HZ), carriers_wave(both, 32_005, 20_000, RATE_HZ)
    assert np.abs(whole[32_005:52_005] - part).max() < 1e-5


def test_modulation_has_its_depth():
    """The envelope swings by the depth about one."""
    carrier = Carrier(1e6, 1.0, 0.5, 0.0, (2000.0,), ((1.0, 0.0),))
    height = np.abs(carriers_wave([carrier], 0, 200_000, RATE_HZ)).reshape(-1, 1000).max(axis=1)
    assert height.max() == pytest.approx(1.5, abs=0.01)
    assert height.min() == pytest.approx(0.5, abs=0.02)


def test_carriers_add_up():
    """Several carriers are the sum of each alone, and a modulated one is its formula within a thousandth."""
    both = carriers_wave([LIVELY, PLAIN], 5, 30_000, RATE_HZ)
    alone = carriers_wave([LIVELY], 5, 30_000, RATE_HZ) + carriers_wave([PLAIN], 5, 30_000, RATE_HZ)
    assert np.abs(both - alone).max() < 1e-5
    time_s = (5 + np.arange(30_000)) / RATE_HZ
    tones = zip(LIVELY.tones_hz, LIVELY.tones, strict=True)
    audio = sum(share * np.cos(2 * np.pi * (hz * time_s + phase)) for hz, (share, phase) in tones)
    formula = (1 + 0.5 * audio) * np.cos(2 * np.pi * (6.1e6 * time_s + 0.6))
    assert np.abs(carriers_wave([LIVELY], 5, 30_000, RATE_HZ) - formula).max() < 1e-3


@pytest.mark.parametrize("raster_hz", [9e3, 10e3])
def test_medium_wave_channels_lie_on_their_raster(raster_hz):
    """Carriers are multiples of the raster."""
    assert all(medium_wave_hz(channel, raster_hz) % raster_hz == 0 for channel in range(118))


@pytest.mark.parametrize("noise", [QUIET, Noise(0.5, 1.5, 2e6, 0.0, "city"), Noise(0.3, 0.5, 1e6, 1.5, "residential")])
def test_noise_has_its_deviation(noise):
    """White, converter, low-passed and man-made noise add in power."""
    reception = received(Background(noise), RECEIVER, loop_field())
    wave = background_wave(reception, 0, 1_000_000, rng=np.random.default_rng(3))
    expected = np.sqrt(1 + noise.converter**2 + noise.low_share**2 + noise.field_share**2)
    assert wave.dtype == np.float32
    assert wave.std() == pytest.approx(expected, rel=0.02)


def test_analogue_noise_passes_the_anti_alias_filter():
    """White analogue noise falls with the filter, and what is above half the rate is folded back on top of it."""
    wave = background_wave(
        received(Background(QUIET), RECEIVER, loop_field()), 0, 2_000_000, rng=np.random.default_rng(4)
    )
    hz = np.array([45e6, 55e6])
    alone = np.abs(anti_alias_response(RECEIVER.anti_alias, 2j * np.pi * hz)) ** 2
    fall_db = level_db(wave, 45e6, 0.5e6) - level_db(wave, 10e6, 5e6)
    assert fall_db == pytest.approx(10 * np.log10(alone.sum()), abs=0.2)
    assert fall_db > 10 * np.log10(alone[0]) + 0.5


def test_converter_noise_is_white():
    """The converter's own noise knows no filter."""
    flat = received(Background(Noise(30.0, 0.0, 1e6, 0.0, "city")), RECEIVER, loop_field())
    wave = background_wave(flat, 0, 1_000_000, rng=np.random.default_rng(5))
    assert level_db(wave, 48e6, 1e6) == pytest.approx(level_db(wave, 5e6, 4e6), abs=0.2)


def test_man_made_noise_follows_field_and_loop():
    """Its density is that of the field, frequency included, times what loop and chain make of it."""
    noise = Noise(0.0, 0.0, 1e6, 1000.0, "city")
    field = loop_field()
    wave = background_wave(received(Background(noise), RECEIVER, field), 0, 4_000_000, rng=np.random.default_rng(6))
    hz = np.array([0.5e6, 2e6, 5e6, 10e6])
    grid_hz = laplace_grid().imag / (2 * np.pi)
    gain_db = 20 * np.log10(np.interp(hz, grid_hz, np.abs(field)))
    expected = 76.8 - 27.7 * np.log10(hz / 1e6) + 20 * np.log10(hz / 1e6) + gain_db
    found = np.array([level_db(wave, one, 30e3) for one in hz])
    assert found - found[0] == pytest.approx(expected - expected[0], abs=0.7)


@pytest.mark.parametrize("samples", [1, 20_000, 700_001])
def test_blocks_of_noise_leave_no_border(samples):
    """The noise is white noise through the filter, sample by sample, whatever the blocks."""
    shape = np.random.default_rng(1).standard_normal(3001, np.float32)
    white = np.random.default_rng(2)
    wave = noise_wave(shape, samples, rng=np.random.default_rng(2))
    fresh = 2**15 - 3000
    drawn = [white.standard_normal(3000, np.float32)]
    left = -(-samples // fresh)
    while left > 0:
        drawn.append(white.standard_normal(min(left, 4) * fresh, np.float32))
        left -= 4
    expected = scipy.signal.oaconvolve(np.concatenate(drawn).astype(float), shape.astype(float), mode="valid")
    assert wave.shape == (samples,)
    assert np.abs(wave - expected[:samples]).max() < 1e-4 * expected.std()


def test_the_shape_makes_the_density():
    """The filter's own spectrum is the density that it was made from."""
    noise = Noise(0.3, 0.8, 2e6, 0.8, "residential")
    shape = noise_shape(noise, RECEIVER, loop_field())
    hz = np.fft.rfftfreq(shape.size, 1 / RATE_HZ)
    density = noise_density(noise, RECEIVER, loop_field(), hz)
    made = np.abs(np.fft.rfft(shape.astype(float))) ** 2
    upper = hz > 0.2e6
    assert np.abs(10 * np.log10(made[upper] / density[upper])).max() < 1.0
    assert density.mean() == pytest.approx(1 + 0.3**2 + 2 * 0.8**2, rel=1e-9)


def test_carriers_keep_their_power_and_follow_the_response():
    """All carriers together are as strong as drawn; the one at the loop's resonance gets more of it."""
    carriers = tuple(replace(PLAIN, hz=hz, amplitude=1.0) for hz in (0.6e6, 5e6, 15e6))
    heard = received(Background(QUIET, carriers), RECEIVER, loop_field()).carriers
    assert sum(one.amplitude**2 for one in heard) == pytest.approx(3.0)
    gain = np.interp([0.6e6, 5e6, 15e6], laplace_grid().imag / (2 * np.pi), np.abs(loop_field()))
    assert [one.amplitude for one in heard] == pytest.approx(gain * np.sqrt(3 / (gain**2).sum()))


@pytest.mark.parametrize("communication", [OFDM, FSK])
@pytest.mark.parametrize("rate_hz", [62.5e6, 250e6])
def test_communication_goes_on_over_a_gap(communication, rate_hz):
    """A later stretch is the same frames and the same symbols, to rounding."""
    whole = communication_wave(communication, 0, 400_000, rate_hz)
    part = communication_wave(communication, 123_457, 200_000, rate_hz)
    assert np.abs(whole).max() > 1
    assert np.abs(whole[123_457:323_457] - part).max() < 1e-4


@pytest.mark.parametrize("communication", [OFDM, FSK])
def test_communication_is_switched(communication):
    """Frames have their deviation, begin and end softly, and between them is nothing."""
    wave = communication_wave(communication, 0, 1_200_000, RATE_HZ)
    time_s = np.arange(wave.size) / RATE_HZ
    into = np.mod(time_s - communication.start_s, communication.period_s)
    inside = (into > communication.ramp_s) & (into < communication.on_s - communication.ramp_s)
    outside = (into > communication.on_s + 2e-6) & (into < communication.period_s - 2e-6)
    assert wave[inside].std() == pytest.approx(communication.deviation, rel=0.1)
    assert np.abs(wave[outside]).max() < 1e-5
    edge = np.abs(into - communication.ramp_s / 20) < communication.ramp_s / 20
    assert np.abs(wave[edge]).max() < 0.1 * communication.deviation


def test_frames_that_are_not_heard_are_nothing():
    """A stretch between two frames is zero, as long as it is."""
    silent = replace(OFDM, on_s=1e-3, period_s=1.0, start_s=0.5)
    assert not communication_wave(silent, 0, 10_000, RATE_HZ).any()
    assert communication_wave(silent, 0, 10_000, RATE_HZ).shape == (10_000,)


def test_tones_pass_the_sensor():
    """The sensor's lower corner takes more of the lower tone; the deviation stays that at the digitiser."""
    low = replace(FSK, tones_hz=(20e3, 200e3))
    heard = received(Background(QUIET, (), (low,)), RECEIVER, loop_field()).communication[0]
    assert heard.gains[0] / heard.gains[1] == pytest.approx(0.2 / np.sqrt(1.04) / (2 / np.sqrt(5)), rel=0.01)
    assert np.mean(np.square(heard.gains)) == pytest.approx(1.0)
    assert heard.deviation == low.deviation


def test_a_background_is_the_sum_of_its_parts():
    """Noise comes from the generator alone; carriers and frames are added to it."""
    background = Background(QUIET, (PLAIN,), (OFDM,))
    reception = received(background, RECEIVER, loop_field())
    alone = replace(reception, carriers=(), communication=())
    whole = background_wave(reception, 777, 50_000, rng=np.random.default_rng(8))
    noise = background_wave(alone, 777, 50_000, rng=np.random.default_rng(8))
    added = carriers_wave(reception.carriers, 777, 50_000, RATE_HZ)
    added += communication_wave(reception.communication[0], 777, 50_000, RATE_HZ)
    assert np.abs(whole - noise - added).max() < 1e-5
