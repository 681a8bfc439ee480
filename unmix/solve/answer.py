"""The arrays of an answer, and the settings it was found with."""

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from unmix.diagnose.constraints import Check
from unmix.diagnose.residual import Bands
from unmix.kernels import BoolArray, FloatArray
from unmix.kernels.noise import KnownNoise
from unmix.solve.axis import AxisFitter, Report
from unmix.solve.constraints import Constraints
from unmix.solve.uncertainty import SOURCES, Inputs


@dataclass(frozen=True)
class Settings:
    """Options of the analysis.

    ``known_noise`` says that the weights are one over known standard deviations; otherwise they are relative, and the
    level and correlation of the noise are found from each residual. ``scans`` holds the noise that repeated scans
    showed; the weights then are one over its innovations. ``resolution`` is the rounding of the numbers
    relative to the largest of a spectrum. ``inputs`` are the uncertainties of pure spectra, path and dilution.
    """

    level: float = 0.95
    nonnegative: bool = True
    known_noise: bool = False
    scans: KnownNoise | None = None
    resolution: float = 1e-12
    constraints: Constraints | None = None
    inputs: Inputs | None = None
    axis: AxisFitter | None = None

    def of(self, row: int) -> "Settings":
        """The settings as the only spectrum of a batch has them."""
        return self if self.constraints is None else replace(self, constraints=self.constraints.of(row))


#: arrays of an answer by shape: amounts (spectra, components), curves (spectra, channels), figures (spectra,)
AMOUNTS = ("concentration", "standard_uncertainty", "lower", "upper", "critical_level", "detection_limit",
           "quantification_limit", "misfit_harm", "negative", "unbounded")  # fmt: skip
CURVES = ("fitted", "baseline")
FIGURES = (
    "noise_level",
    "trust",
    "noise_correlation_length",
    "freedom",
    "misfit_z",
    "misfit_limit",
    "residual_growth",
    "residual_excess",
    "stray_light",
    "spikes",
)


@dataclass
class Answer:
    """Arrays of the answer, one row a spectrum, NaN where a spectrum could not be answered.

    Shapes: (spectra, components) for the amounts, (spectra, channels) for curves, (spectra,) for the rest.
    ``used`` tells the channels that the last fit of a spectrum rests on. Amounts are per unit path; ``bands`` holds
    positions and widths in channels. ``contribution`` has shape (spectra, components, ``SOURCES``), ``correlation``
    (spectra, components, components); ``trust`` is the degrees of freedom behind the noise, ``extra`` holds values and
    standard uncertainties of free terms that are no baseline, ``axis`` what became of an axis fit.
    """

    concentration: FloatArray
    standard_uncertainty: FloatArray
    lower: FloatArray
    upper: FloatArray
    critical_level: FloatArray
    detection_limit: FloatArray
    quantification_limit: FloatArray
    misfit_harm: FloatArray
    negative: FloatArray
    unbounded: FloatArray
    contribution: FloatArray
    correlation: FloatArray
    fitted: FloatArray
    baseline: FloatArray
    noise_level: FloatArray
    trust: FloatArray
    noise_correlation_length: FloatArray
    freedom: FloatArray
    misfit_z: FloatArray
    misfit_limit: FloatArray
    residual_growth: FloatArray
    residual_excess: FloatArray
    stray_light: FloatArray
    spikes: FloatArray
    used: BoolArray
    blank: BoolArray
    bands: list[Bands | None]
    groups: list[list[tuple[float, list[int]]]]
    checks: list[list[Check]]
    extra: list[tuple[FloatArray, FloatArray]]
    axis: list[Report | None]

    @classmethod
    def empty(cls, n: int, k: int, p: int) -> "Answer":
        """All NaN, no bands."""
        shapes = dict.fromkeys(AMOUNTS, (n, k)) | dict.fromkeys(CURVES, (n, p)) | dict.fromkeys(FIGURES, (n,))
        arrays: dict[str, Any] = {name: np.full(shape, np.nan) for name, shape in shapes.items()}
        return cls(
            **arrays,
            contribution=np.full((n, k, len(SOURCES)), np.nan),
            correlation=np.full((n, k, k), np.nan),
            used=np.zeros((n, p), dtype=bool),
            blank=np.zeros(n, dtype=bool),
            bands=[None] * n,
            groups=[[] for _ in range(n)],
            checks=[[] for _ in range(n)],
            extra=[(np.empty(0), np.empty(0)) for _ in range(n)],
            axis=[None] * n,
        )

    def put(self, row: int, one: "Answer") -> None:
        """Replace a row by the only row of another answer."""
        for name in (*AMOUNTS, *CURVES, *FIGURES, "contribution", "correlation"):
            getattr(self, name)[row] = getattr(one, name)[0]
        self.used[row], self.blank[row] = one.used[0], one.blank[0]
        for name in ("bands", "groups", "checks", "extra"):
            getattr(self, name)[row] = getattr(one, name)[0]
