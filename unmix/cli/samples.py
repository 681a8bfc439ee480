"""Files to answers: samples that share an axis are quantified together, one that fails does not stop the others."""

import json
import math
from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from importlib import import_module
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

import unmix
from unmix.cli.terminal import Tick, progress
from unmix.errors import NAMED, InputError, UnmixError
from unmix.read import read_each
from unmix.read.amounts import read_amounts
from unmix.solve.options import check_baseline, check_level, check_noise
from unmix.spectra import as_pure, spectral_dim
from unmix.units import length_in_cm


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


def read_method(path: Path) -> Any:
    """A method from its file; scikit-learn is loaded only for this.

    Raises
    ------
    UnmixError
        When the file cannot be used.
    """
    return import_module("unmix.method").Method.from_file(path)


def known_spectra(
    pure: Sequence[str] | None,
    standards: Sequence[str] | None,
    amounts: Path | None,
    settings: dict[str, Any],
    given: dict[str, str | None],
) -> xr.DataArray | xr.Dataset:
    """Pure spectra from files, or learnt from standards with a table of amounts.

    Regions belong to what is learnt, so they are taken out of the settings then.

    Raises
    ------
    UnmixError
        When neither or both are given, or a file cannot be used.
    """
    if bool(pure) == bool(standards) or bool(standards) != bool(amounts):
        raise InputError("the pure spectra are not clear",
                         accepted="give --pure, or --standards together with --amounts")  # fmt: skip
    if pure:
        return read_pure(pure, **given)
    source: Any = list(standards or [])
    read = unmix.read(source[0] if len(source) == 1 else source, unit=given["unit"], quantity=given["quantity"])
    for file, reason in json.loads(read.attrs.get("refused", "{}")).items():
        raise InputError(f"a standard could not be read: {reason}", where=str(file))
    table = read_amounts(Path(str(amounts)))
    learnt: xr.Dataset = unmix.learn_pure(read, table, unit=given["per"], regions=settings.pop("regions", None))
    return learnt


