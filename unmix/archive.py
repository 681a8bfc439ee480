"""Save and load calibrations and methods: versioned, checked against their digest, and without a pickle anywhere.

A calibration is one netCDF file of plain arrays and texts; a method is the TOML text that ``method`` writes.
"""

import hashlib
import json
import os
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from unmix.errors import InputError, ReadError, listed
from unmix.files import whole_file
from unmix.method import Method
from unmix.solve.calibration import Calibration

#: of the file of a calibration; a file of a later version is refused
VERSION = 1

_MARK = "unmix_calibration"
_DIGEST = "content_sha256"
_HDF5 = b"\x89HDF\r\n\x1a\n"

#: variables without which a calibration can neither predict nor be judged
_NEEDED = (
    "x_mean", "y_mean", "rotation", "loading", "y_loading", "score_variance", "score", "part_coefficient",
    "part_intercept", "part_of", "part_prediction", "reference", "q_limit", "t2_limit", "nearest_limit", "lowest",
    "highest", "property_unit", "original_axis", "verdict", "reason", "error",
)  # fmt: skip
_NEEDED_ATTRS = ("kind", "quantity", "spectral", "preparation", "limit_level", "created", "inputs")


def save(obj: Calibration | Method, path: str | os.PathLike[str], *, overwrite: bool = False) -> Path:
    """Save a calibration or a method to one file.

    Parameters
    ----------
    obj : Calibration or Method
    path : path
        A calibration becomes netCDF whatever the suffix is (``.nc`` is usual), a method TOML.
    overwrite : bool
        Whether a file that is there may be replaced.

    Returns
    -------
    Path

    Raises
    ------
    InputError
        For anything else.
    WriteError
        When the file exists and ``overwrite`` is false, or cannot be written.

    Examples
    --------
    >>> import tempfile
    >>> from unmix.prepare import StandardNormalVariate
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     load(save(Method([StandardNormalVariate()]), Path(folder) / "scatter.toml")).steps
    [StandardNormalVariate()]
    """
    if isinstance(obj, Method):
        return obj.save(path, overwrite=overwrite)
    if not isinstance(obj, Calibration):
        raise InputError(f"a {type(obj).__name__} cannot be saved",
                         accepted="give a calibration or a method; results are written with to_netcdf")  # fmt: skip
    marked = obj.data.assign_attrs({_MARK: VERSION, _DIGEST: _digest(obj.data)})
    with whole_file(path, overwrite) as beside:
        marked.to_netcdf(beside, engine="h5netcdf")
    return Path(path)


def load(path: str | os.PathLike[str]) -> Any:
    """Load what :func:`save` wrote.

    Parameters
    ----------
    path : path

    Returns
    -------
    Calibration or Method
        A calibration predicts the same values, bit for bit, as before it was saved.

    Raises
    ------
    ReadError
        When the file is missing, truncated, altered, of a later version, or not one of unmix.
    """
    place = Path(path)
    try:
        with place.open("rb") as file:
            head = file.read(len(_HDF5))
    except OSError as error:
        raise ReadError(f"could not be read ({error.strerror or error})", path=str(place)) from None
    if head != _HDF5:
        return _method(place)
    data = _read(place)
    return Calibration(data, Method.from_text(str(data.attrs["preparation"]), where=f"{place}, preparation"))


def _method(place: Path) -> Method:
    try:
        return Method.from_file(place)
    except ReadError as error:
        if place.suffix.lower() in (".toml", ".txt"):
            raise
        raise ReadError("is neither a calibration (netCDF) nor a method (TOML)", path=str(place),
                        accepted="give a file that unmix.save wrote") from error  # fmt: skip


def _read(place: Path) -> xr.Dataset:
    try:
        with xr.open_dataset(place, engine="h5netcdf") as opened:
            data = opened.load()
    except Exception as error:  # a damaged file fails in ways of its own in h5py, h5netcdf and xarray
        raise ReadError(f"is damaged or cut short ({type(error).__name__} when it was opened)", path=str(place),
                        accepted="take it from where it was copied from") from error  # fmt: skip
    version = data.attrs.get(_MARK)
    if version is None:
        raise ReadError("is a netCDF file but no calibration of unmix", path=str(place),
                        accepted="give a file that unmix.save wrote")  # fmt: skip
    if not isinstance(version, (int, np.integer)) or version > VERSION:
        raise ReadError(f"is of version {version}, and this unmix knows calibrations up to version {VERSION}",
                        path=str(place), accepted="load it with a newer unmix")  # fmt: skip
    stated = data.attrs.get(_DIGEST)
    data.attrs = {key: value for key, value in data.attrs.items() if key not in (_MARK, _DIGEST)}
    if stated != _digest(data):
        raise ReadError("was altered after it was saved: its content does not match its digest", path=str(place),
                        accepted="take it from where it was copied from")  # fmt: skip
    missing = [name for name in _NEEDED if name not in data] + [n for n in _NEEDED_ATTRS if n not in data.attrs]
    if missing:
        raise ReadError(f"lacks {listed(missing)}", path=str(place), accepted="give a file that unmix.save wrote")
    return data


def _digest(data: xr.Dataset) -> str:
    """SHA-256 over names, dimensions, values and attributes, in an order of their own."""
    found = hashlib.sha256()

    def take(*texts: str) -> None:
        for text in texts:
            found.update(f"{len(text)}:".encode() + text.encode())

    take(_attributes(data.attrs))
    for name in sorted(map(str, data.variables)):
        variable = data.variables[name]
        take(name, json.dumps([str(dim) for dim in variable.dims]), json.dumps(variable.shape))
        take(_attributes(variable.attrs))
        values = np.asarray(variable.values)
        if values.dtype.kind in "fiub":
            wide = np.dtype("<f8") if values.dtype.kind == "f" else np.dtype("<i8")
            take(str(wide))
            found.update(np.ascontiguousarray(values, dtype=wide).tobytes())
        else:
            take(*(str(text) for text in values.ravel()))
    return found.hexdigest()


def _attributes(attrs: Any) -> str:
    plain = {str(key): value.item() if isinstance(value, np.generic) else value for key, value in attrs.items()}
    return json.dumps(plain, sort_keys=True, default=str)
