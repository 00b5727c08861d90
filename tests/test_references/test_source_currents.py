"""Source currents against closed forms of pulse metrology and against the pulses that standards describe.

Edges after IEEE Std 181-2011 (10, 50 and 90 % of the peak). Closed forms follow from the formulas; where a figure is
of a standard or a paper, it stands beside its test.
"""

import numpy as np
import pytest
import scipy.fft

from pdclass.sim.source import SourceCurrent, half_width_s, source_spectrum, source_wave, train


def times(values, levels, time_s):
    """When a rising flank passes the given levels."""
    return np.interp(levels, values, time_s)


def edges_s(current, span_s=(-1e-6, 5e-6), points=600_001):
    """Time of the peak, 10-90 % rise, width at half height, 90-10 % fall and height of a current."""
    time_s = np.linspace(*span_s, points)
    wave = source_wave(current, time_s)
    peak = int(np.argmax(wave))
    rise = times(wave[: peak + 1] / wave[peak], [0.1, 0.5, 0.9], time_s[: peak + 1])
    fall = times(-wave[peak:] / wave[peak], [-0.9, -0.5, -0.1], time_s[peak:])
    return time_s[peak], rise[2] - rise[0], fall[1] - rise[1], fall[2] - fall[0], wave[peak]


def step_rise_s(current):
    """10-90 % rise time of a step, filtered by what has the current as its impulse response."""
    time_s = np.linspace(-1e-6, 5e-6, 600_001)
    risen = np.cumsum(source_wave(current, time_s)) * (time_s[1] - time_s[0])
    low, high = np.interp([0.1, 0.9], risen, time_s)
    return high - low


def frequency_hz(current, share):
    """Frequency at which the magnitude of the spectrum has fallen to a share of that at 0 Hz."""
    hz = np.linspace(0, 50e6, 500_001)
    return np.interp(-share, -np.abs(source_spectrum(current, 2j * np.pi * hz)), hz)


def sampled(current, rate_hz=100e6, record_s=200e-6, lead_s=1e-6, band_hz=(0.1e6, 20e6)):
    """What a sensor with first-order corners gives for a current, by an inverse Fourier transform of its own."""
    s = 2j * np.pi * np.arange(round(record_s * rate_hz / 2) + 1) / record_s
    low, high = 2 * np.pi * np.array(band_hz)
    spectrum = source_spectrum(current, s) * np.exp(-s * lead_s) * s / (s + low) * high / (s + high)
    return scipy.fft.irfft(spectrum) * rate_hz


@pytest.mark.parametrize(("width_s", "peak_a"), [(10e-9, 9.394e-3), (100e-9, 0.9394e-3)])
def test_gaussian_of_100_pc(width_s, peak_a):
    """100 pC with 10 ns between half heights peak at 9.394 mA, with 100 ns at 0.9394 mA."""
    sigma_s = width_s / (2 * np.sqrt(2 * np.log(2)))
    pulse = SourceCurrent("gaussian", sigma_s, sigma_s)
    assert half_width_s(pulse) == pytest.approx(width_s, rel=1e-3)
    assert 100e-12 * source_wave(pulse, np.zeros(1))[0] == pytest.approx(peak_a, rel=1e-4)


def test_charge_of_two_half_gaussians():
    """The charge is peak * sqrt(pi/2) * (sigma_1 + sigma_2)."""
    pulse = SourceCurrent("asymmetric", 4e-9, 11e-9)
    assert source_wave(pulse, np.zeros(1))[0] * np.sqrt(np.pi / 2) * 15e-9 == pytest.approx(1.0, rel=1e-12)


def test_step_through_a_resistor_and_capacitor():
    """A single time constant: 10-90 % in ln 9 RC = 2.197225 RC, times the -3 dB frequency 0.349699."""
    pulse = SourceCurrent("exponential", 1e-12, 50e-9)
    assert step_rise_s(pulse) == pytest.approx(2.197225 * 50e-9, rel=1e-3)
    assert step_rise_s(pulse) * frequency_hz(pulse, np.sqrt(0.5)) == pytest.approx(0.349699, rel=1e-3)


