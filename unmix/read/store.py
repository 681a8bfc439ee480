"""NetCDF and Zarr stores of spectra, whole or in chunks, with the data contract kept.

Everything goes through xarray; nothing is pickled. Results are stored by the report side, not here.
"""

import hashlib
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import xarray as xr

from unmix.errors import ReadError, UnitError, UnmixError, WriteError, listed
from unmix.ordinate_units import ordinate_unit
from unmix.provenance import digest
from unmix.read.found import Findings, Found, Options, ordinate_of
from unmix.spectra import check_spectra
from unmix.units import QUANTITIES, SPECTRAL_UNITS, axis_unit

#: name of the variable that holds the spectra, and the version of this arrangement
_NAME, _FORMAT = "spectra", "1"
#: a store that claims more numbers than this many times its bytes is refused
_LARGEST_EXPANSION, _ALWAYS = 1000, 64 * 2**20


def is_store(path: Path, head: bytes) -> bool:
    """Whether a path is a netCDF file or a Zarr folder."""
    return path.is_dir() or head.startswith((b"\x89HDF\r\n\x1a\n", b"CDF\x01", b"CDF\x02", b"CDF\x05"))


def read_store(path: Path, head: bytes, options: Options) -> xr.DataArray:
    """Open a store of spectra.

    Parameters
    ----------
    path : Path
        A netCDF file or a Zarr folder.
    head : bytes
        The first bytes of a file.
    options : Options
        With ``chunks`` the values stay on disk until they are needed (dask); without, they are loaded.

    Returns
    -------
    DataArray
        As it was stored, the spectral dimension last and increasing.

    Raises
    ------
    ReadError
        When it cannot be opened, holds no spectra, or breaks the data contract.
    """
    file = path.name
    try:
        with _opened(path, head, options.chunks) as dataset:
            spectra = _spectra(dataset, file)
            if options.chunks is None:
                _refuse_hollow(spectra, path)
                spectra = spectra.load()
            return _checked(spectra, options, Findings(file, options.checks))
    except UnmixError as error:
        if isinstance(error, ReadError):
            raise
        raise ReadError(error.message, path=file, accepted=error.accepted) from error
    except ImportError as error:
        raise ReadError(f"a package that this store needs is not installed ({error})", path=file,
                        accepted="install unmix with its extra 'scale'") from error  # fmt: skip
    # A damaged store fails anywhere in three libraries, with any kind of error
    except Exception as error:
        raise ReadError(f"the store cannot be opened ({type(error).__name__}: {str(error)[:120]})",
                        path=file) from error  # fmt: skip


@contextmanager
def _opened(path: Path, head: bytes, chunks: Any) -> Iterator[xr.Dataset]:
    """A dataset that is closed again unless it is read in chunks."""
    kind: dict[str, Any] = {"engine": "h5netcdf"}
    if path.is_dir():
        kind = {"engine": "zarr", "consolidated": False}
    elif head.startswith(b"CDF"):
        kind = {"engine": "scipy"}
    else:
        # h5netcdf prints a traceback of its own when a file in which it could not read this is cleared away
        with h5py.File(path, "r") as file:
            file.attrs.get("_nc3_strict")
    dataset = xr.open_dataset(path, chunks=chunks, **kind)
    keep = False
    try:
        yield dataset
        keep = chunks is not None
    finally:
        if not keep:
            dataset.close()


def _spectra(dataset: xr.Dataset, file: str) -> xr.DataArray:
    names = [str(name) for name, variable in dataset.data_vars.items()
             if any(dim in SPECTRAL_UNITS for dim in variable.dims)]  # fmt: skip
    if _NAME in names:
        return dataset[_NAME]
    if len(names) == 1:
        return dataset[names[0]]
    what = f"several variables that run along a spectral axis: {listed(names)}" if names else "no spectra"
    raise ReadError(f"the store holds {what}", path=file,
                    accepted=f"one variable runs along one of {', '.join(SPECTRAL_UNITS)}")  # fmt: skip


def _refuse_hollow(spectra: xr.DataArray, path: Path) -> None:
    """A few bytes can claim endless numbers that were never written."""
    size = sum(part.stat().st_size for part in path.rglob("*") if part.is_file()) if path.is_dir() else (
        path.stat().st_size
    )  # fmt: skip
    if spectra.nbytes > _ALWAYS + _LARGEST_EXPANSION * size:
        raise ReadError(f"the store claims {spectra.nbytes:.3g} bytes of numbers in {size} bytes", path=path.name)


