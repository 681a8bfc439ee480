import numpy as np
import pytest
import xarray as xr

from unmix import quantify, write

pytest.importorskip("zarr")


@pytest.fixture
def files(tmp_path, rng):
    axis = np.linspace(400, 700, 61)
    pure = xr.DataArray(
        np.exp(-(((axis - np.array([[470.0], [540], [610]])) / 35) ** 2)), dims=("component", "wavelength"),
        coords={"component": ["amber", "blue", "coral"], "wavelength": axis},
        attrs={"quantity": "absorptivity", "per": "g/L"},
    )  # fmt: skip
    values = rng.uniform(0, 2, (9, 3)) @ pure.values + 0.002 * rng.normal(size=(9, 61))
    cube = xr.DataArray(values.reshape(3, 3, -1), dims=("y", "x", "wavelength"), coords={"wavelength": axis},
                        attrs={"quantity": "absorbance"})  # fmt: skip
    write(cube, tmp_path / "cube.zarr")
    write(pure, tmp_path / "pure.nc")
    return tmp_path, cube, pure


def arguments(folder, *more):
    return ["quantify", str(folder / "cube.zarr"), "--pure", str(folder / "pure.nc"), "--path-length", "1 cm", *more]


def test_an_image_goes_block_by_block_into_a_store(files, unmix):
    folder, cube, pure = files
    status, out, err = unmix(*arguments(folder, "--out", str(folder / "found.zarr"), "--rows", "2", "--workers", "1"))
    assert status == 0
    assert "9 spectra: 9 supported, 0 doubtful, 0 unsupported" in out
    found = xr.open_zarr(folder / "found.zarr", consolidated=False)
    expected = quantify(cube, pure, path_length=1.0)
    np.testing.assert_allclose(found.concentration, expected.concentration, rtol=1e-10)
    status, _, err = unmix(*arguments(folder, "--out", str(folder / "found.zarr")))
    assert status == 2
    assert "exists already" in err


@pytest.mark.parametrize(
    ("more", "told"),
    [
        (["--resume"], "--resume is given without a store"),
        (["--out", "found.nc"], "a name that ends in .zarr"),
        (["--out", "found.zarr", "--csv", "found.csv"], "--out writes a store and found.csv another"),
    ],
)
def test_options_that_do_not_go_together(files, unmix, more, told):
    status, _, err = unmix(*arguments(files[0], *more))
    assert status == 2
    assert told in " ".join(err.split())


def test_only_one_store_goes_in(files, unmix):
    folder = files[0]
    status, _, err = unmix(*arguments(folder, str(folder / "cube.zarr"), "--out", str(folder / "found.zarr")))
    assert status == 2
    assert "one store" in err
