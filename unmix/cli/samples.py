"""Files to answers: samples that share an axis are quantified together, one that fails does not stop the others."""

import json
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr

import unmix
from unmix.cli.terminal import Tick, progress
from unmix.errors import InputError, UnmixError
from unmix.read import read_each
from unmix.spectra import as_pure, spectral_dim


@dataclass(frozen=True)
class Run:
    """What became of the samples of one call.

    ``results`` holds a Dataset for each axis, ``order`` the samples as (label, file) in the order in which they
    were given, ``refused`` what could not be answered, name to reason.
    """

    results: list[xr.Dataset]
    order: list[tuple[str, str]]
    refused: dict[str, str]


def read_pure(
    sources: Sequence[str], *, unit: str | None = None, quantity: str | None = None, per: str | None = None
) -> xr.DataArray:
    """Read the pure spectra of one call onto one axis; every file must be usable.

    Raises
    ------
    UnmixError
        When a file cannot be read, or names are missing or double.
    """
    source: Any = sources[0] if len(sources) == 1 else list(sources)
    read = unmix.read(source, unit=unit, quantity=quantity, per=per)
    refused = json.loads(read.attrs.get("refused", "{}"))
    for file, reason in refused.items():
        # A component left out would make the answer wrong, so one bad pure spectrum stops the run
        raise InputError(f"a pure spectrum could not be read: {reason}", where=str(file))
    return as_pure(read)


def quantify_files(
    sources: Sequence[str],
    pure: xr.DataArray,
    settings: dict[str, Any],
    *,
    unit: str | None = None,
    quantity: str | None = None,
) -> Run:
    """Read samples and quantify them, those that share an axis together.

    Raises
    ------
    UnmixError
        When no sample could be answered.
    """
    arrays, refused = read_each(list(sources), unit=unit, quantity=quantity)
    arrays = _told_apart(arrays)
    order = [entry for one in arrays for entry in _names(one)]
    results: list[xr.Dataset] = []
    first: UnmixError | None = None
    with progress("quantify") as tick:
        done = 0
        for group in _groups(arrays):
            together = _joined(group)
            try:
                results.append(_quantify(together, pure, settings, tick, done, len(order)))
            except UnmixError as error:
                first = first or error
                results += _one_by_one(group, pure, settings, refused)
            done += together.shape[0]
    if not results:
        reasons = list(dict.fromkeys(refused.values()))
        if first is not None and len(reasons) == 1:
            raise first
        told = "; ".join(f"{name}: {reason}" for name, reason in list(refused.items())[:5])
        raise InputError(f"none of the {len(refused)} samples could be answered ({told})")
    if refused:
        results[0] = results[0].assign_attrs(refused=json.dumps(refused))
    return Run(results, order, refused)


def _quantify(
    together: xr.DataArray, pure: xr.DataArray, settings: dict[str, Any], tick: Tick, done: int, total: int
) -> xr.Dataset:
    result: xr.Dataset = unmix.quantify(together, pure, progress=lambda n: tick(done + n, total), **settings)
    return result


def _one_by_one(
    group: Sequence[xr.DataArray], pure: xr.DataArray, settings: dict[str, Any], refused: dict[str, str]
) -> list[xr.Dataset]:
    """Answer what can be answered of a group that failed as a whole, and note why the others cannot."""
    answered: list[xr.DataArray] = []
    for array in group:
        for i in range(array.shape[0]):
            single = array[i : i + 1]
            try:
                unmix.quantify(single, pure, **settings)
                answered.append(single)
            except UnmixError as error:
                label, file = _names(single)[0]
                refused[f"{file}: {label}" if array.shape[0] > 1 and file else file or label] = str(error)
    return [unmix.quantify(_joined(answered), pure, **settings)] if answered else []


def _names(array: xr.DataArray) -> list[tuple[str, str]]:
    """Label and file of each spectrum."""
    n = array.shape[0]
    label, file = (
        [str(text) for text in array[name].values] if name in array.coords else [""] * n
        for name in ("label", "file")
    )
    return list(zip(label, file, strict=True))


def _told_apart(arrays: Sequence[xr.DataArray]) -> list[xr.DataArray]:
    """The same spectra, a label that several files use followed by its file."""
    named = [_names(array) for array in arrays]
    files_of = Counter(label for label, _ in {entry for names in named for entry in names})
    return [
        array.assign_coords(
            label=(array.dims[0], [f"{label} [{file}]" if files_of[label] > 1 else label or file
                                   for label, file in names])
        )
        for array, names in zip(arrays, named, strict=True)
    ]  # fmt: skip


def _groups(arrays: Sequence[xr.DataArray]) -> list[list[xr.DataArray]]:
    """Spectra that can stand in one array: same axis, quantity, unit amount and coordinates, path known or not."""
    groups: dict[Any, list[xr.DataArray]] = {}
    for array in arrays:
        dim = spectral_dim(array)
        has_path = "path_length" in array.coords and bool(np.isfinite(array["path_length"].values).all())
        key = (
            dim, np.asarray(array[dim].values, dtype=float).tobytes(), tuple(sorted(map(str, array.coords))),
            has_path, *(str(array.attrs.get(name)) for name in ("quantity", "per", "measured_as")),
        )  # fmt: skip
        groups.setdefault(key, []).append(array)
    return list(groups.values())


def _joined(group: Sequence[xr.DataArray]) -> xr.DataArray:
    """One array from spectra on one axis, with the records of all files."""
    if len(group) == 1:
        return group[0]
    joined = xr.concat(group, group[0].dims[0], join="exact", combine_attrs="override", coords="different",
                       compat="equals")  # fmt: skip
    digests: dict[str, str] = {}
    notes: list[str] = []
    for array in group:
        digests |= json.loads(array.attrs.get("source_sha256", "{}"))
        notes += json.loads(array.attrs.get("notes", "[]"))
    return joined.assign_attrs(
        source_sha256=json.dumps(digests), notes=json.dumps(list(dict.fromkeys(notes)))
    )
