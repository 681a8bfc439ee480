"""Curves in little room: what the page needs to draw any sample when it is opened, as text.

A residual is kept with 16 bits of its own range; measured, fitted and contributions follow from it and from
the pure spectra, which stand there once. Where that would not reproduce the result, the curve itself is kept.
"""

import base64
from typing import Any

import numpy as np

from unmix.kernels import FloatArray
from unmix.report.view import Composition

#: the code of a missing value among the 16-bit ones
_MISSING = 65535
#: a curve that is kept at every n-th channel only must be met within this part of the noise
_CLOSE = 0.05

Packed = dict[str, Any]


def plain(values: FloatArray) -> Packed:
    """A curve as 32-bit numbers, base64."""
    return {"f": base64.b64encode(np.asarray(values, dtype="<f4").tobytes()).decode("ascii")}


def packed(values: FloatArray) -> Packed:
    """A curve as 16-bit steps of its own range, base64; missing values stay missing."""
    finite = np.isfinite(values)
    low = float(values[finite].min()) if finite.any() else 0.0
    span = float(values[finite].max()) - low if finite.any() else 0.0
    step = span / (_MISSING - 1) or 1.0
    codes = np.full(values.shape, _MISSING, dtype="<u2")
    codes[finite] = np.round((values[finite] - low) / step)
    return {"q": base64.b64encode(codes.tobytes()).decode("ascii"), "low": low, "step": step}


def thinned(values: FloatArray, axis: FloatArray, tolerance: float) -> Packed:
    """A smooth curve at as few channels as straight lines between them allow within the tolerance."""
    last = values.size - 1
    if np.isfinite(values).all() and last > 0:
        for stride in (last, 256, 64, 16, 4):
            at = np.unique(np.append(np.arange(0, last, stride), last))
            if np.abs(np.interp(axis, axis[at], values[at]) - values).max() <= tolerance:
                return {**plain(values[at]), "at": at.tolist()}
    return packed(values)


def shared(view: Composition) -> dict[str, Any]:
    """What all samples of one result have in common: the axis and the pure spectra."""
    found: dict[str, Any] = {
        "axis": plain(view.axis),
        "unit": view.axis_unit,
        "title": view.axis_title,
        "breaks": view.breaks(),
    }
    if "pure_signal" in view.data:
        found["pure"] = [plain(np.nan_to_num(signal)) for signal in view.signals()]
    return found


def of_sample(view: Composition, sample: int) -> dict[str, Any]:
    """The curves of one sample; see the module for what is kept and what follows from it."""
    measured, fitted, residual, baseline = (
        view.curve(name, sample) for name in ("measured", "fitted", "residual", "baseline")
    )
    inside = np.isfinite(residual)
    close = _CLOSE * float(np.std(residual[inside])) if inside.any() else 0.0
    amounts = view.table("concentration")[sample] * view.factors()[sample]
    found: dict[str, Any] = {
        "residual": packed(residual),
        "outside": packed(measured[~inside]),
        "baseline": thinned(baseline, view.axis, close),
        "amounts": [float(f"{amount:.8g}") if np.isfinite(amount) else None for amount in amounts],
    }
    follows = np.nansum(view.contributions(sample), axis=0) + baseline
    apart = np.abs(follows - fitted)[np.isfinite(fitted)]
    if not np.isfinite(fitted[~inside]).any():
        found["gaps"] = True
    # Not "greater", so that a missing baseline counts as apart
    if apart.size and not apart.max() <= max(close, 1e-9):
        found["fitted"] = plain(fitted)
    return found
