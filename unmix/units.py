"""Axis, ordinate, length and amount units: what a text means, and the conversion to the data contract.

Nothing here guesses: a text that is not understood is an error that quotes it and lists what is accepted.
"""

import re
from dataclasses import dataclass
from typing import Any

import numpy as np

from unmix.errors import UnitError, suggestion
from unmix.kernels import FloatArray

#: spectral dimension -> its unit, the data contract's first table
SPECTRAL_UNITS = {"wavenumber": "cm-1", "wavelength": "nm", "raman_shift": "cm-1"}

#: what the numbers of a spectrum can be
QUANTITIES = ("absorbance", "transmittance", "reflectance", "absorptivity", "intensity")

#: a word for an axis on a figure or in a table
AXIS_TITLES = {"wavenumber": "Wavenumber", "wavelength": "Wavelength", "raman_shift": "Raman shift"}


def plain(text: str) -> str:
    """Lower case, powers and micro signs as ASCII, one blank between words."""
    table = str.maketrans({"µ": "u", "μ": "u", "⁻": "-", "¹": "1", "\u2212": "-", "\u2013": "-", "·": " ", "^": ""})
    return re.sub(r"\s+", " ", text.translate(table).strip().lower())


@dataclass(frozen=True)
class AxisUnit:
    """What an axis unit means: the spectral dimension and the factor to the contract's unit."""

    dim: str
    factor: float = 1.0

    @property
    def unit(self) -> str:
        """The unit of the contract for this dimension."""
        return SPECTRAL_UNITS[self.dim]

    def convert(self, axis: FloatArray) -> FloatArray:
        """Axis values in the contract's unit."""
        return axis * self.factor


_WAVENUMBER = AxisUnit("wavenumber")
_AXIS = {
    **dict.fromkeys(
        ["cm-1", "1/cm", "/cm", "cm^-1", "cm -1", "per cm", "wavenumber", "wavenumbers", "kayser", "kaysers",
         "reciprocal centimeters", "reciprocal centimetres", "inverse centimeters", "inverse centimetres"],
        _WAVENUMBER,
    ),
    **dict.fromkeys(["m-1", "1/m"], AxisUnit("wavenumber", 0.01)),
    **dict.fromkeys(
        ["nm", "nanometer", "nanometers", "nanometre", "nanometres", "wavelength nm"], AxisUnit("wavelength")
    ),
    **dict.fromkeys(
        ["um", "micron", "microns", "micrometer", "micrometers", "micrometre", "micrometres"],
        AxisUnit("wavelength", 1000.0),
    ),
    **dict.fromkeys(["angstrom", "angstroms", "å"], AxisUnit("wavelength", 0.1)),
    **dict.fromkeys(["m", "meter", "metre", "meters", "metres"], AxisUnit("wavelength", 1e9)),
    **dict.fromkeys(
        ["raman shift", "raman shift (cm-1)", "raman shift cm-1", "raman shift / cm-1", "raman shift (1/cm)",
         "raman_shift", "delta cm-1", "rel. 1/cm", "rel 1/cm"],
        AxisUnit("raman_shift"),
    ),
}  # fmt: skip

#: spellings shown when an axis unit is not understood
AXIS_ACCEPTED = "give cm-1, nm, um or 'Raman shift'"


def axis_unit(text: str) -> AxisUnit:
    """Read an axis unit such as ``1/CM``, ``NANOMETERS`` or ``Wavelength (nm)``.

    Parameters
    ----------
    text : str
        The unit, alone or in parentheses or after a slash behind the name of the axis.

    Returns
    -------
    AxisUnit

    Raises
    ------
    UnitError
        When the text is not understood.

    Examples
    --------
    >>> axis_unit("Wavelength (nm)").dim
    'wavelength'
    >>> axis_unit("MICROMETERS").factor
    1000.0
    """
    key = plain(text)
    found = _AXIS.get(key)
    if found is None and (inner := re.fullmatch(r"(.+?)\s*[(\[/,]\s*(.+?)\s*[)\]]?", key)):
        name, unit = inner.groups()
        found = _AXIS.get(unit)
        if found is not None and name.startswith("raman") and found.dim == "wavenumber":
            found = AxisUnit("raman_shift", found.factor)
    if found is None:
        raise UnitError(f"axis unit '{text}' is not understood{suggestion(key, list(_AXIS))}",
                        accepted=AXIS_ACCEPTED)  # fmt: skip
    return found


