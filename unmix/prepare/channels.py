"""Which channels count: regions in and out, saturated channels, spikes.

Nothing here changes a value that is kept, so additivity is kept. Missing channels are marked, not invented.
"""

from collections.abc import Mapping, Sequence
from typing import Any, ClassVar

import numpy as np
import xarray as xr
from scipy.ndimage import median_filter

from unmix.errors import InputError
from unmix.kernels import BoolArray, FloatArray
from unmix.prepare.accept import Rule, choice, number, regions, whole
from unmix.prepare.axis import region_mask
from unmix.prepare.step import Step
from unmix.units import SPECTRAL_UNITS

#: the steps around a spike are at most this part of its own
_ALONE = 0.5


class Regions(Step):
    """Keep the channels inside some regions, or leave out those inside others.

    Parameters
    ----------
    keep : list of (low, high), optional
        In units of the axis, bounds included. None keeps all.
    drop : list of (low, high), optional
        Left out of what is kept.

    Attributes
    ----------
    kept_ : ndarray of int
        Numbers of the channels that are kept.

    Examples
    --------
    >>> Regions(keep=[(0, 3)], drop=[(1, 2)]).fit_transform([[10.0, 11.0, 12.0, 13.0, 14.0]])
    array([[10., 13.]])
    """

    no_answer = "with nothing but missing channels in the regions"
    accepts: ClassVar[Mapping[str, Rule]] = {
        "keep": regions().or_none("all channels"),
        "drop": regions().or_none("none"),
    }

    def __init__(
        self,
        keep: Sequence[tuple[float, float]] | None = None,
        drop: Sequence[tuple[float, float]] | None = None,
    ) -> None:
        self.keep = keep
        self.drop = drop

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del rows, y
        unit = SPECTRAL_UNITS.get(self.dim_, "")
        mask = np.ones(self.axis_.size, dtype=np.bool_)
        if self.keep is not None:
            mask = region_mask(self.axis_, self.keep, unit)
        if self.drop is not None:
            mask = mask & ~region_mask(self.axis_, self.drop, unit)
        if not mask.any():
            raise InputError(f"Regions: keep={self.keep} and drop={self.drop} leave no channel",
                             accepted="drop less")  # fmt: skip
        self.kept_ = np.flatnonzero(mask)
        self.axis_out_ = self.axis_[self.kept_]

    def _apply(self, rows: FloatArray) -> FloatArray:
        return rows[:, self.kept_]


class MaskSaturated(Step):
    """Mark channels as missing where the detector saw too little light to measure.

    Pure spectra given as absorptivity pass untouched: they are not what a detector saw.

    Parameters
    ----------
    limit : float
        The highest absorbance that is trusted. At 3, 0.1% of the light is left, as much as the stray light of a
        good instrument.
    flat : int
        So many or more equal values in a row at the top of a spectrum are a detector at its end, whatever the
        limit.
    margin : int
        Channels on either side that are marked too.

    Examples
    --------
    >>> MaskSaturated(limit=3.0, margin=1).fit_transform([[0.1, 0.5, 2.0, 3.4, 1.9, 0.3]])
    array([[0.1, 0.5, nan, nan, nan, 0.3]])
    """

    no_answer = "that are saturated everywhere"
    accepts: ClassVar[Mapping[str, Rule]] = {
        "limit": number(above=0),
        "flat": whole(least=2),
        "margin": whole(least=0),
    }

    def __init__(self, limit: float = 3.0, flat: int = 5, margin: int = 0) -> None:
        self.limit = limit
        self.flat = flat
        self.margin = margin

    def _through(self, X: Any, work: Any, *, mark: bool = True) -> Any:
        if isinstance(X, xr.DataArray) and X.attrs.get("quantity") == "absorptivity":
            return super()._through(X, _untouched, mark=mark)
        return super()._through(X, work, mark=mark)

    def _apply(self, rows: FloatArray) -> FloatArray:
        top = np.nanmax(np.where(np.isfinite(rows), rows, -np.inf), axis=1, keepdims=True)
        masked = _long_runs(rows == top, self.flat) | (rows > self.limit)
        return np.where(_widened(masked, self.margin), np.nan, rows)


