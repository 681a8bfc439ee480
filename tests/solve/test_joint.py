"""Joint regions of two amounts."""

import numpy as np
import pytest
import xarray as xr

import unmix
from unmix.errors import InputError


@pytest.fixture
def many(dyes, rng):
    truth = rng.uniform(2, 8, (600, 3))
    values = truth @ dyes.pure.values + 2e-3 * rng.normal(size=(600, dyes.pure.shape[1]))
    spectra = xr.DataArray(values, dims=("sample", "wavelength"), coords={"wavelength": dyes.pure.wavelength},
                           attrs={"quantity": "absorbance"})  # fmt: skip
    return unmix.quantify(spectra, dyes.pure, path_length=1.0), truth


def test_the_region_holds_both_amounts_at_its_rate(many):
    found, truth = many
    region = unmix.joint_region(found, ("crimson", "amber"))
    miss = (truth[:, :2] - region.center.values) / found.standard_uncertainty.values[:, :2]
    r = region.correlation.values
    distance = (miss[:, 0] ** 2 - 2 * r * miss[:, 0] * miss[:, 1] + miss[:, 1] ** 2) / (1 - r**2)
    # the boundary lies at the distance that the truth exceeds in 5% of 600 samples (standard error 0.9%)
    edge = (region.boundary.values[:, :, 37] - region.center.values) / found.standard_uncertainty.values[:, :2]
    reach = (edge[:, 0] ** 2 - 2 * r * edge[:, 0] * edge[:, 1] + edge[:, 1] ** 2) / (1 - r**2)
    assert 0.02 < np.mean(distance > reach) < 0.08
    # the two intervals together would not: crimson and amber overlap
    assert np.abs(r).min() > 0.05


def test_half_axes_are_those_of_the_covariance(many):
    found, _ = many
    region = unmix.joint_region(found[{"sample": slice(0, 3)}], ("crimson", "azure"), level=0.9)
    far = np.linalg.norm(region.boundary - region.center, axis=region.boundary.dims.index("component"))
    np.testing.assert_allclose(far.max(axis=-1), region.semi_axis.values[:, 0], rtol=1e-3)
    np.testing.assert_allclose(far.min(axis=-1), region.semi_axis.values[:, 1], rtol=1e-2)


def test_no_ellipse_at_a_bound(dyes):
    found = unmix.quantify(dyes.spectra, dyes.pure)
    region = unmix.joint_region(found, ("crimson", "amber"))
    bound = (found.concentration.sel(component=["crimson", "amber"]) == 0).any("component").values
    assert bound.any()
    assert np.isnan(region.boundary.values[bound]).all()
    assert np.isfinite(region.boundary.values[~bound]).all()


@pytest.mark.parametrize("pair", [("crimson",), ("crimson", "crimson"), ("crimson", "pink")])
def test_a_pair_is_two_components(many, pair):
    with pytest.raises(InputError, match="give two of"):
        unmix.joint_region(many[0], pair)


def test_another_result_is_refused(dyes):
    with pytest.raises(InputError, match="needs correlations"):
        unmix.joint_region(unmix.conditioning(dyes.pure), ("crimson", "amber"))