def test_step_through_a_gaussian():
    """10-90 % in 2.563103 sigma; -3 dB at 0.132505/sigma, half amplitude at 0.187391/sigma; product 0.339624."""
    pulse = SourceCurrent("gaussian", 20e-9, 20e-9)
    assert step_rise_s(pulse) == pytest.approx(2.563103 * 20e-9, rel=1e-4)
    assert frequency_hz(pulse, np.sqrt(0.5)) == pytest.approx(0.132505 / 20e-9, rel=1e-5)
    assert frequency_hz(pulse, 0.5) == pytest.approx(0.187391 / 20e-9, rel=1e-5)
    assert step_rise_s(pulse) * frequency_hz(pulse, np.sqrt(0.5)) == pytest.approx(0.339624, rel=1e-4)


def test_gaussian_pulse_edges():
    """Width 2.354820 sigma, edge of the pulse 1.686922 sigma on both sides."""
    _, rise_s, width_s, fall_s, _ = edges_s(SourceCurrent("gaussian", 50e-9, 50e-9))
    assert [rise_s, width_s, fall_s] == pytest.approx(np.array([1.686922, 2.354820, 1.686922]) * 50e-9, rel=1e-5)


def test_gaussian_centroid():
    """One-sided centroid of the spectrum: 0.126987/sigma weighted by amplitude, 0.0897936/sigma by power."""
    hz = np.linspace(0, 100e6, 400_001)
    magnitude = np.abs(source_spectrum(SourceCurrent("gaussian", 50e-9, 50e-9), 2j * np.pi * hz))
    assert np.trapezoid(hz * magnitude) / np.trapezoid(magnitude) == pytest.approx(0.126987 / 50e-9, rel=1e-5)
    power = magnitude**2
    assert np.trapezoid(hz * power) / np.trapezoid(power) == pytest.approx(0.0897936 / 50e-9, rel=1e-5)


def test_gaussian_length_times_bandwidth():
    """Equivalent time length times bandwidth is 1/(4 pi), T = sigma/sqrt(2), the least that any pulse can have.

    A. Contin, A. Cavallini, G. C. Montanari, G. Pasini, F. Puletti, IEEE TDEI 9(3), 335-348, 2002 (from memory).
    """

    def product(current):
        time_s, hz = np.linspace(-3e-6, 9e-6, 240_001), np.linspace(0, 400e6, 400_001)
        energy = source_wave(current, time_s) ** 2
        power = np.abs(source_spectrum(current, 2j * np.pi * hz)) ** 2
        centre = np.sum(time_s * energy) / energy.sum()
        length = np.sqrt(np.sum((time_s - centre) ** 2 * energy) / energy.sum())
        return length * np.sqrt(np.sum(hz**2 * power) / power.sum()), length

    found, length_s = product(SourceCurrent("gaussian", 50e-9, 50e-9))
    assert found == pytest.approx(0.0795775, rel=1e-4)
    assert length_s == pytest.approx(50e-9 / np.sqrt(2), rel=1e-4)
    assert product(SourceCurrent("asymmetric", 20e-9, 60e-9))[0] > 1.02 * 0.0795775


@pytest.mark.parametrize("scale", [1.0, 10.0])
def test_double_exponential(scale):
    """100/10 ns: peak 0.6968373 at 25.5843 ns; rise 13.4715, width 100.354, fall 221.499 ns; charge 90 ns; scales."""
    slow_s, fast_s = 100e-9 * scale, 10e-9 * scale
    peak_s, rise_s, width_s, fall_s, height = edges_s(SourceCurrent("exponential", fast_s, slow_s))
    found = np.array([peak_s, rise_s, width_s, fall_s]) * 1e9 / scale
    assert found == pytest.approx([25.5843, 13.4715, 100.354, 221.499], rel=2e-4)
    assert height * (slow_s - fast_s) == pytest.approx(0.6968373, rel=1e-5)
    assert peak_s == pytest.approx(slow_s * fast_s / (slow_s - fast_s) * np.log(slow_s / fast_s), rel=1e-3)


