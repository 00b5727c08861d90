"""Thinned waves and the tables of a bundle."""

import numpy as np
import pandas as pd
import pytest

from pdclass.errors import RefusedError
from pdclass.model.columns import THIN_POINTS, read_reference, thin, write_reference


def frame(**changes):
    rows = {"pulse_id": ["a", "b"], "rise": [1.0, np.nan], "label": ["cable", "local"], "basis": ["expert", None]}
    waves = list(np.zeros((2, THIN_POINTS), np.float32))
    return pd.DataFrame({**rows, "group": ["g", "h"], "wave": waves, **changes})


def test_a_thinned_wave_keeps_its_peaks():
    """Of each block the sample of largest magnitude stays, with its sign; missing ends stay missing."""
    wave = np.zeros((1, 2000), np.float32)
    wave[0, 1234], wave[0, 1239], wave[0, 1990:] = 0.2, -0.7, np.nan
    found = thin(wave)
    assert found.shape == (1, THIN_POINTS)
    assert found[0, 123] == np.float32(-0.7)
    assert np.isnan(found[0, -1])
    assert np.count_nonzero(np.nan_to_num(found)) == 1


def test_a_short_wave_is_repeated():
    """A wave with fewer samples than points is stretched."""
    np.testing.assert_array_equal(thin(np.array([[1, 2]], np.float32), 4), [[1, 1, 2, 2]])


def test_odd_content_is_refused(tmp_path):
    """Labels, bases, infinities and columns are checked on reading."""
    path = tmp_path / "reference.parquet"
    write_reference(path, frame(), ["rise"])
    assert read_reference(path, ["rise"], ["cable", "local"])["basis"].isna().tolist() == [False, True]
    with pytest.raises(RefusedError, match="columns"):
        read_reference(path, ["fall"], ["cable", "local"])
    with pytest.raises(RefusedError, match="label"):
        read_reference(path, ["rise"], ["cable"])
    for wrong in ({"basis": "rumour"}, {"rise": np.inf}):
        write_reference(path, frame(**wrong), ["rise"])
        with pytest.raises(RefusedError, match=next(iter(wrong))):
            read_reference(path, ["rise"], ["cable", "local"])