def to_absorbance(values: FloatArray) -> tuple[FloatArray, int]:
    """Absorbance from transmittance as a fraction, A = -log10 T.

    Parameters
    ----------
    values : ndarray
        Transmittance, 1 for a clear sample.

    Returns
    -------
    absorbance : ndarray
        NaN wherever the transmittance is zero, negative or missing.
    n_lost : int
        How many channels had a transmittance at or below zero.
    """
    lost = values <= 0
    with np.errstate(divide="ignore", invalid="ignore"):
        absorbance = np.where(lost, np.nan, -np.log10(np.where(lost, 1.0, values)))
    return absorbance.astype(values.dtype, copy=False), int(np.count_nonzero(lost))


_LENGTHS = {"cm": 1.0, "mm": 0.1, "um": 1e-4, "micron": 1e-4, "microns": 1e-4, "nm": 1e-7, "m": 100.0,
            "dm": 10.0, "km": 1e5, "in": 2.54, "inch": 2.54}  # fmt: skip


def length_in_cm(length: Any, *, name: str = "path_length") -> float:
    """Read a length such as ``1``, ``"25 um"`` or ``"10 m"``; a bare number is in centimetres.

    Raises
    ------
    UnitError
        When the length is not a positive, finite number or its unit is unknown.
    """
    accepted = "give a positive number of centimetres, or a text such as '25 um', '2 mm', '10 m'"
    match = re.fullmatch(r"\s*([-+0-9.eE]+)\s*([a-zA-Zµμ]*)\s*", str(length))
    try:
        number = float(match.group(1)) if match else float("nan")
    except ValueError:
        number = float("nan")
    unit = plain(match.group(2)) if match and match.group(2) else "cm"
    if unit not in _LENGTHS or not np.isfinite(number):
        raise UnitError(f"{name} '{length}' is not understood", accepted=accepted)
    if number <= 0:
        raise UnitError(f"{name} is {length}, but a path is longer than zero", accepted=accepted)
    return number * _LENGTHS[unit]


def split_per(per: str) -> tuple[str, str | None]:
    """The amount unit and, where the text holds one, the path unit of a unit amount.

    ``umol/mol m`` is one micromole per mole over one metre of path; ``g/L`` names no path.

    Examples
    --------
    >>> split_per("umol/mol m")
    ('umol/mol', 'm')
    >>> split_per("g/L")
    ('g/L', None)
    """
    match = re.fullmatch(r"\s*(.+?)[\s*·]+(m|cm|mm|um|km)\s*", per)
    return (match.group(1).strip(), match.group(2)) if match else (per.strip(), None)


def path_factor(unit: str | None) -> float:
    """How many of the path units one centimetre holds; the unit defaults to centimetres."""
    return 1.0 / _LENGTHS[unit or "cm"]


def axis_title(dim: str) -> str:
    """``Wavenumber (cm-1)`` and the like, for figures and tables."""
    return f"{AXIS_TITLES.get(dim, dim)} ({SPECTRAL_UNITS.get(dim, '')})"


def quantity_unit(quantity: str, per: str = "") -> str:
    """The unit that stands beside a quantity: nothing for the dimensionless ones."""
    if quantity == "absorptivity" and per:
        amount, path = split_per(per)
        return f"per {amount} per {path or 'cm'}"
    return {"transmittance": "fraction", "reflectance": "fraction", "intensity": "arbitrary"}.get(quantity, "1")