def _checked(spectra: xr.DataArray, options: Options, findings: Findings) -> xr.DataArray:
    dim = next(str(dim) for dim in spectra.dims if dim in SPECTRAL_UNITS)
    attrs = dict(spectra.attrs)
    written = str(attrs.pop("quantity", ""))
    units = spectra[dim].attrs.get("units") if dim in spectra.coords else None
    if units is not None and units != SPECTRAL_UNITS[dim]:
        unit = axis_unit(str(units))
        spectra = spectra.assign_coords({dim: (dim, unit.convert(np.asarray(spectra[dim].values)))})
    # The quantity may be text that is not understood: the solvers judge it, not the reader
    spectra = check_spectra(spectra.drop_attrs(deep=False), name="the store")
    if options.quantity is not None or written not in QUANTITIES:
        unit_found, written = ordinate_of(written, options, findings)
        if unit_found is None and not written:
            raise ReadError("what the numbers are is not stated", path=findings.file,
                            accepted="give it as quantity=, such as quantity='absorbance'")  # fmt: skip
        if unit_found is not None:
            spectra, written = spectra.copy(data=unit_found.convert(spectra.data)), unit_found.quantity
            if unit_found.per:
                attrs["per"] = unit_found.per
    if options.per is not None:
        attrs["per"] = options.per
    return spectra.rename(None).assign_attrs({**attrs, "quantity": written})


def write_store(spectra: xr.DataArray, path: Path, target: str) -> None:
    """Write spectra as netCDF or Zarr.

    Parameters
    ----------
    spectra : DataArray
        Checked spectra of any shape.
    path : Path
        Where to write; nothing stands there.
    target : {'.nc', '.zarr'}
        Which.

    Raises
    ------
    WriteError
        When a package is missing, or an attribute or coordinate cannot be stored.
    """
    dataset = spectra.rename(_NAME).to_dataset().assign_attrs(unmix_spectra=_FORMAT)
    try:
        if target == ".zarr":
            # Version 2 of the format has a settled way to keep texts, version 3 has none yet
            dataset.to_zarr(path, mode="w", consolidated=False, zarr_format=2)
        else:
            dataset.to_netcdf(path, engine="h5netcdf")
    except ImportError as error:
        raise WriteError(f"a package that this format needs is not installed ({error})", where=str(path),
                         accepted="install unmix with its extra 'scale'") from error  # fmt: skip
    except (TypeError, ValueError) as error:
        raise WriteError(f"an attribute or coordinate cannot be stored ({str(error)[:200]})",
                         accepted="keep texts, numbers and lists of numbers in them") from error  # fmt: skip


def digest_of(path: Path) -> str:
    """SHA-256 of a file, or of the names and digests of all files in a folder."""
    if path.is_file():
        return digest(path)
    whole = hashlib.sha256()
    for part in sorted(path.rglob("*")):
        if part.is_file():
            whole.update(f"{part.relative_to(path).as_posix()} {digest(part)}\n".encode())
    return whole.hexdigest()


def as_found(spectra: xr.DataArray, file: str) -> Found:
    """Stored spectra as a reader's answer, so that they can be put together with those of other files.

    Raises
    ------
    ReadError
        For an image or another array with more than one leading dimension.
    """
    if spectra.ndim != 2:
        raise ReadError(f"the store has the dimensions {listed(spectra.dims)}", path=file,
                        accepted="only lists of spectra can be read together with other files")  # fmt: skip
    leading, dim = map(str, spectra.dims)
    coords = {str(name): list(coord.values) for name, coord in spectra.coords.items()
              if coord.dims == (leading,) and name not in (leading, "label", "file")}  # fmt: skip
    names = spectra.coords.get("label", spectra.coords.get(leading))
    labels = [str(text) for text in names.values] if names is not None else [""] * spectra.sizes[leading]
    attrs = {name: value for name, value in spectra.attrs.items() if name not in ("notes", "refused", "source_sha256")}
    try:
        per = ordinate_unit(str(attrs.get("quantity"))).per
    except UnitError:
        per = ""
    quantity, per = str(attrs.pop("quantity", "")), str(attrs.pop("per", per))
    return Found(np.asarray(spectra[dim].values), np.asarray(spectra.values), dim, quantity, labels, file, per, coords,
                 attrs)  # fmt: skip
