"""Samples and pure spectra on one axis, and regions: what is kept, what is cut, and what is refused."""

import numpy as np
import pytest
import xarray as xr

from unmix.errors import AxisError, InputError
from unmix.prepare.axis import common_axis, select_regions
from unmix.spectra import make_spectra


def bands(axis):
    return np.stack([np.exp(-(((axis - c) / 30) ** 2)) for c in (900.0, 1100.0)])


def pure_on(axis, values=None, dim="wavenumber"):
    return make_spectra(bands(axis) if values is None else values, axis, dim=dim, quantity="absorptivity",
                        leading="component", labels=["ester", "alcohol"],
                        attrs={"per": "g/L"})  # fmt: skip


def samples_on(axis, dim="wavenumber"):
    rows = np.array([[0.5, 1.0], [2.0, 0.1]]) @ bands(axis if dim == "wavenumber" else 1e7 / axis)
    return make_spectra(rows, axis, dim=dim, quantity="absorbance", labels=["A", "B"],
                        coords={"batch": [1, 2]})  # fmt: skip


def test_equal_axes_pass_untouched():
    axis = np.arange(800.0, 1200.0, 2.0)
    spectra, pure, notes = common_axis(samples_on(axis), pure_on(axis))
    xr.testing.assert_identical(spectra, samples_on(axis))
    xr.testing.assert_identical(pure, pure_on(axis))
    assert notes == []


def test_samples_keep_their_channels_and_pure_spectra_are_interpolated():
    own, other = np.arange(800.0, 1200.0, 2.0), np.arange(850.5, 1300.0, 1.5)
    given = samples_on(own)
    spectra, pure, notes = common_axis(given, pure_on(other))
    inside = (own >= other[0]) & (own <= other[-1])
    xr.testing.assert_identical(spectra, given.isel(wavenumber=inside))
    np.testing.assert_allclose(pure.values, bands(own[inside]), atol=1e-7)
    assert pure.attrs == {"quantity": "absorptivity", "per": "g/L"}
    assert len(notes) == 2
    assert notes[0] == (
        "26 of 200 channels of the spectra lie outside the range of the pure spectra (850.5 to 1299 cm-1) "
        "and were left out"
    )
    assert "interpolated from their 300 channels (850.5 to 1299 cm-1) onto" in notes[1]


def test_amounts_survive_a_change_of_grid():
    own, other = np.arange(805.3, 1190.0, 1.93), np.arange(800.0, 1200.0, 2.0)
    spectra, pure, _ = common_axis(samples_on(own), pure_on(other))
    found = np.linalg.lstsq(pure.values.T, spectra.values.T, rcond=None)[0].T
    np.testing.assert_allclose(found, [[0.5, 1.0], [2.0, 0.1]], atol=1e-6)


@pytest.mark.parametrize("own_dim", ["wavenumber", "wavelength"])
def test_wavelength_and_wavenumber_are_converted_exactly(own_dim):
    wavenumber = np.arange(800.0, 1200.0, 2.0)
    wavelength = 1e7 / wavenumber
    if own_dim == "wavenumber":
        spectra, pure, notes = common_axis(samples_on(wavenumber), pure_on(wavelength, bands(wavenumber), "wavelength"))
    else:
        spectra, pure, notes = common_axis(samples_on(wavelength, "wavelength"), pure_on(wavenumber))
    assert pure.dims == ("component", own_dim)
    found = np.linalg.lstsq(pure.values.T, spectra.values.T, rcond=None)[0].T
    np.testing.assert_allclose(found, [[0.5, 1.0], [2.0, 0.1]], atol=1e-12)
    assert len(notes) == 1
    assert "1e7 / x" in notes[0]


def test_missing_channels_of_a_pure_spectrum_stay_missing_and_its_ends_limit_the_range():
    axis = np.arange(800.0, 1200.0, 2.0)
    values = bands(axis)
    values[0, :10] = np.nan
    values[1, 100] = np.nan
    spectra, pure, notes = common_axis(samples_on(axis + 1.0), pure_on(axis, values))
    assert spectra.wavenumber.values[0] == 821.0
    assert np.isnan(pure.values).sum(axis=1).tolist() == [0, 2]
    assert "limited by 'ester'" in notes[0]


