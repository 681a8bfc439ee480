"""What all steps of a preparation share: labels off, plain rows through the step, labels on, and additivity.

A step is a scikit-learn transformer. Its subclass declares what its parameters accept, whether it keeps
Beer-Lambert additivity, what it learns in ``fit`` and what it does to rows. Nothing about a particular method
belongs here.
"""

import warnings
from abc import ABC, abstractmethod
from collections.abc import Callable, Mapping
from typing import Any, ClassVar, Self

import numpy as np
import xarray as xr
from sklearn.base import BaseEstimator, OneToOneFeatureMixin, TransformerMixin, clone
from sklearn.utils.validation import check_is_fitted, validate_data

from unmix.chunked import one_thread, whole_channels
from unmix.errors import AxisError, InputError, UnmixWarning, listed
from unmix.kernels import FloatArray, IntArray
from unmix.prepare.accept import Rule, check_parameters
from unmix.spectra import check_spectra, labels_of, spectral_dim
from unmix.units import SPECTRAL_UNITS

#: two axes are the same when they differ by less than this part of a channel spacing
SAME_AXIS = 1e-3


class Step(OneToOneFeatureMixin, TransformerMixin, BaseEstimator, ABC):
    """A step of a preparation; subclasses say what it does.

    Labelled spectra keep their coordinates and attributes; ``attrs["preparation"]`` lists the steps taken, and
    ``attrs["additivity"]`` names the first step that lost Beer-Lambert additivity. Leading dimensions are free.
    Plain arrays have spectra first and channels last, and their axis is the channel number. float32 stays
    float32; the work is done in float64.

    Attributes
    ----------
    axis_ : ndarray, shape (channels,)
        The axis that the step was fitted on.
    dim_ : str
        Its spectral dimension; empty for a plain array.
    n_features_in_ : int
        Its number of channels.
    """

    #: parameter name -> what it accepts
    accepts: ClassVar[Mapping[str, Rule]] = {}
    #: why the step does not keep additivity, and what to use instead; empty where it does
    lost_because: ClassVar[str] = ""
    instead: ClassVar[str] = ""
    #: whether it is one linear map only for spectra that miss the same channels
    complete_only: ClassVar[bool] = False
    #: which spectra it has no answer for, in words after "spectra"
    no_answer: ClassVar[str] = ""
    #: fewest channels that it can work on
    least_channels: ClassVar[int] = 1

    @property
    def additive(self) -> bool:
        """Whether samples and pure spectra that both pass this step still obey Beer and Lambert."""
        return not self.lost_because

    @property
    def learns(self) -> bool:
        """Whether ``fit`` learns numbers from the spectra, beyond their axis."""
        return False

    def frozen(self) -> Self:
        """A copy whose parameters hold what was learned, so that it does the same to any later spectra."""
        check_is_fitted(self)
        twin: Self = clone(self)
        twin.set_params(**self._learned())
        return twin

    def fit(self, X: Any, y: Any = None) -> Self:
        """Check the parameters against the spectra, and learn what there is to learn.

        Parameters
        ----------
        X : DataArray, dims (..., spectral), or array_like, shape (..., channels)
            NaN marks a missing channel.
        y : array_like, optional
            Used only where the step says so.

        Raises
        ------
        InputError, AxisError
            For a parameter or spectra that cannot be used.
        """
        check_parameters(type(self).__name__, self.get_params(deep=False), self.accepts)
        if isinstance(X, xr.DataArray):
            X = check_spectra(X)
            self.dim_ = spectral_dim(X)
            self.axis_: FloatArray = np.asarray(X[self.dim_].values, dtype=np.float64)
            self.n_features_in_ = self.axis_.size
            if hasattr(self, "feature_names_in_"):
                del self.feature_names_in_
            values: FloatArray = np.asarray(X.values)
        else:
            values = self._plain(X, reset=True)
            self.dim_ = ""
            self.axis_ = np.arange(float(self.n_features_in_))
        if self.axis_.size < self.least_channels:
            raise AxisError(f"{type(self).__name__} needs at least {self.least_channels} channels, but the spectra "
                            f"have {self.axis_.size} feature(s)")  # fmt: skip
        rows = values.reshape(-1, self.axis_.size).astype(np.float64, copy=False)
        self.axis_out_: FloatArray = self.axis_
        self._learn(_finite_or_missing(rows, X), y)
        return self

    def transform(self, X: Any) -> Any:
        """Prepared spectra, labelled if ``X`` is.

        Parameters
        ----------
        X : DataArray, dims (..., spectral), or array_like, shape (..., channels)
            On the axis that the step was fitted on.

        Returns
        -------
        DataArray or ndarray
            Same leading dimensions, coordinates, attributes and precision.

        Raises
        ------
        AxisError
            When the axis is another one.
        """
        check_is_fitted(self)
        return self._through(X, self._apply)

    # -- what a subclass gives ----------------------------------------------------------------------------------

    def _learn(self, rows: FloatArray, y: Any) -> None:
        """Set what ``_apply`` needs; rows are (spectra, channels), float64."""

    @abstractmethod
    def _apply(self, rows: FloatArray) -> FloatArray:
        """Rows in, rows out; a row of nothing but NaN where there is no answer."""

    def _learned(self) -> dict[str, Any]:
        """Parameters that hold what was learned."""
        return {}

    # -- labels off, labels on ----------------------------------------------------------------------------------

    def _plain(self, X: Any, *, reset: bool) -> FloatArray:
        # scikit-learn counts channels along the second dimension
        shape = X.shape if getattr(X, "ndim", 2) > 2 else None
        flat = X if shape is None else np.reshape(X, (-1, shape[-1]))
        values: FloatArray = validate_data(
            self, flat, reset=reset, dtype=[np.float64, np.float32], ensure_all_finite="allow-nan"
        )
        return values if shape is None else values.reshape(shape)

    def _through(self, X: Any, work: Callable[[FloatArray], FloatArray], *, mark: bool = True) -> Any:
        if not isinstance(X, xr.DataArray):
            values = self._plain(X, reset=False)
            return self._tell(values, self._on_values(values, work), X)
        spectra = check_spectra(X)
        self._same_axis(spectra)
        if spectra.chunks is None:
            values = _finite_or_missing(np.asarray(spectra.values), spectra)
            data: Any = self._tell(values, self._on_values(values, work), spectra)
        else:
            spectra = whole_channels(spectra)
            data = spectra.data.map_blocks(self._on_block, work, dtype=spectra.dtype, chunks=self._chunks(spectra),
                                           meta=np.empty((0,) * spectra.ndim, dtype=spectra.dtype))  # fmt: skip
        prepared = self._relabel(spectra, data, mark)
        return prepared.isel(sample=0) if X.ndim == 1 else prepared

    def _chunks(self, spectra: xr.DataArray) -> tuple[tuple[int, ...], ...]:
        return (*(spectra.chunks or ())[:-1], (self.axis_out_.size,))

    def _on_block(self, values: FloatArray, work: Callable[[FloatArray], FloatArray]) -> FloatArray:
        with one_thread():
            return self._on_values(_finite_or_missing(values, None), work)

    def _on_values(self, values: FloatArray, work: Callable[[FloatArray], FloatArray]) -> FloatArray:
        rows = values.reshape(-1, values.shape[-1]).astype(np.float64)
        done = work(rows).astype(values.dtype, copy=False)
        return done.reshape(*values.shape[:-1], done.shape[-1])

    def _tell(self, values: FloatArray, done: FloatArray, X: Any) -> FloatArray:
        """Warn of spectra that went in with numbers and came out without."""
        lost = np.isnan(done).all(axis=-1) & np.isfinite(values).any(axis=-1)
        if lost.any():
            rows = np.flatnonzero(lost.ravel())
            warnings.warn(f"{type(self).__name__} has no answer for spectra {self.no_answer}: {named(rows, X)}; "
                          "their values are missing now", UnmixWarning, stacklevel=4)  # fmt: skip
        return done

    def _same_axis(self, spectra: xr.DataArray) -> None:
        name, dim = type(self).__name__, spectral_dim(spectra)
        axis = np.asarray(spectra[dim].values, dtype=np.float64)
        if not self.dim_:
            raise AxisError(f"{name} was fitted on a plain array but is given spectra along '{dim}'",
                            accepted="fit it on labelled spectra")  # fmt: skip
        require_same_axis(name, (self.dim_, self.axis_), (dim, axis))

    def _relabel(self, spectra: xr.DataArray, data: Any, mark: bool) -> xr.DataArray:
        dim = str(spectra.dims[-1])
        same = self.axis_out_ is self.axis_
        coords = {name: c for name, c in spectra.coords.items() if same or dim not in c.dims}
        if not same:
            kept = getattr(self, "kept_", None)
            coords |= spectra.isel({dim: kept}).coords if kept is not None else {}
            coords[dim] = (dim, self.axis_out_, {"units": SPECTRAL_UNITS[dim]})
        attrs = dict(spectra.attrs)
        if mark:
            attrs["preparation"] = "; ".join([*filter(None, [attrs.get("preparation")]), _described(self)])
            if not self.additive:
                attrs.setdefault("additivity", f"lost by {type(self).__name__}: {self.lost_because}")
        return xr.DataArray(data, dims=spectra.dims, coords=coords, attrs=attrs, name=spectra.name)

    # -- scikit-learn -------------------------------------------------------------------------------------------

    def get_feature_names_out(self, input_features: Any = None) -> Any:
        """Names of the channels that come out, for scikit-learn's own tables."""
        names = super().get_feature_names_out(input_features)
        kept: IntArray | None = getattr(self, "kept_", None)
        if kept is not None:
            return names[kept]
        if self.axis_out_.size == names.size:
            return names
        prefix = type(self).__name__.lower()
        return np.asarray([f"{prefix}{i}" for i in range(self.axis_out_.size)], dtype=object)

    def __sklearn_tags__(self) -> Any:
        tags = super().__sklearn_tags__()
        tags.input_tags.allow_nan = True
        return tags


