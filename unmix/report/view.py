"""A result seen row by row: leading dimensions flattened, missing variables noticed, texts at hand.

Tables, figures and the page read results through these classes; nothing new is computed.
"""

import json
from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr

from unmix.errors import InputError, listed
from unmix.kernels import BoolArray, FloatArray
from unmix.spectra import labels_of, spectral_dim
from unmix.units import axis_title

#: what a cell of a table can hold; None where something is not known
Value = str | float | bool | None
Row = dict[str, Value]

#: variables without which nothing can be shown
_NEEDED = {
    "quantify": ("concentration", "lower", "upper", "verdict", "reason"),
    "conditioning": ("variance_inflation", "selectivity"),
    "prediction": ("predicted", "lower", "upper", "verdict", "reason"),
    "calibration": ("error", "verdict", "reason"),
    "identify": ("components", "concentration", "weight", "measured", "fitted", "residual", "verdict", "reason"),
}

#: kinds that have a page and figures; tables are made of every kind
PAGES = ("quantify", "conditioning", "calibration", "prediction", "identify")

#: a step of the axis that is so many times the usual one separates two regions
JUMP = 5.0

#: verdicts from the most pressing to the least
VERDICTS = ("unsupported", "doubtful", "supported")


def results_of(result: Any, *, kinds: Sequence[str] = PAGES) -> list[xr.Dataset]:
    """One result or several as a list of checked Datasets of one kind, out of those that are accepted.

    Raises
    ------
    InputError
        When something is no result, lacks what cannot be done without, or the kinds differ.
    """
    several = list(result) if isinstance(result, Sequence) else [result]
    if not several:
        raise InputError("there is no result to show", accepted="give what unmix.quantify returned")
    for one in several:
        if not isinstance(one, xr.Dataset):
            raise InputError(f"a result is a Dataset, not a {type(one).__name__}",
                             accepted="give what unmix.quantify or unmix.conditioning returned")  # fmt: skip
        kind = str(one.attrs.get("kind"))
        if kind not in kinds:
            raise InputError(f"a result of kind '{kind}' cannot be shown (attrs['kind'])",
                             accepted=f"one of {', '.join(kinds)}")  # fmt: skip
        missing = [name for name in _NEEDED[kind] if name not in one]
        if missing:
            raise InputError(f"the result lacks the variable {listed(missing)}",
                             accepted=f"give the whole Dataset that unmix.{kind} returned")  # fmt: skip
    kinds = sorted({one.attrs["kind"] for one in several})
    if len(kinds) > 1:
        raise InputError(f"results of different kinds ({', '.join(kinds)}) do not go together")
    return several


def refused_of(results: Sequence[xr.Dataset]) -> dict[str, str]:
    """Files that could not be used, with the reason, from ``attrs["refused"]`` (a JSON object) of all results."""
    found: dict[str, str] = {}
    for one in results:
        entries = Result(one).entries("refused")
        found.update({str(k): str(v) for k, v in entries.items()} if isinstance(entries, dict) else {})
    return found


class Result:
    """What every kind of result has: components, the spectral axis, and texts in its attributes.

    Parameters
    ----------
    data : Dataset
        One that :func:`results_of` let through.
    """

    def __init__(self, data: xr.Dataset) -> None:
        self.data = data
        self.kind = str(data.attrs["kind"])
        self.components = [str(name) for name in data["component"].values] if "component" in data else []
        curves = [name for name in ("measured", "pure_signal") if name in data]
        self.dim = spectral_dim(data[curves[0]], name="the result") if curves else ""
        self.axis: FloatArray = np.asarray(data[self.dim].values, dtype=float) if curves else np.empty(0)

    @property
    def axis_title(self) -> str:
        """Name and unit of the spectral axis."""
        return axis_title(self.dim)

    @property
    def axis_unit(self) -> str:
        """Unit of the spectral axis."""
        return str(self.data[self.dim].attrs.get("units", "")) if self.dim else ""

    def breaks(self) -> list[int]:
        """Channels before which the axis jumps, as it does between regions: no line is drawn across."""
        step = np.diff(self.axis)
        return (np.flatnonzero(step > JUMP * np.median(step)) + 1).tolist() if step.size > 1 else []

    @property
    def falls(self) -> bool:
        """Whether the axis is drawn from high to low, as is the custom in the infrared."""
        return self.dim == "wavenumber"

    def unit(self, variable: str) -> str:
        """Unit of a variable, empty for numbers without one."""
        text = str(self.data[variable].attrs.get("units", "")) if variable in self.data else ""
        return "" if text == "1" else text

    def text(self, attribute: str) -> str:
        """An attribute as text, empty when it is not there."""
        return str(self.data.attrs.get(attribute, ""))

    def entries(self, attribute: str) -> Any:
        """An attribute that holds JSON (None where it is not there); other text becomes a list of one."""
        found = self.data.attrs.get(attribute)
        if not isinstance(found, str):
            return found
        try:
            return json.loads(found)
        except ValueError:
            return [found] if found else None

    def sentences(self, attribute: str) -> list[str]:
        """An attribute that holds a list of sentences."""
        found = self.entries(attribute)
        return [str(text) for text in found] if isinstance(found, list) else []

    def per_component(self, variable: str) -> FloatArray:
        """A variable along ``component``, NaN when the result does not have it."""
        if variable not in self.data:
            return np.full(len(self.components), np.nan)
        return np.asarray(self.data[variable].values, dtype=float)

    def confused_with(self) -> list[str]:
        """For each component the one it is most easily taken for, or an empty text."""
        if "confused_with" not in self.data:
            return [""] * len(self.components)
        return [str(name) for name in self.data["confused_with"].values]


