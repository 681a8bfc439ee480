"""What ``conditioning`` advises for wanted detection limits: variables and sentences of its result."""

from collections.abc import Mapping
from typing import Any

import numpy as np

from unmix.diagnose.measurement import (
    PATHS,
    choose_windows,
    detection_limits,
    over_paths,
    scans_needed,
    worst,
)
from unmix.diagnose.verdict import plain_number
from unmix.errors import InputError, listed, suggestion
from unmix.kernels import BoolArray, FloatArray
from unmix.kernels.resample import broadening_weights
from unmix.kernels.stencil import weighted_sums

#: resolutions tried, as multiples of the channel spacing
_RESOLUTIONS = (2.0, 4.0, 8.0, 16.0, 32.0)
#: share of the exponent of ten to the absorbance by which each model's noise grows
_GROWTH = {"constant": 0.0, "detector": 1.0, "source": 0.5}


class Wish:
    """Checked wishes: detection limits wanted, amounts of a usual sample, and what an instrument can bear.

    Raises
    ------
    InputError
        For a component that is not there or a number that cannot be.
    """

    def __init__(
        self, wanted: Any, typical: Any, names: list[str], *, max_absorbance: float, noise_model: str
    ) -> None:
        self.wanted = along_components(wanted, names, "wanted", least=None)
        self.typical = along_components(0.0 if typical is None else typical, names, "typical", least=0.0)
        if not max_absorbance > 0:
            raise InputError(f"max_absorbance is {max_absorbance!r}", accepted="give an absorbance above zero")
        if noise_model not in _GROWTH:
            raise InputError(f"noise_model is {noise_model!r}", accepted=f"give one of {listed(_GROWTH)}")
        self.max_absorbance = float(max_absorbance)
        self.growth = _GROWTH[noise_model]


def along_components(given: Any, names: list[str], what: str, *, least: float | None) -> FloatArray:
    """One number for all components or a mapping that names each.

    Raises
    ------
    InputError
        For a name that is not there, one that is missing, or a number out of range (``least`` None: above zero).
    """
    if isinstance(given, Mapping):
        unknown = [str(name) for name in given if name not in names]
        if unknown:
            raise InputError(f"{what} names {listed(unknown)}, which is not a component{suggestion(unknown[0], names)}",
                             accepted=f"the components are {listed(names)}")  # fmt: skip
        absent = [name for name in names if name not in given]
        if absent and least is None:
            raise InputError(f"{what} has no number for {listed(absent)}", accepted="give one for every component")
        given = [given.get(name, least) for name in names]
    try:
        values = np.broadcast_to(np.asarray(given, dtype=float), (len(names),)).copy()
    except (TypeError, ValueError):
        values = np.array([np.nan])
    low = 0.0 if least is None else least
    if not np.isfinite(values).all() or (values < low).any() or (least is None and (values == 0).any()):
        raise InputError(f"{what} is {given!r}",
                         accepted=f"give numbers {'above' if least is None else 'from'} zero, one or one a component")
    return values


def advise(
    signal: FloatArray, free: FloatArray, axis: FloatArray, sd: FloatArray, usable: BoolArray, wish: Wish,
    words: tuple[list[str], str, str],
) -> tuple[dict[str, Any], list[str]]:  # fmt: skip
    """Variables and sentences about windows, path, scans and resolution.

    Parameters
    ----------
    signal : ndarray, shape (channels, components)
        At unit path.
    free : ndarray, shape (channels, terms)
    axis, sd : ndarray, shape (channels,)
    usable : ndarray of bool, shape (channels,)
    wish : Wish
    words : (components, amount unit, axis unit)

    Returns
    -------
    variables : dict
    sentences : list of str
    """
    names, amount_unit, axis_unit = words
    dark = signal @ wish.typical
    bright = usable & (dark <= wish.max_absorbance)
    noise = sd * 10.0 ** (wish.growth * np.maximum(dark, 0.0))
    present = detection_limits(signal, free, noise, bright)
    windows = choose_windows(signal, free, noise, bright, wish.wanted)
    by_path, lost = over_paths(signal, free, sd, usable, wish.typical, wish.max_absorbance, wish.growth)
    ratios = np.max(by_path / wish.wanted, axis=1)
    enough = np.flatnonzero(ratios <= 1.0)
    best = int(enough[np.argmin(np.abs(np.log(PATHS[enough])))] if enough.size else np.argmin(ratios))
    scans = scans_needed(present, wish.wanted)
    resolutions, by_resolution = _over_resolutions(signal, free, axis, noise, bright)
    edges = _edges(axis, windows.chosen)

    def per_component(values: FloatArray, text: str) -> tuple[Any, Any, dict[str, str]]:
        return "component", values, {"long_name": text, "units": amount_unit}

    variables: dict[str, Any] = {
        "wanted": per_component(wish.wanted, "Detection limit wanted"),
        "present_limit": per_component(present, "Detection limit as planned, saturated channels left out"),
        "window": (("window", "edge"), edges, {"long_name": "Recommended windows", "units": axis_unit}),
        "window_limit": per_component(windows.limit, "Detection limit with the recommended windows alone"),
        "path_multiple": ("path", PATHS, {"long_name": "Path length over the planned one", "units": "1"}),
        "path_limit": (("path", "component"), by_path, {"long_name": "Detection limit", "units": amount_unit}),
        "path_saturated": ("path", lost, {"long_name": "Share of saturated channels", "units": "1"}),
        "recommended_path": ((), float(PATHS[best]), {"long_name": "Recommended path over the planned", "units": "1"}),
        "recommended_scans": ((), scans, {"long_name": "Scans to co-add instead of one", "units": "1"}),
        "scans_limit": per_component(present / np.sqrt(max(scans, 1.0)) if np.isfinite(scans) else present,
                                     "Detection limit with so many scans"),
        "resolution": ("resolution", resolutions, {"long_name": "Full width of the line shape", "units": axis_unit}),
        "resolution_limit": (("resolution", "component"), by_resolution,
                             {"long_name": "Detection limit, channels half a width apart", "units": amount_unit}),
    }  # fmt: skip
    told = [_present(present, wish, names, amount_unit), _windows(edges, windows.limit, wish, axis_unit)]
    told += [_path(by_path[best], float(PATHS[best]), lost[best], wish), _scans(scans)]
    told += _resolution(resolutions, by_resolution, wish, axis_unit)
    return variables, [text for text in told if text]


