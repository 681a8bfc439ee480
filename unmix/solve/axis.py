"""Axis errors between samples and pure spectra, fitted with the amounts: what is asked for, and what becomes of it."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from unmix.errors import InputError, listed, suggestion
from unmix.kernels import FloatArray
from unmix.kernels.axisfit import PARAMETERS, WIDTH, Warp, fit_axis, reach_of

#: bounds in channel spacings where none are given
_SPACINGS = {"shift": 3.0, "stretch": 3.0, "broadening": 6.0}
#: a parameter whose standard uncertainty is above this share of its bound is not determined
_DETERMINED = 0.5
#: within this share of its range from a bound a parameter counts as being there
_AT_BOUND = 1e-3


@dataclass(frozen=True)
class AxisQuestion:
    """Which axis errors are looked for, within which bounds.

    Attributes
    ----------
    bounds : dict
        Parameter to its largest size: shift and broadening (full width at half height) in units of the axis, stretch
        relative.
    per_component : bool
        Whether each component has its own.
    """

    bounds: dict[str, float]
    per_component: bool = False


def read_axis(given: Any, axis: FloatArray, *, per_component: bool) -> AxisQuestion | None:
    """Check what is asked of the axis.

    Parameters
    ----------
    given : str, sequence of str, mapping or None
        Names of parameters, or names with bounds.
    axis : ndarray, shape (channels,)
    per_component : bool

    Returns
    -------
    AxisQuestion or None

    Raises
    ------
    InputError
        For a name that is not known or a bound that is not above zero.
    """
    if given is None:
        if per_component:
            raise InputError("axis_per_component is given without axis", accepted="say what to fit, as axis='shift'")
        return None
    spacing, half = float(np.median(np.diff(axis))) if axis.size > 1 else 1.0, 0.5 * float(np.ptp(axis)) or 1.0
    usual = {name: count * spacing / (half if name == "stretch" else 1.0) for name, count in _SPACINGS.items()}
    names = [given] if isinstance(given, str) else given
    if not isinstance(names, (Sequence, Mapping)) or not names:
        raise InputError(f"axis is {given!r}", accepted=f"give {listed(PARAMETERS)}, one or several, or with bounds")
    bounds: dict[str, float] = {}
    for name in names:
        if name not in PARAMETERS:
            raise InputError(f"axis names '{name}'{suggestion(str(name), PARAMETERS)}",
                             accepted=f"give {listed(PARAMETERS)}, one or several, or with bounds")  # fmt: skip
        size = names[name] if isinstance(names, Mapping) else usual[name]
        if isinstance(size, bool) or not isinstance(size, (int, float, np.number)) or not 0 < size < np.inf:
            raise InputError(f"the bound of the {name} is {size!r}", accepted="give a number above zero")
        bounds[name] = float(size)
    return AxisQuestion(bounds, per_component)


#: parameter to its values and standard uncertainties, shape (components,), and whether one is at its bound
Report = dict[str, tuple[FloatArray, FloatArray, bool]]


@dataclass(frozen=True)
class Moved:
    """One spectrum's pure spectra after the axis fit.

    Attributes
    ----------
    signal : ndarray, shape (channels, components)
    columns : ndarray, shape (channels, parameters)
        What the parameters can still change, as further free terms.
    weight : ndarray, shape (channels,)
        Zero also where the moved spectra reach beyond what was recorded.
    entries : list of (parameter, component or -1)
        What the columns stand for.
    theta : ndarray, shape (3, components)
    """

    signal: FloatArray
    columns: FloatArray
    weight: FloatArray
    entries: list[tuple[int, int]]
    theta: FloatArray


class AxisFitter:
    """Fits the axis of one spectrum after another.

    Parameters
    ----------
    signal : ndarray, shape (channels, components)
    axis : ndarray, shape (channels,)
    question : AxisQuestion
    """

    def __init__(self, signal: FloatArray, axis: FloatArray, question: AxisQuestion) -> None:
        self.warp = Warp(signal, axis)
        self.question = question
        half = 0.5 * float(np.ptp(axis))
        size = question.bounds
        reach = size.get("shift", 0.0) + size.get("stretch", 0.0) * half + size.get("broadening", 0.0)
        self.inside = reach_of(axis, reach)
        missing = axis[~np.isfinite(signal).all(axis=1)]
        if missing.size:
            self.inside &= np.abs(axis[:, None] - missing).min(axis=1) > reach

    def fit(self, y: FloatArray, weight: FloatArray, free: FloatArray) -> Moved | None:
        """Fit one spectrum.

        Parameters
        ----------
        y, weight : ndarray, shape (channels,)
        free : ndarray, shape (channels, terms)

        Returns
        -------
        Moved or None
            None where the data determine none of the parameters.
        """
        k = self.warp.count
        weight = np.where(self.inside, weight, 0.0)
        asked = [PARAMETERS.index(name) for name in self.question.bounds]
        entries = [(p, j) for p in asked for j in (range(k) if self.question.per_component else [-1])]
        while entries and (weight != 0).sum() > free.shape[1] + k + len(entries):
            groups = np.zeros((len(entries), 3, k), dtype=bool)
            for row, (p, j) in enumerate(entries):
                groups[row, p, j if j >= 0 else slice(None)] = True
            found = fit_axis(y, weight, free, self.warp, groups, self._bounds(entries))
            size = _uncertainty(y, found.columns, np.hstack([free, found.signal]), weight)
            limits = self._bounds(entries)[:, 1]
            poor = np.flatnonzero(~(size <= _DETERMINED * limits))
            if not poor.size:
                return Moved(found.signal, found.columns, weight, entries, found.theta)
            # the worst goes first: without it the others may be determined
            entries.pop(int(poor[np.argmax(np.nan_to_num(size[poor] / limits[poor], nan=np.inf))]))
        return None

    def nothing(self) -> Report:
        """The report on a spectrum of which nothing was determined."""
        unknown = np.full(self.warp.count, np.nan)
        return {name: (unknown, unknown, False) for name in self.question.bounds}

    def _bounds(self, entries: list[tuple[int, int]]) -> FloatArray:
        rows = []
        for p, _ in entries:
            size = self.question.bounds[PARAMETERS[p]]
            rows.append((0.0, (size / WIDTH) ** 2) if PARAMETERS[p] == "broadening" else (-size, size))
        return np.array(rows)

    def report(self, moved: Moved, step: FloatArray, size: FloatArray) -> Report:
        """Parameters with their standard uncertainties, and whether one is at its bound.

        Parameters
        ----------
        moved : Moved
        step, size : ndarray, shape (parameters,)
            Coefficients of the columns in the last fit and their standard uncertainties.

        Returns
        -------
        dict
            Parameter to values and uncertainties, shape (components,) (all alike unless per component; NaN where not
            determined), and whether a value is at its bound.
        """
        k = moved.theta.shape[1]
        told = {}
        for name, bound in self.question.bounds.items():
            p = PARAMETERS.index(name)
            value, spread, at_bound = np.full(k, np.nan), np.full(k, np.nan), False
            for row, (which, j) in enumerate(moved.entries):
                if which != p:
                    continue
                place = j if j >= 0 else slice(None)
                base = moved.theta[p, j if j >= 0 else 0]
                if name == "broadening":
                    variance = np.clip(base + step[row], 0.0, (bound / WIDTH) ** 2)
                    width = WIDTH * np.sqrt(variance)
                    value[place] = width
                    spread[place] = WIDTH * size[row] / (2.0 * np.sqrt(max(variance, size[row])))
                    at_bound |= base >= (bound / WIDTH) ** 2 * (1.0 - _AT_BOUND)
                else:
                    value[place], spread[place] = np.clip(base + step[row], -bound, bound), size[row]
                    at_bound |= abs(base) >= bound * (1.0 - _AT_BOUND)
            told[name] = (value, spread, bool(at_bound))
        return told


def _uncertainty(y: FloatArray, columns: FloatArray, others: FloatArray, weight: FloatArray) -> FloatArray:
    """Standard uncertainties of parameters for white noise of the size of the residual, other terms fitted beside."""
    a, b = columns * weight[:, None], others * weight[:, None]
    q = np.linalg.qr(b)[0]
    rest = a - q @ (q.T @ a)
    left = y * weight - q @ (q.T @ (y * weight))
    sigma = np.linalg.norm(left) / np.sqrt(max(int((weight != 0).sum()) - q.shape[1] - columns.shape[1], 1))
    # what rounding leaves of a column is nothing
    rest[:, np.linalg.norm(rest, axis=0) <= 1e-9 * np.linalg.norm(a, axis=0)] = 0.0
    length = np.linalg.norm(rest, axis=0)
    if (length == 0).any():
        return np.where(length == 0, np.inf, 0.0)
    unit = rest / length
    inverse = np.linalg.pinv(unit.T @ unit, rcond=1e-10)
    found: FloatArray = sigma * np.sqrt(np.diag(inverse)) / length
    return found
