"""One battery of tests that every feature of the catalogue must pass."""

import dataclasses

import numpy as np
import pytest
from closed_form import as_capture, background, damped_sine, double_exponential
from one_pulse import single
from scipy.signal import butter, sosfilt

from pdclass.errors import RefusedError
from pdclass.extract import extract
from pdclass.features import BY_NAME, CATALOGUE, FAMILIES, feature_digests, feature_table
from pdclass.features.feature import Feature
from pdclass.pulses import PulseSet

#: One sample, in the units in which features of time come.
STEP = {"ns": 10.0, "µs": 0.01}
NAMES = [feature.name for feature in CATALOGUE]
SHAPES = {
    "fast": lambda rate: double_exponential(10e-9, 50e-9, rate, 12e-6),
    "slow": lambda rate: double_exponential(100e-9, 600e-9, rate, 12e-6),
    "ringing": lambda rate: damped_sine(7e6, 0.4e-6, rate, 12e-6),
    "long": lambda rate: damped_sine(3e6, 1.5e-6, rate, 12e-6),
    "two": lambda rate: (
        double_exponential(20e-9, 90e-9, rate, 12e-6)
        - 0.4 * np.roll(double_exponential(60e-9, 250e-9, rate, 12e-6), round(6e-6 * rate))
    ),
}


def values_of(pulses):
    return feature_table(pulses)[0]


@pytest.fixture(scope="module")
def found():
    """Pulses of every shape, extracted from noise with carriers."""
    rng = np.random.default_rng(3)
    signal = background(rng, 400_000)
    for number, onset in enumerate(range(10_000, 390_000, 9_500)):
        wave = list(SHAPES.values())[number % len(SHAPES)](100e6)
        signal[onset : onset + wave.size] += rng.uniform(100, 4000) * wave
    return extract(as_capture(signal)).pulses


def test_names_and_words_are_complete_and_unlike():
    """Every entry has a unit in its name where it has one, words for more and less, and a sentence with a value."""
    assert len(NAMES) == len(set(NAMES)) >= 20
    families = {"edges", "spectrum", "scales", "ringing", "spread", "arrival", "copies", "tilt", "modes"}
    assert families == set(FAMILIES)
    assert sorted(NAMES) == sorted(f.name for features, _ in FAMILIES.values() for f in features)
    endings = {"ns": "_ns", "MHz": "_mhz", "µs": "_us", "dB": "_db", "dB/MHz": "_db", "dB/√MHz": "_db"}
    for feature in CATALOGUE:
        assert feature.name.endswith(endings.get(feature.unit, ""))
        assert "{value}" in feature.sentence
        assert feature.more != feature.less
        # a missing value has a cause of its own
        assert feature.absent != Feature.absent
        # it follows after a colon
        assert ":" not in feature.meaning + feature.sentence
        # what may be negative is higher or lower, not larger or smaller
        assert feature.valid_range[0] >= 0 or (feature.more, feature.less) != ("larger", "smaller")
        assert feature.tolerance > 0
        assert feature.reference
    assert len({feature.sentence for feature in CATALOGUE}) == len({f.meaning for f in CATALOGUE}) == len(NAMES)


def test_a_changed_definition_changes_the_digest_and_changed_words_do_not():
    """A bundle that names a digest notices when the feature under the name is another; words may be mended."""
    feature = BY_NAME["rise_ns"]
    assert dataclasses.replace(feature, valid_range=(0.0, 1.0)).digest != feature.digest
    for words in ({"sentence": "edge {value}"}, {"absent": "not there"}, {"below_zero": "turned over"}):
        assert dataclasses.replace(feature, **words).digest == feature.digest
    assert feature_digests()["rise_ns"] == feature.digest


@pytest.mark.parametrize("name", NAMES)
def test_finite_in_range_or_declared_unmeasurable(found, name):
    """On extracted pulses every value is within its stated range or NaN, and most are measurable somewhere."""
    values = feature_table(found, [name])[:, 0]
    low, high = BY_NAME[name].valid_range
    measured = values[np.isfinite(values)]
    assert not np.isinf(values).any()
    assert ((measured >= low) & (measured <= high)).all()
    assert measured.size > 0


@pytest.mark.parametrize("shape", SHAPES)
def test_gain_and_polarity_change_nothing(shape):
    """The same pulse, a thousand times larger or turned over, has the same features."""
    wave = SHAPES[shape](100e6)
    plain = single(wave)
    for factor in (1000.0, 1e-3, -1.0):
        other = PulseSet((plain.waves * np.float32(factor)), plain.chains, plain.table)
        np.testing.assert_allclose(values_of(other), values_of(plain), rtol=2e-4, atol=2e-4, equal_nan=True)


