"""Distance to what the model was trained on."""

import numpy as np
import pytest

from pdclass.model.novelty import CLIP, fit_novelty, make_reference, novelty, unfamiliar

RNG_SEED = 4


def cloud(n=300, seed=RNG_SEED, features=6):
    rng = np.random.default_rng(seed)
    values = rng.normal(size=(n, features)) * [1, 10, 0.1, 5, 1, 100]
    return values, np.array([f"g{row % 20}" for row in range(n)])


def test_distance_is_the_fifth_nearest_mean_difference():
    """Against a plain loop over all reference pulses, NaN rules included."""
    values, groups = cloud()
    values[::7, 2] = np.nan
    values[3, :4] = np.nan
    reference = fit_novelty(values, groups, values, groups)
    asked, _ = cloud(40, 9)
    asked[::3, 1] = np.nan
    scaled = np.clip((asked - reference.centre) / reference.scale, -CLIP, CLIP)
    for row, found in zip(scaled, novelty(reference, asked), strict=True):
        gap = np.abs(reference.rows - row)
        enough = 2 * (~np.isnan(gap)).sum(axis=1) >= 6
        assert found == pytest.approx(np.sort(np.nanmean(gap[enough], axis=1))[4], rel=1e-6)


def test_units_do_not_matter():
    """Robust scaling makes novelty the same in ns and in us."""
    values, groups = cloud()
    asked, _ = cloud(30, 8)
    ours = novelty(fit_novelty(values, groups, values, groups), asked)
    factor = np.array([1e3, 1, 1, 1e-3, 1, 1])
    theirs = novelty(fit_novelty(values * factor, groups, values * factor, groups), asked * factor)
    np.testing.assert_allclose(ours, theirs, rtol=1e-5)


def test_a_pulse_with_too_few_features_is_unfamiliar():
    """Fewer than a quarter of the features: infinitely far; a third: compared, if half of it is shared."""
    values, groups = cloud()
    reference = fit_novelty(values, groups, values, groups)
    asked = np.zeros((2, 6))
    asked[0, :5], asked[1, :4] = np.nan, np.nan
    far = novelty(reference, asked)
    assert np.isinf(far[0])
    assert np.isfinite(far[1])
    assert unfamiliar(reference, far)[0]


def test_features_that_a_pulse_lacks_do_not_make_it_unfamiliar():
    """Pulses of a kind known with half of its features missing are as near as ever."""
    values, groups = cloud(400)
    values[::2, 3:] = np.nan
    reference = fit_novelty(values[:200], groups[:200], values[200:], groups[200:])
    fresh, _ = cloud(200, 12)
    fresh[:, 3:] = np.nan
    assert unfamiliar(reference, novelty(reference, fresh)).mean() < 0.1


def test_an_infinitely_far_pulse_is_unfamiliar_even_without_a_limit():
    """Where the limit is infinite nothing else is unfamiliar, but a pulse that cannot be compared is."""
    values, _ = cloud()
    centre, scale = np.zeros(6), np.ones(6)
    reference = make_reference(values, centre, scale, np.inf)
    far = novelty(reference, np.stack([np.full(6, np.nan), np.full(6, 1e9)]))
    np.testing.assert_array_equal(unfamiliar(reference, far), [True, False])


def test_far_pulses_are_unfamiliar_and_near_ones_are_not():
    """A shift of six spreads in every feature is found; fresh pulses of the same kind mostly are not."""
    values, groups = cloud(600)
    reference = fit_novelty(values[:300], groups[:300], values[300:], groups[300:])
    fresh, _ = cloud(400, 11)
    assert unfamiliar(reference, novelty(reference, fresh)).mean() < 0.05
    assert unfamiliar(reference, novelty(reference, fresh + 6 * reference.scale)).all()


def test_one_wild_feature_is_clipped():
    """A feature a million spreads off counts as one at the clip."""
    values, groups = cloud()
    reference = fit_novelty(values, groups, values, groups)
    wild, at_clip = reference.centre.copy(), reference.centre.copy()
    wild[0] += 1e6 * reference.scale[0]
    at_clip[0] += CLIP * reference.scale[0] * 1.0000001
    found = novelty(reference, np.stack([wild, at_clip]))
    assert found[0] == found[1]


def test_own_group_is_left_out():
    """Pulses whose only near neighbours are of their own group set a wide limit."""
    values, _ = cloud(60)
    values = np.repeat(values, 8, axis=0) + np.random.default_rng(0).normal(size=(480, 6)) * 1e-6
    own = np.repeat([f"g{number}" for number in range(60)], 8)
    apart = fit_novelty(values, own, values, own).limit
    mixed = fit_novelty(values, np.array(["other"] * 480), values, own).limit
    assert apart > 100 * mixed


def test_groups_weigh_the_same_in_the_limit():
    """One group with many far pulses is one group among two hundred: it does not move the 99th percentile."""
    values, _ = cloud(400)
    groups = np.array([f"g{row // 2}" for row in range(400)])
    calm = fit_novelty(values, groups, values, groups).limit
    far = np.full((400, 6), 1e4)
    crowd = fit_novelty(values, groups, np.vstack([values, far]), np.append(groups, ["crowd"] * 400)).limit
    assert crowd < 1.5 * calm


def test_constant_and_empty_features_have_a_scale():
    """A feature without spread or without values divides by 1, and an empty one never counts."""
    values, groups = cloud()
    values[:, 0], values[:, 1] = 3.0, np.nan
    reference = fit_novelty(values, groups, values, groups)
    assert reference.scale[0] == reference.scale[1] == 1.0
    assert np.isfinite(reference.limit)


def test_novelty_does_not_depend_on_the_batch_and_is_rebuilt_from_its_rows():
    """One pulse alone, or a reference rebuilt from raw values, gives the same bits."""
    values, groups = cloud()
    reference = fit_novelty(values, groups, values, groups)
    again = make_reference(values, reference.centre, reference.scale, reference.limit)
    asked, _ = cloud(25, 3)
    together = novelty(reference, asked)
    alone = np.concatenate([novelty(again, asked[row : row + 1]) for row in range(25)])
    np.testing.assert_array_equal(together, alone)
    assert together.dtype == np.float32