def quantify_files(
    sources: Sequence[str],
    pure: xr.DataArray | xr.Dataset,
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
    _check(settings)
    # A single path keeps its own error; of many, the bad ones are set aside
    source: Any = sources[0] if len(sources) == 1 else list(sources)
    arrays, refused = read_each(source, unit=unit, quantity=quantity)
    arrays = _told_apart(arrays)
    order = [entry for one in arrays for entry in _names(one)]
    total = sum(math.prod(array.shape[:-1]) for array in arrays)
    results: list[xr.Dataset] = []
    with progress("quantify") as tick:
        done = 0
        for group in _groups(arrays):
            together = _joined(group)
            try:
                results.append(_quantify(together, pure, settings, tick, done, total))
            except UnmixError:
                results += _one_by_one(group, pure, settings, refused)
            done += math.prod(together.shape[:-1])
    if not results:
        raise InputError(_all_refused(refused))
    if refused:
        results[0] = results[0].assign_attrs(refused=json.dumps(refused))
    return Run(results, order, refused)


def identify_files(
    sources: Sequence[str],
    library: xr.DataArray,
    settings: dict[str, Any],
    *,
    unit: str | None = None,
    quantity: str | None = None,
) -> tuple[list[xr.Dataset], dict[str, str]]:
    """Read samples and search a library for each; files that cannot be used do not stop the others.

    Raises
    ------
    UnmixError
        When no sample could be answered.
    """
    source: Any = sources[0] if len(sources) == 1 else list(sources)
    arrays, refused = read_each(source, unit=unit, quantity=quantity)
    groups = [_joined(group) for group in _groups(_told_apart(arrays))]
    results: list[xr.Dataset] = []
    total, done = sum(math.prod(array.shape[:-1]) for array in groups), 0
    with progress("identify") as tick:
        for array in groups:
            try:
                results.append(unmix.identify(array, library, progress=_from(tick, done, total), **settings))
            except UnmixError as error:
                refused |= {label or file: str(error) for label, file in _names(array)}
            done += math.prod(array.shape[:-1])
    if not results:
        raise InputError(_all_refused(refused))
    if refused:
        results[0] = results[0].assign_attrs(refused=json.dumps(refused))
    return results, refused


def _from(tick: Tick, done: int, total: int) -> Any:
    return lambda n: tick(done + n, total)


def quantify_work(pure: xr.DataArray | xr.Dataset, settings: dict[str, Any]) -> Any:
    """What is done with every block of a store."""
    _check(settings)
    return partial(unmix.quantify, pure=pure, **settings)


def _check(settings: dict[str, Any]) -> None:
    """Refuse options that no sample could be answered with, so that no file is blamed for them."""
    check_baseline(settings.get("baseline", 1))
    check_level(settings.get("level", 0.95))
    check_noise(settings.get("noise"))
    if settings.get("path_length") is not None:
        length_in_cm(settings["path_length"], name="--path-length")


def _all_refused(refused: Mapping[str, str]) -> str:
    if len(refused) == 1:
        return "; ".join(f"{name}: {reason}" for name, reason in refused.items())
    told = "; ".join(f"{name}: {reason}" for name, reason in list(refused.items())[:NAMED])
    more = f"; and {len(refused) - NAMED} more" if len(refused) > NAMED else ""
    return f"none of the {len(refused)} samples could be answered ({told}{more})"


def _quantify(
    together: xr.DataArray, pure: xr.DataArray | xr.Dataset, settings: dict[str, Any], tick: Tick, done: int, total: int
) -> xr.Dataset:
    result: xr.Dataset = unmix.quantify(together, pure, progress=lambda n: tick(done + n, total), **settings)
    return result


def _one_by_one(
    group: Sequence[xr.DataArray], pure: xr.DataArray | xr.Dataset, settings: dict[str, Any], refused: dict[str, str]
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
                label, file = (_names(single) or [(f"{array.dims[0]} {i + 1}", "")])[0]
                refused[f"{file}: {label}" if array.shape[0] > 1 and file else file or label] = str(error)
    return [unmix.quantify(_joined(answered), pure, **settings)] if answered else []


def _names(array: xr.DataArray) -> list[tuple[str, str]]:
    """Label and file of each spectrum of a set; nothing for an image, whose spectra have places instead."""
    if array.ndim != 2:
        return []
    n = array.shape[0]
    label, file = (
        [str(text) for text in array[name].values] if name in array.coords else [""] * n
        for name in ("label", "file")
    )
    return list(zip(label, file, strict=True))


def _told_apart(arrays: Sequence[xr.DataArray]) -> list[xr.DataArray]:
    """The same spectra, a label that spectra on several axes share followed by its file."""
    uses = Counter(label for array in arrays for label, _ in _names(array))
    told = []
    for array in arrays:
        names = _names(array)
        if any(uses[label] > 1 for label, _ in names):
            labels = [f"{label} ({Path(file).stem})" if uses[label] > 1 else label for label, file in names]
            told.append(array.assign_coords(label=(array.dims[0], labels)))
        else:
            told.append(array)
    return told


def _groups(arrays: Sequence[xr.DataArray]) -> list[list[xr.DataArray]]:
    """Spectra that can stand in one array: same axis, quantity, unit amount and coordinates, path known or not."""
    groups: dict[Any, list[xr.DataArray]] = {}
    for array in arrays:
        dim = spectral_dim(array)
        axis = np.asarray(array[dim].values, dtype=float).tobytes()
        shared = tuple(str(array.attrs.get(name)) for name in ("quantity", "per", "measured_as"))
        for part, has_path in _by_path(array):
            key = (dim, axis, part.dims, tuple(sorted(map(str, part.coords))), has_path, shared)
            groups.setdefault(key, []).append(part)
    return list(groups.values())


def _by_path(array: xr.DataArray) -> list[tuple[xr.DataArray, bool]]:
    """The spectra whose path length is known, and those whose is not."""
    path = array.coords.get("path_length")
    if path is None or path.dims != array.dims[:1]:
        return [(array, path is not None)]
    known = np.isfinite(np.asarray(path.values, dtype=float))
    return [(array[mask], has) for mask, has in ((known, True), (~known, False)) if mask.any()]


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