@pytest.mark.parametrize("shape", SHAPES)
def test_an_offset_changes_nothing(shape):
    """A constant added to the record, as a digitiser does, leaves the features alone."""
    plain = single(SHAPES[shape](100e6))
    raised = PulseSet(plain.waves + np.float32(0.5), plain.chains, plain.table)
    np.testing.assert_allclose(values_of(raised), values_of(plain), rtol=2e-3, atol=2e-3, equal_nan=True)


def test_alone_and_in_a_batch_the_same_bits(found):
    """A pulse's features do not depend on the company it is measured in, to the last bit."""
    whole = feature_table(found)
    for place in (0, 7, len(whole) - 1):
        assert np.array_equal(feature_table(found.take(np.array([place])))[0], whole[place], equal_nan=True)
    backwards = feature_table(found.take(np.arange(len(whole))[::-1]))
    assert np.array_equal(backwards[::-1], whole, equal_nan=True)


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("corner_hz", [12e6, 24e6])
@pytest.mark.parametrize("rate_hz", [62.5e6, 125e6, 200e6, 250e6])
def test_other_rates_agree_within_the_stated_tolerance(shape, corner_hz, rate_hz):
    """The same pulse behind the same chain keeps each feature within its tolerance at another rate (60 dB)."""
    chain = {"noise_v": 1e-3, "band_hz": (0.1e6, corner_hz)}
    reference = single(band_limited(shape, 100e6, corner_hz), **chain)
    other = single(band_limited(shape, rate_hz, corner_hz), rate_hz=rate_hz, seed=3, **chain)
    same_copy = alike_copies(values_of(reference), values_of(other))
    for feature, one, two in zip(CATALOGUE, values_of(reference), values_of(other), strict=True):
        if feature.name.startswith("copy_") and not same_copy:
            continue
        if np.isnan(one) != np.isnan(two):
            # a level at the edge of the noise, or of what counts as a hollow, may be measurable at one rate only
            assert feature.name.startswith(("late_", "first_")), feature.name
            assert feature.name.startswith("first_") or np.nanmin([one, two]) < -40, (feature.name, one, two)
        assert not abs(one - two) > feature.tolerance, (feature.name, one, two)


def alike_copies(one, two):
    """Whether the same copies were chosen: where two are of nearly one height the choice may fall otherwise."""
    places = [NAMES.index(name) for name in ("copy_1_delay_us", "copy_2_delay_us")]
    return np.allclose(one[places], two[places], atol=0.03, equal_nan=True)


def test_the_copies_of_every_shape_with_a_copy_are_chosen_alike_at_every_rate():
    """Where there is a true copy the choice between copies does not depend on the rate."""
    reference = values_of(single(band_limited("two", 100e6, 24e6), noise_v=1e-3, band_hz=(0.1e6, 24e6)))
    for rate_hz in (62.5e6, 125e6, 200e6, 250e6):
        wave = band_limited("two", rate_hz, 24e6)
        other = single(wave, rate_hz=rate_hz, noise_v=1e-3, seed=3, band_hz=(0.1e6, 24e6))
        assert alike_copies(reference, values_of(other))


def band_limited(shape, rate_hz, corner_hz):
    """The shape sampled at 2 GS/s, low-passed (second order, causal) and thinned to the rate."""
    fine = sosfilt(butter(2, corner_hz, fs=2e9, output="sos"), SHAPES[shape](2e9))
    place = np.arange(round(12e-6 * rate_hz)) * (2e9 / rate_hz)
    return np.interp(place, np.arange(fine.size), fine)


@pytest.mark.parametrize("shape", SHAPES)
def test_a_moved_window_keeps_the_features(shape):
    """An onset that is one sample off moves no feature by more than its tolerance and a twentieth."""
    plain = single(SHAPES[shape](100e6), noise_v=1e-4)
    moved = PulseSet(np.roll(plain.waves, 1, axis=1), plain.chains, plain.table)
    same_copy = alike_copies(values_of(plain), values_of(moved))
    for feature, one, two in zip(CATALOGUE, values_of(plain), values_of(moved), strict=True):
        if feature.name.startswith("copy_") and not same_copy:
            continue
        if feature.name.startswith("first_") and np.isnan(one) != np.isnan(two):
            continue
        assert np.isnan(one) == np.isnan(two), feature.name
        assert np.isnan(one) or abs(one - two) <= STEP.get(feature.unit, 0.0) + feature.tolerance + 0.05 * abs(one), (
            feature.name,
            one,
            two,
        )