class SpikeRemoval(Step):
    """Mark as missing, or bridge, the few channels of a spike that no band could be as narrow as.

    A spike leaves the spectrum by one step and comes back by another within ``width`` channels, both out of
    proportion to the noise and at least twice as large as the steps before and after, which those up the side of
    a band are not. Spikes in the first and last two
    channels are not seen.

    Parameters
    ----------
    threshold : float
        How many times the robust standard deviation of the steps a step must exceed.
    width : int
        Channels of the widest spike.
    fill : {'missing', 'interpolate'}
        Mark the channels as missing, or put a straight line between their neighbours.

    References
    ----------
    After Whitaker and Hayes, Chemom. Intell. Lab. Syst. 179 (2018) 82: modified z scores of the differences.

    Examples
    --------
    >>> spectrum = np.sin(np.arange(50) / 8)
    >>> spectrum[20] += 5
    >>> np.flatnonzero(np.isnan(SpikeRemoval().fit_transform([spectrum])[0]))
    array([20])
    """

    accepts: ClassVar[Mapping[str, Rule]] = {
        "threshold": number(above=0),
        "width": whole(least=1),
        "fill": choice("missing", "interpolate"),
    }

    def __init__(self, threshold: float = 8.0, width: int = 3, fill: str = "missing") -> None:
        self.threshold = threshold
        self.width = width
        self.fill = fill

    def _apply(self, rows: FloatArray) -> FloatArray:
        if rows.shape[1] < 2 * self.width + 4:
            return rows
        spikes = self._spikes(rows)
        answer = np.where(spikes, np.nan, rows)
        if self.fill == "interpolate":
            for row in np.flatnonzero(spikes.any(axis=1)):
                known = np.isfinite(answer[row])
                hit = spikes[row]
                answer[row, hit] = np.interp(self.axis_[hit], self.axis_[known], answer[row, known])
        return answer

    def _spikes(self, rows: FloatArray) -> BoolArray:
        step = np.diff(rows, axis=1) / np.diff(self.axis_)
        missing = np.isnan(step)
        step = np.where(missing, 0.0, step)
        step -= median_filter(step, size=(1, 4 * self.width + 3), mode="nearest")
        spread = 1.4826 * np.median(np.abs(step), axis=1, keepdims=True)
        # a spectrum without noise has no scale of its own: then rounding is the scale
        spread = np.maximum(spread, 1e-12 * np.abs(np.nan_to_num(rows)).max(axis=1, keepdims=True))
        size = np.where(missing, 0.0, np.abs(step))
        steep = np.where(size > self.threshold * spread, np.sign(step), 0.0)
        spikes = np.zeros(rows.shape, dtype=np.bool_)
        for width in range(1, self.width + 1):
            leave, back = slice(1, -width - 1), slice(width + 1, -1)
            around = np.maximum(size[:, : -width - 2], size[:, width + 2 :])
            alone = around <= _ALONE * np.minimum(size[:, leave], size[:, back])
            hit = alone & (steep[:, leave] != 0) & (steep[:, back] == -steep[:, leave])
            for channel in range(width):
                spikes[:, 2 + channel : 2 + channel + hit.shape[1]] |= hit
        return spikes & np.isfinite(rows)


def _untouched(rows: FloatArray) -> FloatArray:
    return rows


def _long_runs(marked: BoolArray, length: int) -> BoolArray:
    """Marks that stand in a run of at least ``length`` along the row."""
    channels = marked.shape[1]
    if channels < length:
        return np.zeros_like(marked)
    windows = np.lib.stride_tricks.sliding_window_view(marked, length, axis=1).all(axis=-1)
    runs = np.zeros_like(marked)
    for shift in range(length):
        runs[:, shift : shift + windows.shape[1]] |= windows
    return runs


def _widened(marked: BoolArray, margin: int) -> BoolArray:
    wide = marked.copy()
    for shift in range(1, margin + 1):
        wide[:, shift:] |= marked[:, :-shift]
        wide[:, :-shift] |= marked[:, shift:]
    return wide
