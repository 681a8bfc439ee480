"""Files to calibrations, and files through a calibration to predictions."""

import json
import math
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

import unmix
from unmix.cli.samples import read_method
from unmix.cli.terminal import progress
from unmix.errors import InputError, UnmixError
from unmix.read import read_each
from unmix.read.references import read_references
from unmix.spectra import labels_of


def calibrate_files(
    sources: Sequence[str],
    values: Path,
    properties: Sequence[str],
    settings: dict[str, Any],
    *,
    groups: str | None = None,
    test: Sequence[str] = (),
    method: Path | None = None,
    unit: str | None = None,
    quantity: str | None = None,
) -> tuple[Any, dict[str, str]]:
    """Read spectra and reference values, and calibrate.

    Parameters
    ----------
    sources : sequence of str
        Files, folders and patterns.
    values : Path
        Table of reference values.
    properties : sequence of str
        Columns to calibrate.
    settings : dict
        Options of ``unmix.calibrate``.
    groups : str, optional
        Column of the table whose equal entries are never parted.
    test : sequence of str
        Spectra of a separate test set, whose values stand in the same table.
    method : Path, optional
        A method file: its steps are the preparation.
    unit, quantity : str, optional
        What the spectra's files leave unsaid.

    Returns
    -------
    calibration : Calibration
    refused : dict
        File to reason.

    Raises
    ------
    UnmixError
        When a table, an option or all spectra cannot be used.
    """
    table = read_references(values, properties, groups=groups)
    spectra, refused = _read(sources, unit, quantity)
    if groups is not None:
        entries = table.attrs["groups"]
        # a spectrum without a row is named by the calibration itself
        settings = settings | {"groups": [entries.get(label, "") for label in labels_of(spectra)]}
    if test:
        others, more = _read(test, unit, quantity)
        settings, refused = settings | {"test": (others, table)}, refused | more
    preparation = read_method(method) if method is not None else None
    with progress("calibrate") as tick:
        calibration = unmix.calibrate(spectra, table, preparation=preparation, unit=table.attrs["units"], progress=tick,
                                      **settings)  # fmt: skip
    return calibration, refused


def _read(sources: Sequence[str], unit: str | None, quantity: str | None) -> tuple[xr.DataArray, dict[str, str]]:
    """Spectra on one axis, and the files that could not be read."""
    source: Any = sources[0] if len(sources) == 1 else list(sources)
    found: xr.DataArray = unmix.read(source, unit=unit, quantity=quantity)
    return found, json.loads(found.attrs.get("refused", "{}"))


def predict_files(
    model: Path, sources: Sequence[str], level: float, *, unit: str | None = None, quantity: str | None = None
) -> tuple[list[xr.Dataset], dict[str, str]]:
    """Read spectra and predict them; files that do not fit the calibration do not stop the others.

    Returns
    -------
    results : list of Dataset
    refused : dict
        File or sample to reason.

    Raises
    ------
    UnmixError
        When the calibration cannot be loaded, or no spectrum could be predicted.
    """
    calibration = unmix.load(model)
    source: Any = sources[0] if len(sources) == 1 else list(sources)
    arrays, refused = read_each(source, unit=unit, quantity=quantity)
    results: list[xr.Dataset] = []
    total, done = sum(math.prod(array.shape[:-1]) for array in arrays), 0
    with progress("predict") as tick:
        for array in arrays:
            try:
                results.append(unmix.predict(calibration, array, level=level))
            except UnmixError as error:
                refused |= dict.fromkeys(_files(array), str(error))
            done += math.prod(array.shape[:-1])
            tick(done, total)
    if not results:
        raise InputError("; ".join(f"{name}: {reason}" for name, reason in list(refused.items())[:5]))
    if refused:
        results[0] = results[0].assign_attrs(refused=json.dumps(refused))
    return results, refused


def _files(array: xr.DataArray) -> list[str]:
    """The files that an array came from, or its labels where that is not known."""
    if "file" in array.coords:
        return list(dict.fromkeys(str(name) for name in np.atleast_1d(array["file"].values)))
    return labels_of(array)