def test_what_the_chain_does_not_carry_is_unmeasurable():
    """Behind a chain that ends at 12 MHz the share of power above 14 MHz is NaN; the rise time is not."""
    narrow = single(SHAPES["fast"](100e6), band_hz=(0.1e6, 12e6))
    values = dict(zip(NAMES, values_of(narrow), strict=True))
    assert np.isnan(values["share_14_25_mhz"])
    assert np.isfinite(values["rise_ns"])


def test_what_the_noise_hides_is_unmeasurable():
    """At 10 dB the width at a tenth of the peak is NaN, the width at half height is not."""
    buried = single(SHAPES["slow"](100e6), noise_v=0.35)
    values = dict(zip(NAMES, values_of(buried), strict=True))
    assert np.isnan(values["width_10_ns"])
    assert np.isfinite(values["width_50_ns"])


def test_a_window_that_crosses_a_gap_is_used_as_far_as_it_goes():
    """Two microseconds before the onset are enough to know the noise from; with none nothing is measurable."""
    cut = single(SHAPES["fast"](100e6))
    for lost, measurable in ((300, True), (495, False)):
        waves = cut.waves.copy()
        waves[:, :lost] = np.nan
        values = dict(zip(NAMES, values_of(PulseSet(waves, cut.chains, cut.table)), strict=True))
        assert np.isfinite(values["rise_ns"]) == measurable
        if measurable:
            assert values["rise_ns"] == pytest.approx(values_of(cut)[NAMES.index("rise_ns")], rel=0.1)


def test_a_neighbour_before_or_after_changes_little():
    """Another pulse 3 us before the onset, or right after the end, hardly moves a feature."""
    alone = single(SHAPES["fast"](100e6), duration_us=1.0)
    near = {"before": -300, "after": 110}
    for where in near.values():
        waves = alone.waves.copy()
        other = SHAPES["fast"](100e6)[: 1490 - where]
        waves[0, 500 + where : 500 + where + other.size] += other.astype(np.float32)
        crowded = PulseSet(waves, alone.chains, alone.table)
        for feature, one, two in zip(CATALOGUE, values_of(alone), values_of(crowded), strict=True):
            if "echo" in feature.name or feature.name.startswith("copy_") or np.isnan(one):
                continue
            assert abs(one - two) <= feature.tolerance + 0.1 * abs(one), (where, feature.name, one, two)


def test_noise_changes_values_within_reason():
    """From 50 to 30 dB no measurable feature moves by more than a third and four tolerances.

    Tilts are left out for a ringing pulse: its spectrum is a hill, and fewer bins of it stand clear of more noise.
    """
    for shape in ("fast", "slow", "ringing"):
        clear = single(SHAPES[shape](100e6), noise_v=0.003, duration_us=2.5)
        values = np.array(
            [values_of(single(SHAPES[shape](100e6), noise_v=0.03, duration_us=2.5, seed=k)) for k in range(9)]
        )
        for feature, one, many in zip(CATALOGUE, values_of(clear), values.T, strict=True):
            hill = shape == "ringing" and feature.name.startswith("slope")
            copies = "echo" in feature.name or feature.name.startswith("copy_")
            if copies or hill or np.isnan(one) or np.isnan(many).any():
                continue
            moved = abs(np.median(many) - one)
            assert moved <= 4 * feature.tolerance + 0.33 * abs(one), (shape, feature.name, one, np.median(many))


def test_an_empty_or_constant_window_has_no_features():
    """Where there is nothing to measure every feature is NaN, without a warning."""
    plain = single(SHAPES["fast"](100e6))
    for waves in (np.zeros_like(plain.waves), np.full_like(plain.waves, np.nan)):
        assert np.isnan(values_of(PulseSet(waves, plain.chains, plain.table))).all()


def test_an_unknown_feature_is_refused_by_name(found):
    """A bundle that names a feature this version lacks is told which."""
    with pytest.raises(RefusedError, match="'rise_fs'"):
        feature_table(found, ["rise_fs"])


def test_carriers_are_taken_out_before_measuring():
    """Under a carrier of a fifth of the peak the width is that of the clean pulse within 10 %."""
    t = np.arange(2000) / 100e6
    clean = single(SHAPES["slow"](100e6))
    carried = PulseSet(
        clean.waves + (0.2 * np.cos(2 * np.pi * 1.35e6 * t + 1)).astype(np.float32), clean.chains, clean.table
    )
    names = ["width_50_ns", "rise_ns"]
    np.testing.assert_allclose(feature_table(carried, names), feature_table(clean, names), rtol=0.1)