class Composition(Result):
    """A result of ``quantify`` with one row a sample, whatever its leading dimensions are."""

    def __init__(self, data: xr.Dataset) -> None:
        super().__init__(data)
        self._laid: dict[str, Any] = {}
        self.leading = tuple(str(dim) for dim in data["concentration"].dims if dim != "component")
        self.samples = labels_of(data["concentration"].transpose(*self.leading, "component"))
        self.files = self._texts("file")
        self.verdicts = self._texts("verdict")
        self.reasons = self._texts("reason")
        self.concentration_unit = self.unit("concentration")

    def __len__(self) -> int:
        return len(self.samples)

    def _flat(self, name: str, *last: str) -> Any:
        """A variable with its leading dimensions as one, kept, because a page asks for it once a sample."""
        if name not in self._laid:
            laid = self.data[name].transpose(*self.leading, *last).values
            self._laid[name] = laid.reshape(len(self.samples), *laid.shape[len(self.leading) :])
        return self._laid[name]

    def _texts(self, name: str) -> list[str]:
        whole = set(self.leading)
        if name not in self.data.variables or set(self.data[name].dims) != whole:
            return [""] * len(self.samples)
        return [str(text) for text in self._flat(name)]

    def per_sample(self, variable: str) -> FloatArray:
        """A variable along the samples, NaN when the result does not have it."""
        if variable not in self.data:
            return np.full(len(self), np.nan)
        found: FloatArray = self._flat(variable).astype(float)
        return found

    def table(self, variable: str) -> FloatArray:
        """A variable as (samples, components), NaN when the result does not have it."""
        if variable not in self.data:
            return np.full((len(self), len(self.components)), np.nan)
        found: FloatArray = self._flat(variable, "component").astype(float)
        return found

    def detected(self) -> BoolArray:
        """Which amounts are above their critical level, as (samples, components)."""
        if "detected" in self.data:
            return np.asarray(self._flat("detected", "component"), dtype=bool)
        return self.table("lower") > 0

    def curve(self, variable: str, sample: int) -> FloatArray:
        """A curve of one sample along the spectral axis, NaN when the result does not have it."""
        if variable not in self.data:
            return np.full(self.axis.size, np.nan)
        return np.asarray(self._flat(variable, self.dim)[sample], dtype=float)

    def contribution(self, sample: int) -> FloatArray:
        """What each input quantity contributes to the standard uncertainty of each amount, (components, sources)."""
        return np.asarray(self._flat("contribution", "component", "source")[sample], dtype=float)

    def factors(self) -> FloatArray:
        """What the path length of each sample multiplies the signal of a unit amount with."""
        return self.per_sample("path_factor") if "path_factor" in self.data else np.ones(len(self))

    def signals(self) -> FloatArray:
        """The pure spectra as used, (components, channels); NaN when the result does not have them."""
        if "pure_signal" not in self.data:
            return np.full((len(self.components), self.axis.size), np.nan)
        return np.asarray(self.data["pure_signal"].transpose("component", self.dim).values, dtype=float)

    def contributions(self, sample: int) -> FloatArray:
        """What each component adds to the spectrum of one sample, (components, channels)."""
        amounts = self.table("concentration")[sample] * self.factors()[sample]
        return np.asarray(amounts[:, np.newaxis] * self.signals(), dtype=float)

    def unexplained(self, sample: int) -> list[dict[str, float]]:
        """The bands that no component explains: position, width, height and score, the strongest first."""
        names = ("position", "width", "height", "score")
        if any(f"misfit_{name}" not in self.data for name in names):
            return []
        found = [self._flat(f"misfit_{name}", "misfit_band")[sample] for name in names]
        bands = [dict(zip(names, map(float, band), strict=True)) for band in zip(*found, strict=True)]
        known = [band for band in bands if np.isfinite(band["position"])]
        return sorted(known, key=lambda band: -abs(band["score"]))

    def order(self) -> list[int]:
        """Samples with the most pressing verdict first, otherwise as they came."""
        rank = {verdict: place for place, verdict in enumerate(VERDICTS)}
        return sorted(range(len(self)), key=lambda i: rank.get(self.verdicts[i], -1))
