"""Many files on one axis, or the reason why not: which files a source means, what became of each, and one array.

How a single file is read is the business of its reader.
"""

import glob
import json
import os
import warnings
from collections.abc import Callable, Iterable, Sequence
from pathlib import Path
from typing import Any, Literal

import numpy as np
import xarray as xr

from unmix.errors import NAMED, InputError, ReadError, UnmixWarning, listed, suggestion
from unmix.kernels import FloatArray
from unmix.kernels.resample import interpolate
from unmix.read.found import Found
from unmix.units import SPECTRAL_UNITS

#: files of a folder that are looked at; a glob or a list takes every file it names
SUFFIXES = (".jdx", ".dx", ".jcm", ".jcamp", ".csv", ".tsv", ".txt", ".asc", ".dat", ".prn", ".xlsx", ".nc", ".zarr")
#: two axes are one where they differ by less than this part of their spacing
SAME_AXIS = 1e-3

Source = str | os.PathLike[str] | Iterable[Any]
Reader = Callable[[Path], "list[Found | xr.DataArray]"]


def files_of(source: Source) -> tuple[list[Path], bool, list[str]]:
    """The files that a source means, whether it means many, and what was left alone.

    Parameters
    ----------
    source : path, glob, folder, or iterable of them
        A folder means its files with a known suffix, not those of the folders inside.

    Raises
    ------
    ReadError
        When nothing is there.
    """
    if not isinstance(source, str | os.PathLike):
        if not isinstance(source, Iterable):
            raise InputError(f"the source is {source!r}", accepted="give a path, a pattern, a folder or a list of them")
        paths: list[Path] = []
        notes: list[str] = []
        for part in source:
            more, _, left = files_of(part)
            paths += more
            notes += left
        if not paths:
            raise ReadError("the list of files is empty")
        return list(dict.fromkeys(paths)), True, notes
    path = Path(source)
    if path.is_dir() and path.suffix != ".zarr":
        return _of_folder(path)
    if path.exists():
        return [path], False, []
    if glob.has_magic(str(source)):
        matches = sorted(Path(name) for name in glob.glob(str(source), recursive=True))
        matches = [match for match in matches if match.is_file() or match.suffix == ".zarr"]
        if not matches:
            raise ReadError("no file matches", path=str(source))
        return matches, True, []
    near = [entry.name for entry in path.parent.iterdir()] if path.parent.is_dir() else []
    raise ReadError(f"there is no such file{suggestion(path.name, near)}", path=str(source))


def _of_folder(folder: Path) -> tuple[list[Path], bool, list[str]]:
    entries = sorted(entry for entry in folder.iterdir() if not entry.name.startswith("."))
    paths = [entry for entry in entries if entry.suffix.lower() in SUFFIXES
             and (entry.is_file() or entry.suffix == ".zarr")]  # fmt: skip
    if not paths:
        raise ReadError("the folder holds no file with spectra", path=str(folder),
                        accepted=f"the suffixes looked for are {', '.join(SUFFIXES)}")  # fmt: skip
    taken = set(paths)
    others = [entry.name for entry in entries if entry not in taken and entry.is_file()]
    return paths, True, [f"left alone in the folder {folder.name}: {listed(others)}"] if others else []


def read_all(
    paths: Sequence[Path], many: bool, reader: Reader
) -> tuple[list[tuple[Path, list[Found | xr.DataArray]]], dict[str, str]]:
    """Read file after file; where many were asked for, one that fails does not stop the rest.

    Returns
    -------
    read : list of (Path, list)
        What each readable file holds.
    refused : dict
        File name to reason.

    Raises
    ------
    ReadError
        When a single file fails, or all of many do.
    """
    read: list[tuple[Path, list[Found | xr.DataArray]]] = []
    refused: dict[str, str] = {}
    for path in paths:
        try:
            read.append((path, reader(path)))
        except ReadError as error:
            # One bad file of one is no list of reasons
            if not many or len(paths) == 1:
                raise
            refused[unique_name(path, refused)] = reason_of(error, path)
    if not read:
        reasons = "; ".join(f"{name}: {reason}" for name, reason in list(refused.items())[:NAMED])
        more = f"; and {len(refused) - NAMED} more" if len(refused) > NAMED else ""
        raise ReadError(f"none of the {len(refused)} files could be read ({reasons}{more})")
    return read, refused


