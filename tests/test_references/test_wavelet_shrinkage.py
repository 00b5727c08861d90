"""Shrinkage against what was published of it, and against the exact risk that needs no published table.

D. L. Donoho, I. M. Johnstone, "Ideal spatial adaptation by wavelet shrinkage", Biometrika 81, 425-455, 1994: universal
threshold, minimax thresholds (table 2, from memory), oracle inequality (theorem 1, from memory), and the exact risk of
soft thresholding (from memory). Test signals: those of the same paper as PyWavelets ships them. Denoised errors of the
estimated noise level: computed once beforehand with PyWavelets alone (numpy 2.4.6, PyWavelets 1.9.0).
"""

import numpy as np
import pytest
import pywt
from scipy.stats import norm

from pdclass.wavelets import (
    composed,
    decimated,
    minimax_factor,
    noise_level,
    scale_energies,
    shrunk,
    soft,
    sure_factor,
    undecimated,
    universal_factor,
)

SAMPLES, LEVELS, SEEDS = 2048, 6, 40
SIGNALS = ("Blocks", "Bumps", "HeaviSine", "Doppler")


def scaled(name):
    """The test signal with deviation 7."""
    wave = pywt.data.demo_signal(name, SAMPLES)
    return wave * 7 / np.std(wave)


def soft_risk(t, mean):
    """Exact mean square error of soft thresholding one normal of deviation 1."""
    inner = norm.cdf(t - mean) - norm.cdf(-t - mean)
    edges = (t - mean) * norm.pdf(t + mean) + (t + mean) * norm.pdf(t - mean)
    return 1 + t**2 + (mean**2 - t**2 - 1) * inner - edges


def true_details(wave):
    """Detail coefficients of the noiseless wave, by PyWavelets alone, and how many coefficients stay as they are."""
    rest, *details = pywt.wavedec(wave, "sym8", mode="periodization", level=LEVELS)
    return np.concatenate(details), rest.size


def squared_errors(wave, shrink, noise):
    """Mean square error of every seed's denoised wave."""
    errors = []
    for seed in range(SEEDS):
        noisy = wave + np.random.default_rng(seed).normal(size=SAMPLES)
        errors.append(np.mean((composed(shrunk(decimated(noisy, LEVELS), "universal", shrink, noise)) - wave) ** 2))
    return np.array(errors)


@pytest.mark.parametrize(("count", "factor"), [(2000, 3.8989), (2048, 3.9050)])
def test_universal_factor(count, factor):
    """sqrt(2 ln n) to four places."""
    assert universal_factor(count) == pytest.approx(factor, abs=5e-5)


@pytest.mark.parametrize(
    ("count", "published"), [(64, 1.474), (128, 1.669), (256, 1.860), (512, 2.048), (1024, 2.232), (2048, 2.414)]
)
def test_minimax_factors_of_the_published_table(count, published):
    """Within 1 % of the table (which is itself up to 0.5 % above the equation's solution)."""
    assert minimax_factor(count) == pytest.approx(published, rel=0.01)


@pytest.mark.parametrize(("t", "mean"), [(1.0, 0.0), (2.0, 0.5), (3.9, 4.0), (2.4, -3.0)])
def test_soft_thresholding_has_its_exact_risk(t, mean):
    """The mean square error of a million normals agrees with the closed form within four standard errors."""
    drawn = mean + np.random.default_rng(5).normal(size=1_000_000)
    errors = (soft(drawn, t) - mean) ** 2
    assert abs(errors.mean() - soft_risk(t, mean)) < 4 * errors.std() / 1000


@pytest.mark.parametrize(
    ("name", "expected"), [("Blocks", 0.946), ("Bumps", 1.054), ("HeaviSine", 0.319), ("Doppler", 0.555)]
)
def test_denoising_has_the_error_that_the_exact_risk_foretells(name, expected):
    """Known noise: root mean square error of the four signals as computed from the closed form, within 3 errors."""
    wave = scaled(name)
    details, untouched = true_details(wave)
    foretold = (soft_risk(universal_factor(SAMPLES), details).sum() + untouched) / SAMPLES
    assert np.sqrt(foretold) == pytest.approx(expected, abs=1e-3)
    errors = squared_errors(wave, "soft", 1.0)
    assert abs(errors.mean() - foretold) < 3 * errors.std() / np.sqrt(SEEDS)


