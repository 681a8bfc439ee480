"""Spectra to JCAMP-DX 4.24: one block a spectrum, several in a LINK file, uneven axes as pairs.

AFFN keeps every digit; DIFDUP packs whole multiples of YFACTOR, which is the resolution that the file states.
"""

from collections.abc import Iterator
from importlib.metadata import version

import numpy as np
import xarray as xr

from unmix.errors import InputError
from unmix.kernels import FloatArray
from unmix.ordinate_units import ordinate_text
from unmix.read.pack import pack
from unmix.spectra import labels_of, spectral_dim

#: the longest line of a data table
_WIDTH = 80
#: part of a step by which an axis may leave even spacing and still be written as even
_EVEN = 1e-6
#: ordinates are kept within 32 bits, as most readers hold them
_LARGEST = 2**31 - 1

_X_UNITS = {"wavenumber": "1/CM", "wavelength": "NANOMETERS", "raman_shift": "1/CM"}


def jcamp_lines(spectra: xr.DataArray, form: str) -> Iterator[str]:
    """The lines of a JCAMP-DX file.

    Parameters
    ----------
    spectra : DataArray, dims (sample, spectral)
        Checked spectra.
    form : {'AFFN', 'DIFDUP'}
        How ordinates are written.

    Yields
    ------
    str
        Lines without their ends.
    """
    dim = spectral_dim(spectra)
    axis = np.asarray(spectra[dim].values, dtype=np.float64)
    labels = labels_of(spectra)
    paths = np.asarray(spectra["path_length"].values, dtype=np.float64) if "path_length" in spectra.coords else None
    many = len(labels) > 1
    if many:
        yield from (f"##TITLE= {len(labels)} spectra", "##JCAMP-DX= 4.24", "##DATA TYPE= LINK",
                    f"##BLOCKS= {len(labels)}")  # fmt: skip
    for i, (label, row) in enumerate(zip(labels, spectra.values, strict=True)):
        path = float(paths.flat[i]) if paths is not None and paths.size > i else np.nan
        yield from _block(label, axis, row, dim, spectra.attrs, path, form)
    if many:
        yield "##END="


def _block(
    label: str, axis: FloatArray, row: FloatArray, dim: str, attrs: dict[str, object], path: float, form: str
) -> Iterator[str]:
    even = np.linspace(axis[0], axis[-1], axis.size)
    step = float(axis[-1] - axis[0]) / max(axis.size - 1, 1)
    is_even = axis.size > 1 and bool((np.abs(axis - even) <= _EVEN * step).all())
    factor = _y_factor(row, label) if form == "DIFDUP" and is_even else 1.0
    known = row[~np.isnan(row)]
    yield f"##TITLE= {' '.join(label.replace('$$', '$ $').split()) or 'untitled'}"
    yield "##JCAMP-DX= 4.24"
    yield f"##DATA TYPE= {_data_type(dim, axis)}"
    yield f"##ORIGIN= unmix {version('unmix')}"
    yield "##OWNER= not stated"
    if np.isfinite(path):
        yield f"##PATHLENGTH= {path!r} CM"
    yield f"##XUNITS= {_X_UNITS[dim]}"
    yield f"##YUNITS= {ordinate_text(str(attrs.get('quantity', '')), str(attrs.get('per', '')))}"
    yield "##XFACTOR= 1.0"
    yield f"##YFACTOR= {factor!r}".upper()
    yield f"##FIRSTX= {float(axis[0])!r}".upper()
    yield f"##LASTX= {float(axis[-1])!r}".upper()
    if is_even:
        yield f"##DELTAX= {step!r}".upper()
    yield f"##NPOINTS= {axis.size}"
    if not np.isnan(row[0]):
        yield f"##FIRSTY= {_text(row[0])}"
    if known.size:
        yield f"##MAXY= {_text(known.max())}"
        yield f"##MINY= {_text(known.min())}"
    if not is_even:
        yield "##XYPOINTS= (XY..XY)"
        yield from (f"{_text(x)}, {_text(y)}" for x, y in zip(axis, row, strict=True))
    else:
        yield "##XYDATA= (X++(Y..Y))"
        places = _places(step)
        names = [f"{x:.{places}f}" for x in axis]
        yield from pack(names, row / factor, width=_WIDTH) if form == "DIFDUP" else _affn(names, row)
    yield "##END="


def _affn(names: list[str], row: FloatArray) -> Iterator[str]:
    line = ""
    for name, y in zip(names, row, strict=True):
        word = _text(y)
        if line and len(line) + 1 + len(word) > _WIDTH:
            yield line
            line = ""
        line = f"{line} {word}" if line else f"{name} {word}"
    yield line


def _text(number: float) -> str:
    """A number with all its digits; ``?`` where it is missing."""
    if np.isnan(number):
        return "?"
    return (f"{number:.9g}" if isinstance(number, np.float32) else repr(float(number))).upper()


def _places(step: float) -> int:
    """Decimals that tell neighbouring abscissae apart a thousand times over."""
    return int(min(max(3 - np.floor(np.log10(abs(step))), 0), 12))


def _y_factor(row: FloatArray, label: str) -> float:
    """The power of ten that the ordinates are written in: the coarsest that loses nothing, else the finest in 32 bits.

    Raises
    ------
    InputError
        When an ordinate is infinite.
    """
    known = row[~np.isnan(row)].astype(np.float64)
    top = float(np.abs(known).max(initial=0.0))
    if not np.isfinite(top):
        raise InputError(f"spectrum '{label}' holds an infinite value", accepted="mark what is missing with NaN")
    if top == 0:
        return 1.0
    finest = int(np.ceil(np.log10(top / _LARGEST)))
    for power in range(int(np.floor(np.log10(top))), finest, -1):
        factor = float(f"1e{power}")
        if (np.abs(known - np.rint(known / factor) * factor) <= 4e-16 * top).all():
            return factor
    return float(f"1e{finest}")


def _data_type(dim: str, axis: FloatArray) -> str:
    if dim == "raman_shift":
        return "RAMAN SPECTRUM"
    if dim == "wavenumber":
        return "INFRARED SPECTRUM" if axis[0] < 4000 else "NEAR INFRARED SPECTRUM"
    return "UV/VIS SPECTRUM" if axis[0] < 780 else "NEAR INFRARED SPECTRUM"