def test_a_hole_in_the_pure_axis_is_cut_from_the_samples():
    axis = np.arange(800.0, 1200.0, 2.0)
    held = axis[(axis < 950) | (axis > 1050)]
    spectra, pure, notes = common_axis(samples_on(axis + 1.0), pure_on(held))
    assert not ((spectra.wavenumber > 950) & (spectra.wavenumber < 1050)).any()
    assert not np.isnan(pure.values).any()
    assert any("949 to 1051 cm-1, lie where the pure spectra have no channels" in note for note in notes)


def test_image_and_single_spectrum():
    axis = np.arange(800.0, 1200.0, 2.0)
    image = samples_on(axis).expand_dims(y=3).rename(sample="x")
    spectra, _, _ = common_axis(image, pure_on(axis[10:]))
    assert spectra.dims == ("y", "x", "wavenumber")
    single, _, _ = common_axis(samples_on(axis).isel(sample=0, drop=True), pure_on(axis[10:]))
    assert single.sizes == {"sample": 1, "wavenumber": 190}


def test_one_channel_is_enough_when_the_samples_have_no_more():
    axis = np.arange(800.0, 1200.0, 2.0)
    spectra, pure, _ = common_axis(samples_on(axis[:1]), pure_on(axis))
    assert spectra.shape == pure.shape == (2, 1)


@pytest.mark.parametrize(
    ("own", "other", "text"),
    [
        (np.arange(400.0, 500.0), np.arange(800.0, 900.0),
         r"the spectra \(400 to 499 cm-1\) and the pure spectra \(800 to 899 cm-1\) share no channel"),
        (np.arange(400.0, 500.0), np.arange(499.0, 600.0), "share only one channel"),
    ],
)  # fmt: skip
def test_no_overlap_names_both_ranges(own, other, text):
    with pytest.raises(AxisError, match=text):
        common_axis(samples_on(own), pure_on(other))


def test_raman_shift_is_no_absorption_axis():
    axis = np.arange(800.0, 1200.0, 2.0)
    with pytest.raises(AxisError, match="'wavenumber' but the pure spectra along 'raman_shift'"):
        common_axis(samples_on(axis), pure_on(axis, bands(axis), "raman_shift"))


def test_pure_spectra_that_exclude_each_other_or_hold_nothing():
    axis = np.arange(800.0, 1200.0, 2.0)
    values = bands(axis)
    values[0, 50:] = np.nan
    values[1, :60] = np.nan
    with pytest.raises(AxisError, match="'ester' ends at 898 cm-1 but 'alcohol' starts at 920 cm-1"):
        common_axis(samples_on(axis), pure_on(axis, values))
    values[0] = np.nan
    with pytest.raises(InputError, match="'ester' has no value at any channel"):
        common_axis(samples_on(axis), pure_on(axis, values))


def test_wavelength_zero_cannot_become_a_wavenumber():
    axis = np.arange(0.0, 100.0)
    with pytest.raises(AxisError, match="wavelength 0 nm cannot be converted"):
        common_axis(samples_on(np.arange(1e5, 1e5 + 50)), pure_on(axis, np.ones((2, 100)), "wavelength"))


def test_regions_keep_their_bounds_and_may_overlap():
    spectra = samples_on(np.arange(800.0, 1200.0, 2.0))
    picked = select_regions(spectra, [(900, 910), (906, 912), (1000, 1001)])
    assert picked.wavenumber.values.tolist() == [900, 902, 904, 906, 908, 910, 912, 1000]
    assert picked.attrs == spectra.attrs
    assert picked.batch.values.tolist() == [1, 2]
    xr.testing.assert_identical(select_regions(spectra, None), spectra)
    assert select_regions(spectra, [(799.0, 1199.5)]).sizes["wavenumber"] == 200


@pytest.mark.parametrize(
    ("regions", "kind", "text"),
    [
        ([(1100, 900)], InputError, r"\(1100, 900\) cm-1 ends before it starts; give .* \(900, 1100\)"),
        ([(900, 1500)], AxisError, "reaches beyond the axis, which runs from 800 to 1198 cm-1"),
        ([(900.5, 901.5)], AxisError, "holds no channel"),
        ([(900, np.nan)], InputError, "not finite"),
        ((900, 1100), InputError, "900 is not a pair"),
        ([], InputError, "names no region"),
        ("900-1100", InputError, "names no region"),
    ],
)
def test_regions_that_cannot_be_used(regions, kind, text):
    with pytest.raises(kind, match=text):
        select_regions(samples_on(np.arange(800.0, 1200.0, 2.0)), regions)
