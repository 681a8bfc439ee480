"""What a choice does, side by side."""

import numpy as np
import pytest
import xarray as xr

from unmix.errors import InputError
from unmix.prepare import AsymmetricLeastSquares, Regions, SavitzkyGolay, StandardNormalVariate, try_values


def test_each_value_stands_beside_the_others(labelled):
    tried = try_values(SavitzkyGolay(order=2), labelled, "window", [5, 11])
    assert tried.prepared.dims == ("window", "sample", "wavelength")
    for window in (5, 11):
        expected = SavitzkyGolay(window=window, order=2).fit_transform(labelled)
        xr.testing.assert_allclose(tried.prepared.sel(window=window, drop=True), expected)


def test_baselines_are_shown_with_what_their_penalty_means(labelled):
    tried = try_values(AsymmetricLeastSquares(), labelled, "penalty", [1e2, 1e4, 1e6])
    assert (np.diff(tried.cutoff) > 0).all()
    roughness = (tried.baseline.diff("wavelength", 2) ** 2).sum(("sample", "wavelength"))
    assert (np.diff(roughness) < 0).all()
    np.testing.assert_allclose(tried.prepared + tried.baseline - labelled, 0, atol=1e-12)


def test_values_that_are_no_numbers_are_labelled_by_their_text(labelled):
    tried = try_values(Regions(), labelled, "keep", [[(0, 20)], [(10, 20)]])
    assert tried.keep.values.tolist() == ["[(0, 20)]", "[(10, 20)]"]


def test_what_cannot_be_tried_is_said(labelled):
    with pytest.raises(InputError, match="SavitzkyGolay has no parameter 'windw'; did you mean 'window'"):
        try_values(SavitzkyGolay(), labelled, "windw", [5])
    with pytest.raises(InputError, match="it has none"):
        try_values(StandardNormalVariate(), labelled, "x", [5])
    with pytest.raises(InputError, match="no value is given"):
        try_values(SavitzkyGolay(), labelled, "window", [])
    with pytest.raises(InputError, match="window is 4"):
        try_values(SavitzkyGolay(), labelled, "window", [5, 4])
