"""What ``inspect`` says of files, as plain data: one record a file, one entry a spectrum, and what they share."""

import math
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from unmix.cli.terminal import progress
from unmix.diagnose.quality import quality
from unmix.errors import ReadError
from unmix.kernels import FloatArray
from unmix.read import read_file
from unmix.read.collect import files_of, reason_of, same_axis, stacked, unique_name
from unmix.read.found import Found, Options
from unmix.spectra import spectral_dim
from unmix.units import SPECTRAL_UNITS

#: an axis counts as even where its spacing varies by less than this part
_EVEN = 1e-3
#: facts of a reader that stand under their own names in a record
_FACTS = (
    "packing",
    "blocks",
    "layout",
    "cells",
    "direction",
    "data_type",
    "axis_unit_written",
    "ordinate_unit_written",
)
_COUNTS = ("missing", "saturated", "negative", "impossible")
_NUMBERS = ("noise", "plateau", "carbon_dioxide", "water_vapour")


def examine(sources: Sequence[str], options: Options) -> dict[str, Any]:
    """Read every file and say what is in it.

    Parameters
    ----------
    sources : sequence of str
        Files, folders and patterns.
    options : Options
        What the caller says about them.

    Returns
    -------
    dict
        ``files`` (one record for every axis of every readable file), ``refused`` (file and reason), ``remarks`` on the
        whole set, and ``shared_axis``, whether all readable spectra stand on one. It holds no NaN, so it is JSON.
    """
    paths, _, remarks = files_of(list(sources))
    files: list[dict[str, Any]] = []
    refused: dict[str, str] = {}
    axes: list[tuple[str, FloatArray]] = []
    with progress("inspect") as tick:
        for done, path in enumerate(paths):
            tick(done, len(paths))
            try:
                for item in read_file(path, options):
                    spectra, facts, notes = _opened(item)
                    files.append(_record(path, spectra, facts, notes))
                    dim = spectral_dim(spectra)
                    axes.append((dim, np.asarray(spectra[dim].values)))
            except ReadError as error:
                refused[unique_name(path, refused)] = reason_of(error, path)
    shared = all(dim == axes[0][0] and same_axis(axes[0][1], axis) for dim, axis in axes[1:])
    return {
        "kind": "inspect",
        "shared_axis": bool(shared) if axes else None,
        "files": files,
        "refused": [{"file": name, "reason": reason} for name, reason in refused.items()],
        "remarks": remarks,
    }


def _opened(item: Found | xr.DataArray) -> tuple[xr.DataArray, dict[str, str], list[str]]:
    if isinstance(item, xr.DataArray):
        return item, {"format": "store"}, []
    return stacked([item], "same")[0], item.facts, item.notes


def _record(path: Path, spectra: xr.DataArray, facts: dict[str, str], notes: list[str]) -> dict[str, Any]:
    dim = spectral_dim(spectra)
    axis = np.asarray(spectra[dim].values, dtype=np.float64)
    step = np.diff(axis)
    found = quality(spectra)
    entries = []
    for i in range(found.sizes["spectrum"]):
        one = found.isel(spectrum=i)
        entries.append(
            {
                "label": str(one["label"].item()),
                **{name: int(one[name].item()) for name in _COUNTS},
                **{name: _plain(one[name].item()) for name in _NUMBERS},
                "remark": str(one["remark"].item()),
            }
        )
    return {
        "file": path.name,
        "format": facts.get("format", ""),
        **{name: facts[name] for name in _FACTS if facts.get(name)},
        "axis": {
            "dimension": dim,
            "unit": SPECTRAL_UNITS[dim],
            "first": float(axis[0]),
            "last": float(axis[-1]),
            "channels": int(axis.size),
            "spacing": float(np.median(step)) if step.size else None,
            "even": bool(np.ptp(step) <= _EVEN * np.median(step)) if step.size else None,
        },
        "quantity": str(spectra.attrs.get("quantity", "")),
        "per": str(spectra.attrs.get("per", "")),
        "spectra": entries,
        "notes": notes,
    }


def _plain(number: float) -> float | None:
    return float(number) if math.isfinite(number) else None
