"""Known or learned interference taken out of spectra by one linear map, the same for samples and pure spectra.

What varies from spectrum to spectrum by scale belongs in ``scatter``.
"""

from abc import abstractmethod
from collections.abc import Mapping, Sequence
from typing import Any, ClassVar

import numpy as np

from unmix.errors import InputError
from unmix.kernels import FloatArray
from unmix.kernels.missing import patterns
from unmix.kernels.whittaker import Differences
from unmix.prepare.accept import Rule, number, regions, spectrum, whole
from unmix.prepare.axis import region_mask
from unmix.prepare.given import on_axis
from unmix.prepare.step import Step
from unmix.units import SPECTRAL_UNITS

#: a direction with less than this part of the largest is rounding
_ROUNDING = 1e-12


class _Shrinking(Step):
    """What both learned filters share: directions of the interference, and how much of each is kept."""

    complete_only = True
    no_answer = "with too few channels"
    least_channels = 2

    @property
    def learns(self) -> bool:
        """Whether the directions come from the spectra."""
        return self.get_params(deep=False)["basis"] is None

    def _learn(self, rows: FloatArray, y: Any) -> None:
        given = self.get_params(deep=False)["basis"]
        if given is not None:
            basis = on_axis(self, given, "basis")
            if np.abs(basis @ basis.T - np.eye(basis.shape[0])).max() > 1e-6:
                raise InputError(f"{type(self).__name__}: the rows of basis are not orthonormal",
                                 accepted="give what an earlier fit learned")  # fmt: skip
            self.basis_: FloatArray = basis
            self.kept_part_ = self._kept_part(None)
            return
        differences = _differences(type(self).__name__, rows, y)
        _, singular, directions = np.linalg.svd(differences, full_matrices=False)
        known = singular > _ROUNDING * (singular[0] if singular.size else 0.0)
        self._check_rank(int(known.sum()), differences.shape[0])
        variance = singular[known] ** 2 / max(differences.shape[0] - 1, 1)
        self.kept_part_ = self._kept_part(variance)
        self.basis_ = directions[known][: self.kept_part_.size]

    @abstractmethod
    def _kept_part(self, variance: FloatArray | None) -> FloatArray:
        """How much of each direction is kept, from the variance along them or from the parameters."""

    def _check_rank(self, rank: int, count: int) -> None:
        if rank == 0:
            raise InputError(f"{type(self).__name__}: nothing can be learned from {count} sample spectra of which none "
                             "differ", accepted="give the same samples under different conditions")  # fmt: skip

    def _apply(self, rows: FloatArray) -> FloatArray:
        answer = np.full_like(rows, np.nan)
        for members, present in patterns(np.isfinite(rows)):
            basis = self.basis_[:, present]
            if basis.shape[1] < basis.shape[0]:
                continue
            part = rows[np.ix_(members, present)] @ np.linalg.pinv(basis)
            answer[members] = rows[members] - (part * (1.0 - self.kept_part_)) @ self.basis_
        return answer


class ExternalParameterOrthogonalisation(_Shrinking):
    """Project out the directions along which the spectra of one sample differ.

    Fit it on spectra of the same samples under different conditions (temperature, moisture, instrument). The part
    of the components along these directions is lost too, equally in samples and pure spectra. Additivity is kept
    between spectra that miss the same channels.

    Parameters
    ----------
    components : int
        Directions projected out.
    basis : array_like, shape (components, channels), optional
        The directions, orthonormal. None learns them: ``fit(X, y)`` takes the spectra whose entries in ``y`` are
        equal as the same sample, and all spectra as one sample without ``y``.

    Attributes
    ----------
    basis_ : ndarray, shape (components, channels)

    References
    ----------
    Roger, Chauchard and Bellon-Maurel, Chemom. Intell. Lab. Syst. 66 (2003) 191.

    Examples
    --------
    >>> step = ExternalParameterOrthogonalisation().fit([[1.0, 0, 2], [1, 3, 2], [5, 1, 0], [5, 2, 0]], [1, 1, 2, 2])
    >>> step.transform([[4.0, 7.0, 9.0]]).round(6)
    array([[4., 0., 9.]])
    """

    accepts: ClassVar[Mapping[str, Rule]] = {
        "components": whole(least=1),
        "basis": spectrum().or_none("directions learned from the spectra"),
    }

    def __init__(self, components: int = 1, basis: Any = None) -> None:
        self.components = components
        self.basis = basis

    def _learned(self) -> dict[str, Any]:
        return {"basis": self.basis_.tolist()}

    def _check_rank(self, rank: int, count: int) -> None:
        super()._check_rank(rank, count)
        if rank < self.components:
            raise InputError(f"{type(self).__name__}: components is {self.components}, but the spectra of a sample "
                             f"differ in {rank} directions only", accepted=f"give {rank} or fewer")  # fmt: skip

    def _kept_part(self, variance: FloatArray | None) -> FloatArray:
        return np.zeros(self.basis_.shape[0] if variance is None else self.components)


