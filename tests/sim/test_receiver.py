"""The receiving chain has the corners, the ripple, the rounding and the clipping that it says."""

from dataclasses import replace

import numpy as np
import pytest

from pdclass.errors import InputError
from pdclass.sim.grid import laplace_grid
from pdclass.sim.receiver import (
    AntiAlias,
    Receiver,
    SensorLead,
    Transformer,
    anti_alias_response,
    chain_band_hz,
    chain_response,
    core_sensitivity,
    jittered,
    quantise,
    saturated,
    saturation_at,
    sensor_response,
    transformer_of,
)

MATCHED = SensorLead(length_m=10.0, impedance_ohm=50.0, skin_s=0.0, input_ohm=50.0, input_farad=0.0)
UNMATCHED = SensorLead(length_m=8.0, impedance_ohm=75.0, skin_s=1e-6, input_ohm=48.0, input_farad=30e-12)
FLAT = transformer_of(5.0, (100e3, 20e6), turns=5, quality=np.sqrt(0.5), winding_ohm=0.5, input_ohm=50.0)
RECEIVER = Receiver(100e6, 14, 50.0, FLAT, MATCHED, AntiAlias("butterworth", 4, 40e6))


def by_nodes(transformer, lead, s):
    """The same circuit from its coupled-coil, node and chain-matrix equations, solved at every frequency."""
    turns, inductance = transformer.turns, transformer.magnetising_henry
    volts = []
    for one in s:
        travel = (one * 5.05e-9 + lead.skin_s * np.sqrt(one)) * lead.length_m
        a, b = np.cosh(travel), lead.impedance_ohm * np.sinh(travel)
        c, input_s = np.sinh(travel) / lead.impedance_ohm, 1 / lead.input_ohm + one * lead.input_farad
        series = transformer.winding_ohm + one * transformer.leakage_henry
        # unknown: coil voltage, coil current, burden voltage, lead current, input voltage; strap current 1 A
        equations = np.array(
            [
                [1, one * inductance, 0, 0, 0],  # coil: v = s M i1 - s L i2
                [one * transformer.winding_farad + 1 / series, -1, -1 / series, 0, 0],
                [-1 / series, 0, 1 / series + 1 / transformer.burden_ohm, 1, 0],
                [0, 0, 1, 0, -(a + b * input_s)],
                [0, 0, 0, 1, -(c + a * input_s)],
            ]
        )
        volts.append(np.linalg.solve(equations, [one * inductance / turns, 0, 0, 0, 0])[-1])
    return np.array(volts)


@pytest.mark.parametrize("lead", [MATCHED, UNMATCHED])
def test_closed_form_is_the_circuit(lead):
    """The closed form solves the equations of the coupled coils, the burden and the lead."""
    receiver = replace(RECEIVER, lead=lead)
    s = laplace_grid()[1::50]
    assert np.abs(sensor_response(receiver, s) / by_nodes(FLAT, lead, s) - 1).max() < 1e-9


def test_without_leakage_and_capacitance_it_is_of_first_order():
    """One zero and one pole remain, (R/N) s/(s + R/L)."""
    plain = Transformer(5, 40e-6, 0.0, 0.0, 0.0, 50.0)
    receiver = replace(RECEIVER, transformer=plain, lead=replace(MATCHED, length_m=0.0))
    s = laplace_grid()
    assert np.abs(sensor_response(receiver, s) - 5 * s / (s + 25 / 40e-6)).max() < 1e-12
    assert receiver.high_hz == np.inf


@pytest.mark.parametrize("quality", [0.3, np.sqrt(0.5), 1.1])
@pytest.mark.parametrize("band_hz", [(30e3, 80e6), (100e3, 20e6)])
def test_elements_follow_from_the_corners(quality, band_hz):
    """A transformer made from corners and transfer impedance has them, on the bench and by its own account."""
    transformer = transformer_of(5.0, band_hz, turns=5, quality=quality, winding_ohm=0.5, input_ohm=50.0)
    receiver = replace(RECEIVER, transformer=transformer)
    assert (receiver.low_hz, receiver.high_hz, receiver.transfer_ohm) == pytest.approx((*band_hz, 5.0), rel=1e-9)
    gain = np.abs(sensor_response(receiver, 2j * np.pi * np.array(band_hz))) / 5.0
    assert gain == pytest.approx(np.sqrt(0.5), rel=0.02)
    assert sensor_response(receiver, np.zeros(1, complex)) == 0


def test_too_many_turns_are_refused():
    """More turns than the input can carry at that transfer impedance are an error that names the limit."""
    with pytest.raises(InputError, match="at most 5 V/A, found 6 V/A with 10 turns"):
        transformer_of(6.0, (100e3, 20e6), turns=10, quality=0.7, winding_ohm=0.5, input_ohm=50.0)


def test_mains_current_raises_the_lower_corner():
    """The response of a core that lost half its inductance is exactly that of a circuit with half of it."""
    s = laplace_grid()
    weak = replace(FLAT, magnetising_henry=FLAT.magnetising_henry / 2)
    bench = replace(RECEIVER, transformer=weak)
    assert np.abs(sensor_response(RECEIVER, s, 0.5) / sensor_response(bench, s) - 1).max() < 1e-12
    assert bench.low_hz == pytest.approx(200e3)
    several = sensor_response(RECEIVER, s, np.array([0.0, 0.5]))
    assert several.shape == (2, s.size)
    assert np.array_equal(several[0], sensor_response(RECEIVER, s))
    assert np.array_equal(saturated(core_sensitivity(RECEIVER, s), 0.0), np.ones_like(s))


