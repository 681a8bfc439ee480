"""NetCDF and Zarr: foreign files, lazy opening, what is refused."""

import json
import sys

import numpy as np
import pytest
import xarray as xr

import unmix
from unmix.errors import ReadError, WriteError
from unmix.spectra import make_spectra


@pytest.fixture
def spectra():
    return make_spectra(np.arange(12.0).reshape(3, 4), [400, 401, 402, 404], dim="wavelength", quantity="absorbance",
                        labels=["a", "b", "c"], attrs={"per": "g/L", "notes": '["x"]'})  # fmt: skip


@pytest.mark.parametrize("suffix", [".nc", ".zarr"])
def test_lazy_stores_stay_on_disk_until_needed(tmp_path, spectra, suffix):
    dask = pytest.importorskip("dask")
    path = unmix.write(spectra, tmp_path / f"s{suffix}")
    computed = []

    def scheduler(graph, keys, **kwargs):
        computed.append(keys)
        return dask.get(graph, keys, **kwargs)

    with dask.config.set(scheduler=scheduler):
        lazy = unmix.read(path, chunks={})
        assert lazy.chunks is not None
        assert computed == []
        np.testing.assert_array_equal(lazy.values, spectra.values)
    assert computed
    assert json.loads(lazy.attrs["source_sha256"]) == {path.name: "not digested, opened lazily"}
    lazy.close()


@pytest.mark.parametrize("suffix", [".nc", ".zarr"])
def test_contract_survives(tmp_path, spectra, suffix):
    read = unmix.read(unmix.write(spectra, tmp_path / f"s{suffix}"))
    xr.testing.assert_identical(read.drop_attrs(deep=False), spectra.drop_attrs(deep=False))
    assert read.attrs["per"] == "g/L"
    assert read.chunks is None


def test_stores_and_files_are_read_together(tmp_path, spectra):
    unmix.write(spectra, tmp_path / "a.nc")
    unmix.write(spectra, tmp_path / "b.zarr")
    unmix.write(spectra.isel(sample=[1]), tmp_path / "c.csv")
    read = unmix.read(tmp_path, per="g/L")
    assert read.label.values.tolist() == ["a", "b (a)", "c (a)", "a (b)", "b", "c (b)", "b (c)"]
    assert len(json.loads(read.attrs["source_sha256"])) == 3


def test_foreign_stores(tmp_path):
    data = xr.Dataset({"absorbance": (("time", "wavelength"), np.ones((2, 3)), {"quantity": "%T"})},
                      {"wavelength": ("wavelength", [0.6, 0.5, 0.4], {"units": "micrometers"})})  # fmt: skip
    data.to_netcdf(tmp_path / "s.nc", engine="scipy")
    read = unmix.read(tmp_path / "s.nc")
    np.testing.assert_allclose(read.wavelength.values, [400, 500, 600])
    assert read.dims == ("time", "wavelength")
    assert (read.attrs["quantity"], read.values[0, 0]) == ("transmittance", 0.01)


@pytest.mark.parametrize(("data", "message"), [
    ({"a": ("x", [1.0])}, "the store holds no spectra; one variable runs along one of wavenumber"),
    ({"a": ("wavelength", [1.0]), "b": ("wavelength", [1.0])}, "the store holds several variables that run along a "
     "spectral axis: 'a', 'b'"),
    ({"a": ("wavelength", [1.0, 2.0])}, "what the numbers are is not stated; give it as quantity="),
    ({"a": ("wavelength", [1.0, 2.0], {"quantity": "absorbance"}), "wavelength": [2.0, 2.0]}, "does not run one way"),
    ({"a": ("wavelength", ["x", "y"], {"quantity": "absorbance"}), "wavelength": [1.0, 2.0]}, "not numbers"),
])  # fmt: skip
def test_what_is_no_store_of_spectra(tmp_path, data, message):
    coords = {"wavelength": data.pop("wavelength")} if "wavelength" in data else {"wavelength": [1.0, 2.0]}
    if all(np.size(entry[1]) == 1 for entry in data.values()):
        coords = {}
    xr.Dataset(data, coords).to_netcdf(tmp_path / "s.nc", engine="h5netcdf")
    with pytest.raises(ReadError, match=f"^s.nc: .*{message}"):
        unmix.read(tmp_path / "s.nc")


def test_damaged_stores(tmp_path, spectra):
    path = unmix.write(spectra, tmp_path / "s.nc")
    whole = path.read_bytes()
    for size in range(8, len(whole), len(whole) // 20):
        path.write_bytes(whole[:size])
        with pytest.raises(ReadError, match=r"s\.nc"):
            unmix.read(path)
    (tmp_path / "empty.zarr").mkdir()
    with pytest.raises(ReadError, match="the store cannot be opened"):
        unmix.read(tmp_path / "empty.zarr")


def test_hollow_store_is_refused_before_it_is_loaded(tmp_path):
    h5py = pytest.importorskip("h5py")
    with h5py.File(tmp_path / "s.nc", "w") as file:
        axis = file.create_dataset("wavelength", data=np.arange(1000.0))
        axis.make_scale("wavelength")
        sample = file.create_dataset("sample", shape=(10**6,), dtype="f8", chunks=(1000,))
        sample.make_scale("sample")
        values = file.create_dataset("spectra", shape=(10**6, 1000), dtype="f8", chunks=(1000, 1000))
        values.dims[0].attach_scale(sample)
        values.dims[1].attach_scale(axis)
        values.attrs["quantity"] = "absorbance"
    with pytest.raises(ReadError, match=r"the store claims 8e\+09 bytes of numbers in \d+ bytes"):
        unmix.read(tmp_path / "s.nc")


def test_missing_package_is_named(tmp_path, spectra, monkeypatch):
    monkeypatch.setitem(sys.modules, "zarr", None)
    with pytest.raises((ReadError, WriteError), match="extra 'scale'"):
        unmix.write(spectra, tmp_path / "s.zarr")