def _finite_or_missing(values: FloatArray, X: Any) -> FloatArray:
    """Refuse infinite values, which are neither a number nor the mark of a missing channel."""
    if np.isinf(values).any():
        row, channel = (int(i[0]) for i in np.nonzero(np.isinf(values.reshape(-1, values.shape[-1]))))
        name = labels_of(X)[row] if isinstance(X, xr.DataArray) else str(row + 1)
        raise InputError(f"spectrum '{name}' is infinite at channel {channel + 1} of {values.shape[-1]}",
                         accepted="mark a missing channel by NaN")  # fmt: skip
    return values


def _described(step: Step) -> str:
    """The step with the parameters that fit into a line."""
    shown = []
    for name, value in step.get_params(deep=False).items():
        text = _text(value)
        shown.append(f"{name}={text}" if len(text) <= 60 else f"{name}=(given)")
    return f"{type(step).__name__}({', '.join(shown)})"


def named(rows: Any, X: Any) -> str:
    """Names of some spectra for a message."""
    names = labels_of(check_spectra(X)) if isinstance(X, xr.DataArray) else None
    return listed(names[i] if names else i + 1 for i in rows)


def _text(value: Any) -> str:
    if isinstance(value, list | tuple):
        return f"[{', '.join(_text(item) for item in value)}]"
    return f"{value:g}" if isinstance(value, float) else str(value)


def require_same_axis(name: str, own: tuple[str, FloatArray], other: tuple[str, FloatArray]) -> None:
    """Raise unless two axes have the same dimension and channels.

    Raises
    ------
    AxisError
        Naming both.
    """
    words = [
        f"{axis.size} channels, {axis[0]:g} to {axis[-1]:g} {SPECTRAL_UNITS.get(dim, '')}".strip()
        for dim, axis in (own, other)
    ]
    spacing = np.diff(own[1]).min() if own[1].size > 1 else 1.0
    same = own[0] == other[0] and own[1].size == other[1].size
    if not same or np.abs(own[1] - other[1]).max() > SAME_AXIS * spacing:
        raise AxisError(f"{name} works on {words[0]} but is given {words[1]}",
                        accepted="bring both onto one axis first, or fit the step anew")  # fmt: skip