def reason_of(error: ReadError, path: Path) -> str:
    """The sentence of an error without the name of the file in front."""
    return str(error).removeprefix(f"{path.name}: ").removeprefix(f"{path.name}, ")


def unique_name(path: Path, taken: Iterable[str]) -> str:
    """The base name of a file, its whole path where that name is taken."""
    return path.name if path.name not in taken else str(path)


def stacked(found: Sequence[Found], axis: Literal["overlap", "same"]) -> tuple[xr.DataArray, list[str]]:
    """All spectra in one labelled array, and what had to be cut or interpolated.

    Raises
    ------
    ReadError
        When kinds of axis or quantities differ, the axes do not overlap, or ``axis='same'`` and they differ.
    """
    _require_one(found, "dim", "axis")
    _require_one(found, "quantity", "quantity")
    _require_one(found, "per", "unit amount")
    notes: list[str] = []
    first = found[0]
    if all(same_axis(first.axis, other.axis) for other in found[1:]):
        values = first.values if len(found) == 1 else np.concatenate([one.values for one in found])
        return _labelled(found, first.axis, values), notes
    if axis == "same":
        other = next(one for one in found if not same_axis(first.axis, one.axis))
        raise ReadError(f"{_range(other)} but {first.file} {_range(first, name=False)}", path=other.file,
                        accepted="axis='overlap' brings them onto one axis")  # fmt: skip
    points = _common(found)
    values = np.concatenate([one.values[:, _span(one.axis, points)] if _holds(one.axis, points)
                             else interpolate(one.axis, one.values, points) for one in found])  # fmt: skip
    unit = SPECTRAL_UNITS[first.dim]
    notes.append(
        f"the spectra stand on different axes; all were brought onto {points.size} channels from {points[0]:g} to "
        f"{points[-1]:g} {unit}, the coarsest axis within the range that they share"
    )
    cut = [f"{one.file} ({one.axis[0]:g} to {one.axis[-1]:g} {unit})" for one in found
           if one.axis[0] < points[0] or one.axis[-1] > points[-1]]  # fmt: skip
    if cut:
        notes.append(f"channels outside that range were cut from {', '.join(cut[:NAMED])}"
                     + (f" and {len(cut) - NAMED} more" if len(cut) > NAMED else ""))  # fmt: skip
    return _labelled(found, points, values), notes


def _range(one: Found, *, name: bool = True) -> str:
    text = (f"has {one.axis.size} channels from {one.axis[0]:.8g} to {one.axis[-1]:.8g} "
            f"{SPECTRAL_UNITS[one.dim]}")  # fmt: skip
    return f"the axis {text}" if name else text


def _require_one(found: Sequence[Found], attribute: str, name: str) -> None:
    groups: dict[str, list[str]] = {}
    for one in found:
        groups.setdefault(getattr(one, attribute), []).append(one.file)
    if len(groups) > 1:
        text = "; ".join(f"'{value}' in {listed(dict.fromkeys(files))}" for value, files in groups.items())
        raise ReadError(f"the files differ in {name}: {text}", accepted="read them apart")


def same_axis(one: FloatArray, other: FloatArray) -> bool:
    """Whether two axes are one, to a thousandth of their spacing."""
    if one.size != other.size:
        return False
    if one.size == 1:
        return bool(one[0] == other[0])
    return bool((np.abs(one - other) <= SAME_AXIS * np.gradient(one)).all())


def same_kind(one: Found | xr.DataArray, other: Found | xr.DataArray) -> bool:
    """Whether two items can share an array as they are."""
    if not (isinstance(one, Found) and isinstance(other, Found)):
        return False
    alike = (one.dim, one.quantity, one.per) == (other.dim, other.quantity, other.per)
    return alike and same_axis(one.axis, other.axis)