class GeneralisedLeastSquaresWeighting(_Shrinking):
    """Shrink each direction by how much the spectra of one sample differ along it.

    A direction with variance s^2 among the spectra of a sample is multiplied by 1 / sqrt(s^2 / (floor s_max^2) + 1):
    strong interference nearly vanishes, weak stays. Additivity is kept between spectra that miss the same channels.

    Parameters
    ----------
    floor : float
        The variance, relative to that of the strongest direction, at which a direction keeps 0.71 of its height.
    basis : array_like, shape (directions, channels), optional
        Orthonormal directions. None learns them as in ``ExternalParameterOrthogonalisation``.
    kept : array_like, shape (directions,), optional
        The part of each direction that is kept; given together with ``basis``.

    Attributes
    ----------
    basis_ : ndarray, shape (directions, channels)
    kept_part_ : ndarray, shape (directions,)

    References
    ----------
    Martens, Hoy, Wise, Bro and Brockhoff, J. Chemometrics 17 (2003) 153.

    Examples
    --------
    >>> step = GeneralisedLeastSquaresWeighting(floor=1 / 3).fit([[1.0, 0, 2], [1, 3, 2]])
    >>> step.transform([[4.0, 8.0, 9.0]]).round(6)
    array([[4., 4., 9.]])
    """

    accepts: ClassVar[Mapping[str, Rule]] = {
        "floor": number(above=0),
        "basis": spectrum().or_none("directions learned from the spectra"),
        "kept": spectrum().or_none("parts learned from the spectra"),
    }

    def __init__(self, floor: float = 1e-2, basis: Any = None, kept: Any = None) -> None:
        self.floor = floor
        self.basis = basis
        self.kept = kept

    def _learned(self) -> dict[str, Any]:
        return {"basis": self.basis_.tolist(), "kept": self.kept_part_.tolist()}

    def _kept_part(self, variance: FloatArray | None) -> FloatArray:
        if variance is not None:
            return np.asarray(1.0 / np.sqrt(variance / (self.floor * variance[0]) + 1.0))
        kept: FloatArray = np.asarray([] if self.kept is None else self.kept, dtype=np.float64)
        if kept.shape != self.basis_.shape[:1] or (kept < 0).any() or (kept > 1).any():
            raise InputError(f"GeneralisedLeastSquaresWeighting: kept has shape {kept.shape} for "
                             f"{self.basis_.shape[0]} directions, or parts beyond 0 to 1",
                             accepted="give basis and kept as an earlier fit learned them")  # fmt: skip
        return kept


class VapourRemoval(Step):
    """Take water vapour and carbon dioxide of the instrument's air out of infrared spectra.

    The amount of each vapour is fitted to the second differences along the axis, in which the sharp rotational
    lines stand out and the bands of a condensed sample vanish. It may come out negative: the reference scan then
    held more vapour than the sample scan. One linear map, so additivity is kept between spectra that miss the same
    channels.

    Parameters
    ----------
    vapour : DataArray or array_like, shape (vapours, channels) or (channels,)
        Spectra of the vapours at the resolution of the samples, on their axis.
    regions : list of (low, high), optional
        Where the amounts are fitted, in units of the axis; None takes the whole axis.

    References
    ----------
    Bruun et al., Appl. Spectrosc. 60 (2006) 1029.

    Examples
    --------
    >>> lines = np.tile([0.0, 1.0], 20)
    >>> sample = np.linspace(0, 1, 40)
    >>> step = VapourRemoval(vapour=lines)
    >>> bool(np.allclose(step.fit_transform([sample + 0.3 * lines]), [sample]))
    True
    """

    complete_only = True
    no_answer = "with too few channels"
    least_channels = 3
    accepts: ClassVar[Mapping[str, Rule]] = {"vapour": spectrum(), "regions": regions().or_none("the whole axis")}

    def __init__(self, vapour: Any, regions: Sequence[tuple[float, float]] | None = None) -> None:
        self.vapour = vapour
        self.regions = regions

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del rows, y
        self._vapour = on_axis(self, self.vapour, "vapour")
        self._differences = Differences(self.axis_, 2)
        used = np.ones(self.axis_.size, dtype=np.bool_)
        if self.regions is not None:
            used = region_mask(self.axis_, self.regions, SPECTRAL_UNITS.get(self.dim_, ""))
        self._used = used[:-2] & used[1:-1] & used[2:]
        self._rough = self._differences.apply(self._vapour.T)
        size = np.linalg.norm(self._rough[self._used], axis=0)
        rank = np.linalg.matrix_rank(self._rough[self._used] / np.where(size > 0, size, 1.0))
        if rank < self._vapour.shape[0]:
            raise InputError(f"VapourRemoval: of {self._vapour.shape[0]} vapours only {rank} can be told apart on "
                             f"{np.count_nonzero(used)} feature(s)",
                             accepted="give sharp lines, different vapours, or wider regions")  # fmt: skip

    def _apply(self, rows: FloatArray) -> FloatArray:
        answer = np.full_like(rows, np.nan)
        rough = self._differences.apply(rows.T).T
        for members, present in patterns(np.isfinite(rough) & self._used):
            if np.count_nonzero(present) < self._vapour.shape[0]:
                continue
            solve = np.linalg.pinv(self._rough[present])
            amounts = rough[np.ix_(members, present)] @ solve.T
            answer[members] = rows[members] - amounts @ self._vapour
        return answer


def _differences(name: str, rows: FloatArray, y: Any) -> FloatArray:
    """Spectra minus the mean of their sample."""
    if not np.isfinite(rows).all():
        raise InputError(f"{name} learns from spectra with a missing channel",
                         accepted="leave the channel out with Regions first")  # fmt: skip
    if y is None:
        return np.asarray(rows - rows.mean(axis=0))
    labels = np.asarray(y)
    if labels.shape != rows.shape[:1]:
        raise InputError(f"{name}: y has shape {labels.shape} for {rows.shape[0]} spectra",
                         accepted="give the name of the sample for each spectrum")  # fmt: skip
    _, which = np.unique(labels, return_inverse=True)
    totals = np.zeros((which.max() + 1, rows.shape[1]))
    np.add.at(totals, which, rows)
    return np.asarray(rows - (totals / np.bincount(which)[:, None])[which])
