"""Spectra in chunks give what spectra in memory give, and nothing is computed before it is asked for."""

import warnings

import numpy as np
import pytest
import xarray as xr

import unmix
from unmix.chunked import CUT, TEXT, _cut, by_block, is_chunked
from unmix.errors import InputError, UnmixWarning
from unmix.method import Method

dask = pytest.importorskip("dask.array")


def same(lazy, whole):
    """Whether a computed result in chunks holds the same as one in memory, beyond empty places."""
    done = lazy.compute()
    assert set(done.data_vars) == set(whole.data_vars)
    assert set(done.coords) == set(whole.coords)
    for name, expected in whole.data_vars.items():
        found = done[name]
        assert found.dims == expected.dims
        assert found.attrs == expected.attrs
        cut = found.isel({dim: slice(0, size) for dim, size in expected.sizes.items()})
        if expected.dtype.kind in "fc":
            np.testing.assert_allclose(cut.values, expected.values, rtol=1e-10, atol=1e-14, err_msg=name)
            rest = np.delete(found.values, np.s_[: expected.shape[-1]], axis=-1) if expected.ndim else np.array([])
            assert np.isnan(rest).all()
        else:
            assert (cut.values == expected.values).all(), name


@pytest.fixture
def mixtures(rng):
    axis = np.linspace(400, 700, 121)
    pure = xr.DataArray(
        np.exp(-(((axis - np.array([[470.0], [540], [610]])) / 35) ** 2)), dims=("component", "wavelength"),
        coords={"component": ["amber", "blue", "coral"], "wavelength": axis},
        attrs={"quantity": "absorptivity", "per": "g/L"},
    )  # fmt: skip
    truth = rng.uniform(0, 2, (12, 3))
    values = truth @ pure.values + 0.002 * rng.normal(size=(12, 121))
    values[3] += 0.2 * np.exp(-(((axis - 660) / 8) ** 2))
    values[5, 40] = np.nan
    spectra = xr.DataArray(values, dims=("sample", "wavelength"),
                           coords={"wavelength": axis, "label": ("sample", [f"s{i}" for i in range(12)]),
                                   "path_length": ("sample", np.r_[np.ones(6), np.full(6, 2.0)])},
                           attrs={"quantity": "absorbance"})  # fmt: skip
    return spectra, pure


def test_quantify_in_chunks_equals_quantify_in_memory(mixtures):
    spectra, pure = mixtures
    lazy = unmix.quantify(spectra.chunk({"sample": 5}), pure)
    assert lazy.concentration.chunks == ((5, 5, 2), (3,))
    same(lazy, unmix.quantify(spectra, pure))


def test_an_image_in_chunks_of_both_directions(mixtures):
    spectra, pure = mixtures
    image = spectra.drop_vars(["label", "path_length"]).values.reshape(3, 4, -1)
    cube = xr.DataArray(image, dims=("y", "x", "wavelength"),
                        coords={"wavelength": spectra.wavelength, "x": [0.0, 0.5, 1.0, 1.5]},
                        attrs=spectra.attrs)  # fmt: skip
    lazy = unmix.quantify(cube.chunk({"y": 2, "x": 3}), pure, path_length=1.0)
    assert lazy.concentration.chunks == ((2, 1), (3, 1), (3,))
    same(lazy, unmix.quantify(cube, pure, path_length=1.0))


def test_learnt_spectra_and_methods_in_chunks(mixtures, rng):
    spectra, pure = mixtures
    amounts = rng.uniform(0, 2, (20, 3))
    standards = xr.DataArray(amounts @ pure.values + 0.002 * rng.normal(size=(20, 121)), dims=("sample", "wavelength"),
                             coords={"wavelength": spectra.wavelength}, attrs={"quantity": "absorbance"})  # fmt: skip
    table = xr.DataArray(amounts, dims=("sample", "component"), coords={"component": pure.component})
    learnt = unmix.learn_pure(standards, table, unit="g/L")
    given = spectra.drop_vars("path_length")
    same(unmix.quantify(given.chunk({"sample": 4}), learnt), unmix.quantify(given, learnt))
    method = Method.from_text(
        'unmix_method = 1\n[[step]]\nuse = "SavitzkyGolay"\nwindow = 11\norder = 2\nderivative = 1\n'
    )
    options = {"method": method, "baseline": None}
    same(unmix.quantify(spectra.chunk({"sample": 4}), pure, **options), unmix.quantify(spectra, pure, **options))


def test_nothing_is_read_before_it_is_asked_for(mixtures):
    spectra, pure = mixtures

    def refuse(block):
        raise AssertionError("read")

    closed = spectra.copy(data=dask.from_array(spectra.values, chunks=(4, -1)).map_blocks(refuse, dtype=float))
    lazy = unmix.quantify(closed, pure)
    assert is_chunked(lazy.concentration)
    with pytest.raises(AssertionError, match="read"):
        lazy.concentration.compute()


def test_chunks_along_the_axis_are_merged_with_a_warning(mixtures):
    spectra, pure = mixtures
    with pytest.warns(UnmixWarning, match="3 chunks along 'wavelength'"):
        lazy = unmix.quantify(spectra.chunk({"sample": 6, "wavelength": 50}), pure)
    same(lazy, unmix.quantify(spectra, pure))


def test_bad_options_are_refused_at_once(mixtures):
    spectra, pure = mixtures
    chunked = spectra.chunk({"sample": 4})
    with pytest.raises(InputError, match="baseline"):
        unmix.quantify(chunked, pure, baseline=-1)
    with pytest.raises(InputError, match="one length a spectrum"):
        unmix.quantify(chunked, pure, path_length=[1.0] * 12)


@pytest.mark.parametrize("step", ["AsymmetricLeastSquares", "SavitzkyGolay", "StandardNormalVariate", "Regions"])
def test_steps_stay_in_chunks(mixtures, step):
    spectra, _ = mixtures
    spectra = spectra.fillna(0.1)
    made = getattr(unmix.prepare, step)(**({"keep": [(450, 600)]} if step == "Regions" else {}))
    made.fit(spectra)
    lazy = made.transform(spectra.chunk({"sample": 5}))
    assert is_chunked(lazy)
    np.testing.assert_allclose(lazy.compute(), made.transform(spectra), rtol=1e-10, atol=1e-14)
    with pytest.warns(UnmixWarning, match="chunks along 'wavelength'"):
        made.transform(spectra.chunk({"wavelength": 40}))
    bad = spectra.copy()
    bad[2, 7] = np.inf
    lazy = made.transform(bad.chunk({"sample": 5}))
    with pytest.raises(InputError, match="infinite"):
        lazy.compute()


def test_long_texts_are_cut_with_a_mark(mixtures):
    spectra, _ = mixtures

    def talk(block):
        return xr.Dataset({"said": (("sample",), ["x" * 2000] * block.sizes["sample"], {})})

    text = str(by_block(talk, spectra.chunk({"sample": 5})).said.compute().values[0])
    assert len(text) == TEXT
    assert text.endswith(CUT)
    assert _cut(["short"]).tolist() == ["short"]


def test_warnings_of_the_invented_spectrum_are_not_shown(mixtures):
    spectra, pure = mixtures
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        unmix.quantify(spectra.chunk({"sample": 4}), pure)