def test_double_exponential_spectrum_and_energy():
    """Magnitude q/sqrt((1 + (w t1)^2)(1 + (w t2)^2)); energy (t1 - t2)^2/(2 (t1 + t2)), in time and by Parseval."""
    pulse = SourceCurrent("exponential", 10e-9, 100e-9)
    hz = np.linspace(0, 2e9, 1_000_001)
    magnitude = np.abs(source_spectrum(pulse, 2j * np.pi * hz))
    omega = 2 * np.pi * hz
    closed = 1 / np.sqrt((1 + (omega * 100e-9) ** 2) * (1 + (omega * 10e-9) ** 2))
    assert np.abs(magnitude - closed).max() < 1e-12
    wanted = 1 / (2 * 110e-9)  # of unit charge
    assert 2 * np.trapezoid(magnitude**2, hz) == pytest.approx(wanted, rel=1e-4)
    time_s = np.linspace(0, 3e-6, 300_001)
    assert np.trapezoid(source_wave(pulse, time_s) ** 2, time_s) == pytest.approx(wanted, rel=1e-4)


def test_damped_sine_bandwidth():
    """10 MHz decaying in 1 us: the amplitude spectrum is 1/(pi tau) = 318.3 kHz wide at -3 dB, Q = pi f tau = 31.4."""
    hz = np.linspace(9e6, 11e6, 200_001)
    magnitude = np.abs(source_spectrum(SourceCurrent("ringing", 1e-12, 1e-6, 10e6), 2j * np.pi * hz))
    peak = int(np.argmax(magnitude))
    inside = hz[magnitude >= magnitude[peak] * np.sqrt(0.5)]
    assert hz[peak] == pytest.approx(9.999e6, abs=2e3)
    assert inside[-1] - inside[0] == pytest.approx(318.3e3, rel=3e-3)
    assert hz[peak] / (inside[-1] - inside[0]) == pytest.approx(np.pi * 10, rel=3e-3)


@pytest.mark.parametrize(
    ("front_s", "tail_s", "correction", "front_time_s", "half_value_s"),
    [
        (19e-6, 485e-6, 0.93, 10e-6, 350e-6),
        (0.454e-6, 143e-6, 0.993, 0.25e-6, 100e-6),
        (1.82e-6, 285e-6, 0.986, 1e-6, 200e-6),
    ],
)
def test_heidler_currents_of_the_lightning_standard(front_s, tail_s, correction, front_time_s, half_value_s):
    """Correction factor, front time and time to half value are those of IEC 62305-1 Annex B (from memory).

    The factor is the peak of x^n/(1 + x^n) exp(-t/tail), n = 10; the front time is 1.25 times that from 10 to 90 %,
    and the half value counts from the virtual origin that the front time gives.
    """
    current = SourceCurrent("heidler", front_s, tail_s)
    time_s = np.linspace(0, 3 * tail_s, 3_000_001)
    wave = source_wave(current, time_s)
    peak = int(np.argmax(wave))
    # far behind the front the current is exp(-t/tail) alone: this is its height without the factor
    alone = wave[-1] * np.exp(time_s[-1] / tail_s)
    assert wave[peak] / alone == pytest.approx(correction, abs=6e-3)
    low, high = times(wave[: peak + 1] / wave[peak], [0.1, 0.9], time_s[: peak + 1])
    half = float(times(-wave[peak:] / wave[peak], [-0.5], time_s[peak:])[0])
    assert 1.25 * (high - low) == pytest.approx(front_time_s, rel=0.08)
    assert half - (low - 0.1 * 1.25 * (high - low)) == pytest.approx(half_value_s, rel=0.03)


