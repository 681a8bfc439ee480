"""Could this measurement answer at all? How far the pure spectra can be told apart, before any sample."""

from typing import NamedTuple

import numpy as np

from unmix.kernels import FloatArray
from unmix.kernels.linalg import collinearity, inverse_factor, reduce_design, unit_columns

#: index above which a dependence is strong (Belsley, Kuh and Welsch 1980, section 3.2)
STRONG_INDEX = 30.0

#: share of variance above which a component takes part in a dependence (same place)
LARGE_SHARE = 0.5


class Conditioning(NamedTuple):
    """Figures of a design; k components, m terms with the baseline.

    Attributes
    ----------
    indices : ndarray, shape (m,)
        Condition indices, increasing.
    proportion : ndarray, shape (m, m)
        Variance-decomposition proportions, index by term; components first, then baseline terms.
    inflation : ndarray, shape (k,)
        Variance inflation, 1 / (1 - R_j^2) without centring: 1 / selectivity^2.
    selectivity : ndarray, shape (k,)
        Share of a pure spectrum that is net analyte signal.
    angle : ndarray, shape (k, k)
        Degrees between pure spectra, baseline terms projected out.
    unit_uncertainty : ndarray, shape (k,)
        Standard uncertainty of an amount for white noise of 1 in every channel.
    net : ndarray, shape (k, channels)
        Net analyte signal per unit amount.
    partner : ndarray of int, shape (k,)
        The other component that each is most confused with; -1 where it stands out by itself.
    """

    indices: FloatArray
    proportion: FloatArray
    inflation: FloatArray
    selectivity: FloatArray
    angle: FloatArray
    unit_uncertainty: FloatArray
    net: FloatArray
    partner: list[int]


def design_figures(signal: FloatArray, free: FloatArray) -> Conditioning:
    """Conditioning of pure spectra beside baseline terms.

    Parameters
    ----------
    signal : ndarray, shape (channels, components)
        Pure spectra per unit amount.
    free : ndarray, shape (channels, terms)
        Baseline terms.

    Returns
    -------
    Conditioning

    References
    ----------
    Belsley, Kuh and Welsch, Regression Diagnostics (1980), chapter 3. Lorber, Anal. Chem. 58 (1986) 1167.
    """
    k = signal.shape[1]
    found = collinearity(np.hstack([signal, free]))
    reduced = reduce_design(signal, free)
    factor = inverse_factor(reduced)[free.shape[1] :]
    unit_uncertainty = np.linalg.norm(factor, axis=1)
    _, length = unit_columns(signal)
    with np.errstate(invalid="ignore", divide="ignore"):
        selectivity = np.where(np.isfinite(unit_uncertainty), 1.0 / (unit_uncertainty * length), 0.0)
    selectivity = np.minimum(selectivity, 1.0)
    clear = _without(signal, free)
    # the vector that reads amount j from a spectrum is nas_j / ||nas_j||^2
    finite = np.where(np.isfinite(factor), factor, 0.0)
    reader = finite @ reduced.q.T
    size = np.sum(reader**2, axis=1, keepdims=True)
    net = np.divide(reader, size, out=np.zeros_like(reader), where=size > 0)
    with np.errstate(divide="ignore"):
        inflation = 1.0 / selectivity**2
    angle = _angles(clear)
    return Conditioning(found.indices, found.proportion, inflation, selectivity, angle, unit_uncertainty, net,
                        _partners(clear, selectivity, k))  # fmt: skip


def _without(signal: FloatArray, free: FloatArray) -> FloatArray:
    """Pure spectra with what the baseline terms can imitate taken out."""
    if free.shape[1] == 0:
        return signal
    q = np.linalg.qr(unit_columns(free)[0])[0]
    rest: FloatArray = signal - q @ (q.T @ signal)
    return rest


def _angles(clear: FloatArray) -> FloatArray:
    unit, _ = unit_columns(clear)
    # the chord between unit vectors keeps its digits where the cosine has lost them
    chord = np.linalg.norm(unit[:, :, None] - unit[:, None, :], axis=0)
    angle: FloatArray = np.degrees(2.0 * np.arcsin(np.clip(chord / 2.0, 0.0, 1.0)))
    return angle


def _partners(clear: FloatArray, selectivity: FloatArray, k: int) -> list[int]:
    """For each component the other one that takes over most of its signal in the worst combination."""
    unit, _ = unit_columns(clear)
    partner = []
    for j in range(k):
        others = [i for i in range(k) if i != j]
        if not others or selectivity[j] > 0.7:
            partner.append(-1)
            continue
        share = np.linalg.lstsq(unit[:, others], unit[:, j], rcond=1e-10)[0]
        partner.append(others[int(np.abs(share).argmax())])
    return partner


def dependent_groups(figures: Conditioning, k: int) -> list[tuple[float, list[int]]]:
    """Groups of components tied by a strong dependence: its condition index, and who takes part.

    A group has two or more terms (baseline terms included) with a large share of their variance on the index; where
    several indices compete for the variance their shares are added up, as Belsley, Kuh and Welsch advise.
    """
    strong = np.flatnonzero(figures.indices >= STRONG_INDEX)
    if strong.size == 0:
        return []
    share = figures.proportion[strong]
    groups = []
    for row, index in zip(share, figures.indices[strong], strict=True):
        members = np.flatnonzero(row > LARGE_SHARE)
        if members.size >= 2 and (inside := [int(j) for j in members if j < k]):
            groups.append((float(index), inside))
    if not groups:
        members = np.flatnonzero(share.sum(axis=0) > LARGE_SHARE)
        if members.size >= 2 and (inside := [int(j) for j in members if j < k]):
            groups.append((float(figures.indices[strong].max()), inside))
    return groups
