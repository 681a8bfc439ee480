"""Spectra on another axis and at another resolution, with nothing claimed that was not measured.

Bringing samples and pure spectra onto shared channels belongs in ``axis``; aligning shifted spectra in ``align``.
"""

from collections.abc import Mapping
from typing import Any, ClassVar

import numpy as np

from unmix.errors import AxisError, InputError
from unmix.kernels import FloatArray
from unmix.kernels.resample import broadening_weights, holes, interpolate
from unmix.kernels.stencil import weighted_sums
from unmix.prepare.accept import Rule, choice, number, spectrum
from unmix.prepare.step import Step
from unmix.units import SPECTRAL_UNITS


class Resample(Step):
    """Interpolate onto other channels, and broaden a sharper spectrum to a coarser resolution first.

    Interpolation is by local polynomials through six channels, inside the range only. Broadening is the
    convolution with the line shape of width sqrt(resolution^2 - from_resolution^2), read off at the new channels;
    those nearer to an end, or to a hole in the axis, than the line shape reaches are left out. A missing channel
    makes the channels missing that need it.

    Parameters
    ----------
    spacing : float, optional
        New channels at whole multiples of this, in units of the axis.
    axis : array_like, shape (channels,), optional
        The new channels themselves; give this or ``spacing``, or neither to keep the channels.
    resolution : float, optional
        Full width at half height of the instrument's line shape that the result is to have. None leaves the
        resolution.
    from_resolution : float
        That of the spectra as they are.
    line_shape : {'gaussian', 'triangle'}
        A triangle is the slit function of a dispersive instrument. The widths of triangles add in squares only
        nearly; the second moment of the result is right.
    through : {'absorbance', 'transmittance'}
        What the instrument broadens is light, so bands that it does not resolve lose height in absorbance: pass
        by 'transmittance' to show that. It is not linear, and additivity is lost.

    Examples
    --------
    >>> Resample(spacing=2.0).fit_transform([[0.0, 1.0, 4.0, 9.0, 16.0]])
    array([[ 0.,  4., 16.]])
    """

    lost_because = "the line shape acts on transmittance, in which contributions do not add up"
    instead = "give through='absorbance', and stay where bands are weak or resolved"
    no_answer = "with too few channels"
    # beside a missing channel the interpolation goes by other channels
    complete_only = True
    accepts: ClassVar[Mapping[str, Rule]] = {
        "spacing": number(above=0).or_none("no change"),
        "axis": spectrum().or_none("no change"),
        "resolution": number(above=0).or_none("no change"),
        "from_resolution": number(least=0),
        "line_shape": choice("gaussian", "triangle"),
        "through": choice("absorbance", "transmittance"),
    }

    def __init__(
        self,
        spacing: float | None = None,
        axis: Any = None,
        resolution: float | None = None,
        from_resolution: float = 0.0,
        line_shape: str = "gaussian",
        through: str = "absorbance",
    ) -> None:
        self.spacing = spacing
        self.axis = axis
        self.resolution = resolution
        self.from_resolution = from_resolution
        self.line_shape = line_shape
        self.through = through

    @property
    def additive(self) -> bool:
        """False where transmittance is broadened."""
        return self.resolution is None or self.through == "absorbance"

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del rows, y
        targets = self._targets()
        if self.resolution is None:
            self.axis_out_ = targets
            return
        if self.resolution <= self.from_resolution:
            raise InputError(f"Resample: resolution is {self.resolution:g}, not coarser than from_resolution "
                             f"{self.from_resolution:g}", accepted="a spectrum cannot be sharpened")  # fmt: skip
        width = float(np.sqrt(self.resolution**2 - self.from_resolution**2))
        spacing = np.diff(self.axis_)[~holes(self.axis_)].max() if self.axis_.size > 1 else np.inf
        if width < spacing:
            raise AxisError(f"Resample: the line shape to broaden with is {width:g} wide, narrower than the channel "
                            f"spacing of {spacing:g} on {self.axis_.size} feature(s)",
                            accepted="give a coarser resolution, or leave it as it is")  # fmt: skip
        reached, self._first, self._weights = broadening_weights(self.axis_, targets, width, self.line_shape)
        if not reached.any():
            raise AxisError(f"Resample: a line shape {width:g} wide reaches beyond both ends of the axis, "
                            f"{self.axis_[0]:g} to {self.axis_[-1]:g}", accepted="give a finer resolution")  # fmt: skip
        self.axis_out_ = targets[reached]

    def _targets(self) -> FloatArray:
        low, high = self.axis_[0], self.axis_[-1]
        if self.spacing is not None and self.axis is not None:
            raise InputError("Resample: both spacing and axis are given", accepted="give one of them")
        if self.spacing is not None:
            steps = np.arange(np.ceil(low / self.spacing - 1e-9), np.floor(high / self.spacing + 1e-9) + 1)
            if not steps.size:
                raise AxisError(f"Resample: spacing is {self.spacing:g}, wider than the axis, {low:g} to {high:g}, "
                                f"{self.axis_.size} feature(s)", accepted="give a smaller one")  # fmt: skip
            return steps * self.spacing
        if self.axis is None:
            return self.axis_
        targets = np.asarray(self.axis, dtype=np.float64)
        if targets.ndim != 1 or not (np.diff(targets) > 0).all():
            raise AxisError("Resample: axis does not increase from channel to channel", accepted="sort it")
        if targets[0] < low or targets[-1] > high:
            unit = SPECTRAL_UNITS.get(self.dim_, "")
            raise AxisError(f"Resample: axis runs from {targets[0]:g} to {targets[-1]:g} {unit}, beyond that of the "
                            f"spectra, {low:g} to {high:g} {unit}", accepted="stay inside")  # fmt: skip
        return targets

    def _apply(self, rows: FloatArray) -> FloatArray:
        if self.resolution is None:
            return rows if self.axis_out_ is self.axis_ else interpolate(self.axis_, rows, self.axis_out_)
        if self.through == "absorbance":
            return weighted_sums(rows, self._first, self._weights)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(-np.log10(weighted_sums(10.0**-rows, self._first, self._weights)))