def test_the_core_saturates_with_the_strap_current():
    """Nothing is lost where the mains current is zero, the drawn share at both its peaks, alike every half cycle."""
    receiver = replace(RECEIVER, saturation=0.4, strap_lag_deg=30.0)
    assert saturation_at(receiver, np.array([30.0, 210.0])) == pytest.approx(0.0, abs=1e-12)
    assert saturation_at(receiver, np.array([120.0, 300.0])) == pytest.approx(0.4, rel=1e-12)
    phases = np.linspace(0, 360, 91)
    lost = saturation_at(receiver, phases)
    assert lost == pytest.approx(saturation_at(receiver, phases + 180), abs=1e-12)
    assert ((lost >= -1e-12) & (lost <= 0.4 + 1e-12)).all()


def test_a_matched_lead_only_delays():
    """With matched ends, whatever the length, the level stays and the phase falls with the travel time."""
    s = 2j * np.pi * np.linspace(1e6, 30e6, 200)
    direct = replace(RECEIVER, lead=replace(MATCHED, length_m=0.0))
    ratio = sensor_response(RECEIVER, s) / sensor_response(direct, s)
    assert np.abs(ratio - np.exp(-s * 10 * 5.05e-9)).max() < 1e-9


def test_an_unmatched_lead_ripples():
    """Between mismatched ends the level ripples with the inverse of twice the travel time."""
    lead = SensorLead(30.0, 75.0, 0.0, 50.0, 0.0)
    wide = transformer_of(2.0, (10e3, 1e9), turns=5, quality=0.5, winding_ohm=0.1, input_ohm=50.0)
    period_hz = 1 / (2 * 30 * 5.05e-9)
    hz = np.array([3.0, 3.5, 4.0, 4.5]) * period_hz
    level_db = 20 * np.log10(np.abs(sensor_response(replace(RECEIVER, transformer=wide, lead=lead), 2j * np.pi * hz)))
    assert level_db[[0, 1]] == pytest.approx(level_db[[2, 3]], abs=0.1)
    assert 1 < level_db[0] - level_db[1] < 6


@pytest.mark.parametrize("kind", ["butterworth", "bessel"])
@pytest.mark.parametrize("order", [2, 3, 4, 5])
def test_anti_alias_corner(kind, order):
    """Every anti-alias filter passes 0 Hz, is 3 dB down at its corner, and falls by 6 dB an octave and order."""
    corner_hz = 40e6
    gain = np.abs(
        anti_alias_response(AntiAlias(kind, order, corner_hz), 2j * np.pi * corner_hz * np.array([0, 1, 64, 128]))
    )
    assert gain[:2] == pytest.approx([1, np.sqrt(0.5)], rel=1e-9)
    assert 20 * np.log10(gain[2] / gain[3]) == pytest.approx(6.02 * order, abs=0.02 * order)


def test_stated_band_is_that_of_the_whole_chain():
    """The stated corners are those where sensor and filter together are 3 dB down."""
    band_hz = chain_band_hz(RECEIVER)
    gain = np.abs(chain_response_at(RECEIVER, np.array(band_hz))) / 5.0
    assert gain == pytest.approx(np.sqrt(0.5), rel=0.02)
    assert 95e3 < band_hz[0] < 105e3
    assert 18e6 < band_hz[1] < 20e6


def chain_response_at(receiver, hz):
    s = 2j * np.pi * hz
    return sensor_response(receiver, s) * anti_alias_response(receiver.anti_alias, s)


def test_ripple_leaves_the_stated_band():
    """The ripple of a long unmatched lead moves the stated corners by less than a sixth and a third."""
    rippled = chain_band_hz(replace(RECEIVER, lead=SensorLead(25.0, 75.0, 1e-6, 50.0, 0.0)))
    plain = chain_band_hz(RECEIVER)
    assert rippled[0] == pytest.approx(plain[0], rel=0.16)
    assert rippled[1] == pytest.approx(plain[1], rel=0.33)


def test_the_whole_chain_is_the_product_of_its_parts():
    """Sensor and filter follow each other, up to where the simulator's band begins to end."""
    s = laplace_grid()
    below = s.imag < 2 * np.pi * 42e6
    parts = sensor_response(RECEIVER, s) * anti_alias_response(RECEIVER.anti_alias, s)
    assert np.array_equal(chain_response(RECEIVER, s)[below], parts[below])
    assert chain_response(RECEIVER, s)[-1] == pytest.approx(0, abs=1e-12)


def test_jitter_does_nothing_to_what_stands_still():
    """A constant is the same at any instant, and no jitter changes nothing."""
    rng = np.random.default_rng(1)
    still = np.full(1000, 3.0, np.float32)
    assert np.abs(jittered(still, 100e6, 100e-12, rng=rng) - 3).max() < 1e-6
    wave = rng.standard_normal(1000, np.float32)
    assert np.array_equal(jittered(wave, 100e6, 0.0, rng=rng), wave)
    assert jittered(wave, 100e6, 1e-12, rng=rng).dtype == np.float32


def test_counts_are_rounded_and_clipped():
    """A count is the nearest whole number; what is beyond the range stays at its ends."""
    counts = quantise(np.array([0.4, 0.6, -0.6, 127.4, 500.0, -500.0]) * 1e-3, 1e-3, 8)
    assert counts.dtype == np.int8
    assert counts.tolist() == [0, 1, -1, 127, 127, -128]
    assert quantise(np.array([1e9, -1e9], np.float32), 1.0, 16).tolist() == [32767, -32768]
    assert quantise(np.zeros(1), 1.0, 9).dtype == np.int16