def _edges(axis: FloatArray, chosen: BoolArray) -> FloatArray:
    padded = np.concatenate([[False], chosen, [False]])
    start, stop = np.flatnonzero(padded[1:] & ~padded[:-1]), np.flatnonzero(~padded[1:] & padded[:-1])
    return np.stack([axis[start], axis[stop - 1]], axis=1)


def _over_resolutions(
    signal: FloatArray, free: FloatArray, axis: FloatArray, noise: FloatArray, usable: BoolArray
) -> tuple[FloatArray, FloatArray]:
    """Limits for coarser resolutions, every spectral element measured with the noise of a channel."""
    spacing = float(np.median(np.diff(axis)))
    found, limits = [], []
    for multiple in _RESOLUTIONS:
        width = multiple * spacing
        if width > 0.1 * (axis[-1] - axis[0]) or not usable.all():
            break
        reached, first, weights = broadening_weights(axis, axis, width, "gaussian")
        every = np.zeros(axis.size, dtype=bool)
        at = np.flatnonzero(reached)[:: max(1, int(multiple / 2))]
        every[at] = True
        broad = np.zeros_like(signal)
        broad[reached] = np.asarray(weighted_sums(signal.T, first, weights)).T
        found.append(width)
        limits.append(detection_limits(broad, free, noise, every))
    return np.array(found), np.array(limits).reshape(len(found), signal.shape[1])


def _ratio(limit: FloatArray, wish: Wish) -> str:
    ratio = worst(limit, wish.wanted)
    return f"{plain_number(ratio, 2)} times the wanted limit, at worst" if np.isfinite(ratio) else "no limit for some"


def _present(limit: FloatArray, wish: Wish, names: list[str], unit: str) -> str:
    ratio = limit / wish.wanted
    if (ratio <= 1).all():
        return f"As planned every wanted detection limit is reached ({_ratio(limit, wish)})."
    j = int(np.argmax(ratio))
    have = f"{plain_number(float(limit[j]), 3)} {unit}" if np.isfinite(limit[j]) else "none at all"
    return (f"As planned {int((ratio > 1).sum())} of {len(names)} wanted detection limits are missed, most of all that "
            f"of {names[j]}: {have} where {plain_number(float(wish.wanted[j]), 3)} {unit} is wanted.")  # fmt: skip


def _windows(edges: FloatArray, limit: FloatArray, wish: Wish, unit: str) -> str:
    shown = ", ".join(f"{plain_number(low, 5)} to {plain_number(high, 5)}" for low, high in edges[:6])
    more = f" and {len(edges) - 6} more" if len(edges) > 6 else ""
    return f"Windows: {shown}{more} {unit} alone reach {_ratio(limit, wish)}."


def _path(limit: FloatArray, multiple: float, lost: float, wish: Wish) -> str:
    how = "Path: keep the planned one" if multiple == 1 else f"Path: {plain_number(multiple, 2)} times the planned one"
    dark = f", with {lost:.0%} of the channels saturated" if lost > 0 else ""
    return f"{how}; it reaches {_ratio(limit, wish)}{dark}."


def _scans(scans: float) -> str:
    if not np.isfinite(scans):
        return "Scans: no number of scans helps, since some components cannot be told apart."
    return "" if scans <= 1 else f"Scans: {scans:.0f} co-added in place of one reach the wanted limits."


def _resolution(widths: FloatArray, limit: FloatArray, wish: Wish, unit: str) -> list[str]:
    if not widths.size:
        return []
    ratios = [worst(one, wish.wanted) for one in limit]
    good = [i for i, ratio in enumerate(ratios) if ratio <= max(1.0, 1.1 * ratios[0])]
    return [f"Resolution: {plain_number(float(widths[good[-1]]), 3)} {unit} is fine enough "
            f"({_ratio(limit[good[-1]], wish)})."] if good else []  # fmt: skip