@pytest.mark.parametrize("name", SIGNALS)
def test_denoising_keeps_the_oracle_inequality(name):
    """The mean error stays below (2 ln n + 1)(1 + sum min(theta², 1)) of the oracle that knows what to keep."""
    wave = scaled(name)
    details, untouched = true_details(wave)
    oracle = np.minimum(details**2, 1).sum() + untouched
    assert squared_errors(wave, "soft", 1.0).mean() * SAMPLES <= (2 * np.log(SAMPLES) + 1) * (1 + oracle)


@pytest.mark.parametrize(
    ("name", "soft_rmse", "hard_rmse"),
    [("Blocks", 0.956, 0.563), ("Bumps", 1.068, 0.580), ("HeaviSine", 0.322, 0.256), ("Doppler", 0.550, 0.332)],
)
def test_denoising_with_estimated_noise(name, soft_rmse, hard_rmse):
    """Noise level from the finest scale: errors of the reference runs, within half of a run's own deviation."""
    for shrink, expected in (("soft", soft_rmse), ("hard", hard_rmse)):
        found = np.sqrt(squared_errors(scaled(name), shrink, "finest"))
        assert abs(found.mean() - expected) < 0.5 * found.std()


def test_sure_has_less_risk_than_the_universal_threshold_on_dense_signals():
    """Where half of the coefficients hold signal, the chosen threshold has a smaller exact risk than the universal."""
    means = np.where(np.arange(1024) % 2, 3.0, 0.0)
    chosen = sure_factor(means + np.random.default_rng(2).normal(size=1024))
    best = min(soft_risk(t, means).sum() for t in np.linspace(0, 4, 401))
    assert soft_risk(chosen, means).sum() < 1.02 * best < 0.7 * soft_risk(universal_factor(1024), means).sum()


@pytest.mark.parametrize("wavelet", ["haar", "db4", "sym8", "coif2"])
def test_parseval(wavelet):
    """An orthogonal wavelet with periodic ends keeps the energy, and the coefficients are those of PyWavelets."""
    wave = np.random.default_rng(8).normal(size=SAMPLES)
    scales = decimated(wave, LEVELS, wavelet)
    parts = pywt.wavedec(wave, wavelet, mode="periodization", level=LEVELS)
    assert sum(np.sum(part**2) for part in (scales.rest, *scales.details)) == pytest.approx(np.sum(wave**2), rel=1e-10)
    for ours, theirs in zip((*scales.details, scales.rest), reversed(parts), strict=True):
        assert np.array_equal(ours, theirs)


def test_scale_energies_are_those_of_the_coefficients():
    """Every level's energy is the sum of PyWavelets' squared details."""
    wave = np.random.default_rng(9).normal(size=SAMPLES)
    details = pywt.wavedec(wave, "sym8", mode="zero", level=LEVELS)[1:]
    assert scale_energies(wave, LEVELS) == pytest.approx([np.sum(part**2) for part in reversed(details)], rel=1e-12)


def test_undecimated_details_hold_the_energy_in_excess():
    """Level j without decimation holds 2^j times its energy: divided by that, all levels and the rest add up."""
    wave = np.random.default_rng(11).normal(size=SAMPLES)
    rest = pywt.swt(wave, "sym8", level=LEVELS, trim_approx=True)[0]
    parts = [np.sum(detail**2) / (1 << level) for level, detail in enumerate(undecimated(wave, LEVELS), 1)]
    assert sum(parts) + np.sum(rest**2) / (1 << LEVELS) == pytest.approx(np.sum(wave**2), rel=1e-10)


def test_noise_level_against_a_second_estimate():
    """MAD/0.6745 of white noise agrees with its deviation (scipy's normal: Phi^-1(3/4) = 0.67449)."""
    wave = np.random.default_rng(10).normal(0, 2.5, 30_000)
    assert noise_level(wave) == pytest.approx(np.median(np.abs(wave)) / norm.ppf(0.75), rel=1e-12)
    assert noise_level(wave) == pytest.approx(2.5, rel=0.03)