def test_heidler_begins_without_slope():
    """Unlike the double exponential a Heidler current has no slope at its beginning (F. Heidler, 1985)."""
    early = np.array([0.0, 1e-10])
    slopes = [
        np.diff(source_wave(SourceCurrent(shape, 10e-9, 100e-9), early))[0] for shape in ("heidler", "exponential")
    ]
    assert slopes[0] < 1e-9 * slopes[1]


def test_calibrator_pulse():
    """A step of 1 V through 100 pF into 70 ohm is a calibrator's pulse after IEC 60270 clause 6.2 (from memory).

    The step rises within 60 ns from 10 to 90 % and is steady to 3 % within 200 ns; the charge that a sensor with a
    lower corner of 100 kHz shows, area before its own undershoot, is within 5 % of 100 pC.
    """
    step_v, coupling_f, load_ohm, sigma_s = 1.0, 100e-12, 70.0, 15e-9
    edge = SourceCurrent("gaussian", sigma_s, sigma_s)
    time_s = np.linspace(-1e-6, 5e-6, 600_001)
    risen = step_v * np.cumsum(source_wave(edge, time_s)) * (time_s[1] - time_s[0])
    assert step_rise_s(edge) <= 60e-9
    assert np.abs(risen[time_s > 0.2e-6 - 3 * sigma_s] - step_v).max() <= 0.03 * step_v
    s = 2j * np.pi * np.arange(20_001) / 400e-6
    # current of the capacitor in series with the load: the derivative of the step, filtered
    current = step_v * source_spectrum(edge, s) * coupling_f / (1 + s * coupling_f * load_ohm)
    at = np.arange(40_000) / 100e6
    seen = scipy.fft.irfft(current * np.exp(-s * 1e-6) * s / (s + 2 * np.pi * 100e3))
    pulse = seen[: int(np.argmax((seen < 0) & (at > 1.02e-6)))]
    assert pulse.sum() == pytest.approx(100e-12, rel=0.05)


@pytest.mark.parametrize("spacing_s", [0.2e-6, 0.537e-6, 5e-6, 31.4159e-6, 100e-6])
def test_double_pulse(spacing_s):
    """Two equal pulses as IEC 60885-3:2015 clause 5.1.3 wants them: their spacing of 0.2-100 us is found again.

    Rise of at most 20 ns (10-90 %), at most 150 ns between the 10 % points of front and tail; through a sensor with
    corners of 0.1 and 20 MHz, sampled at 100 MS/s, the best shift of the wave against itself is within 2 ns.
    """
    single = SourceCurrent("asymmetric", 8e-9, 25e-9)
    time_s = np.linspace(-0.2e-6, 0.4e-6, 60_001)
    wave = source_wave(single, time_s)
    _, rise_s, _, _, height = edges_s(single)
    long_s = time_s[wave >= 0.1 * height]
    assert rise_s <= 20e-9
    assert long_s[-1] - long_s[0] <= 150e-9
    seen = sampled(train(single, (0.0, spacing_s)))
    alike = scipy.fft.irfft(np.abs(scipy.fft.rfft(seen, 2 * seen.size)) ** 2)[: seen.size]
    first = round(0.15e-6 * 100e6)
    best = first + int(np.argmax(alike[first:]))
    before, at, after = alike[best - 1 : best + 2]
    found_s = (best + (before - after) / (2 * (before - 2 * at + after))) / 100e6
    assert found_s == pytest.approx(spacing_s, abs=2e-9)


def test_double_pulse_is_equal():
    """The two pulses of the double pulse have the same height, and the second repeats the first."""
    pair = train(SourceCurrent("asymmetric", 8e-9, 25e-9), (0.0, 5e-6))
    seen = sampled(pair)
    shift = round(5e-6 * 100e6)
    first, second = seen[100:160], seen[100 + shift : 160 + shift]
    tail = sampled(SourceCurrent("asymmetric", 8e-9, 25e-9))[100 + shift : 160 + shift] / 2
    assert np.abs(first - (second - tail)).max() < 1e-3 * first.max()