def _common(found: Sequence[Found]) -> FloatArray:
    """Positions of the coarsest axis within the range that all share."""
    low, high = max(one.axis[0] for one in found), min(one.axis[-1] for one in found)
    spacing = [(one.axis[-1] - one.axis[0]) / max(one.axis.size - 1, 1) for one in found]
    coarsest = found[int(np.argmax(spacing))].axis
    points: FloatArray = coarsest[(coarsest >= low) & (coarsest <= high)]
    if points.size < 2:
        starts, ends = max(found, key=lambda one: one.axis[0]), min(found, key=lambda one: one.axis[-1])
        unit = SPECTRAL_UNITS[starts.dim]
        raise ReadError(f"the axes do not overlap: '{ends.file}' ends at {high:g} {unit}, '{starts.file}' starts at "
                        f"{low:g} {unit}", accepted="read them apart")  # fmt: skip
    return points


def _span(axis: FloatArray, points: FloatArray) -> slice:
    start = int(np.argmin(np.abs(axis - points[0])))
    return slice(start, start + points.size)


def _holds(axis: FloatArray, points: FloatArray) -> bool:
    part = axis[_span(axis, points)]
    return part.size == points.size and same_axis(points, part)


def _labelled(found: Sequence[Found], axis: FloatArray, values: FloatArray) -> xr.DataArray:
    first = found[0]
    coords: dict[str, Any] = {
        "label": ("sample", unique_labels(found)),
        "file": ("sample", [one.file for one in found for _ in one.labels]),
        first.dim: (first.dim, axis, {"units": SPECTRAL_UNITS[first.dim]}),
    }
    for name in dict.fromkeys(name for one in found for name in one.coords):
        coords[name] = ("sample", _column(found, name))
    attrs = {**first.attrs, "quantity": first.quantity, **({"per": first.per} if first.per else {})}
    return xr.DataArray(values, dims=("sample", first.dim), coords=coords, attrs=attrs)


def _column(found: Sequence[Found], name: str) -> FloatArray | list[str]:
    """One coordinate over all spectra; NaN or an empty text where a file does not have it."""
    parts = [one.coords.get(name, [None] * len(one.labels)) for one in found]
    entries = [entry for part in parts for entry in part]
    if all(entry is None or isinstance(entry, int | float) for entry in entries):
        return np.array([np.nan if entry is None else entry for entry in entries], dtype=np.float64)
    return ["" if entry is None else str(entry) for entry in entries]


def unique_labels(found: Sequence[Found]) -> list[str]:
    """A name of its own for every spectrum: its title, else its file; the file and a number where names repeat."""
    plain = [(label.strip() or Path(one.file).stem, Path(one.file).stem) for one in found for label in one.labels]
    labels = [label for label, _ in plain]
    counted = _counts(labels)
    labels = [f"{label} ({stem})" if counted[label] > 1 and label != stem else label for label, stem in plain]
    counted = _counts(labels)
    taken = set(labels)
    seen: dict[str, int] = {}
    for i, label in enumerate(labels):
        if counted[label] < 2:
            continue
        number = seen.get(label, 0) + 1
        while f"{label} [{number}]" in taken:
            number += 1
        seen[label] = number
        labels[i] = f"{label} [{number}]"
    return labels


def _counts(labels: Iterable[str]) -> dict[str, int]:
    counts: dict[str, int] = {}
    for label in labels:
        counts[label] = counts.get(label, 0) + 1
    return counts


def with_record(
    spectra: xr.DataArray, digests: dict[str, str], notes: Sequence[str], refused: dict[str, str] | None
) -> xr.DataArray:
    """Spectra with the digests of their files, the notes and the refusals in their attributes."""
    record = {"source_sha256": json.dumps(digests), "notes": json.dumps(list(notes))}
    if refused is not None:
        record["refused"] = json.dumps(refused)
    return spectra.assign_attrs(record)


def warn_of(notes: Sequence[str], refused: dict[str, str]) -> None:
    """A warning for each of the first notes, and one for the rest; the same for files that were refused."""
    texts = [*notes, *(f"{name} was not read: {reason}" for name, reason in refused.items())]
    for text in texts[:NAMED]:
        warnings.warn(text, UnmixWarning, stacklevel=3)
    if len(texts) > NAMED:
        warnings.warn(
            f"{len(texts) - NAMED} more: see the attributes 'notes' and 'refused'", UnmixWarning, stacklevel=3
        )
