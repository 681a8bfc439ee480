"""Could this measurement answer at all? ``conditioning`` judges the pure spectra before any sample is measured."""

import json
from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr

from unmix.diagnose.conditioning import STRONG_INDEX, Conditioning, dependent_groups, design_figures
from unmix.diagnose.limits import limits
from unmix.diagnose.verdict import judge_design, plain_number
from unmix.errors import InputError, listed
from unmix.kernels import BoolArray, FloatArray
from unmix.kernels.linalg import polynomial_terms
from unmix.prepare.axis import select_regions
from unmix.provenance import provenance
from unmix.solve.advice import Wish, advise
from unmix.solve.options import check_baseline, check_noise
from unmix.solve.result import CAUTION
from unmix.spectra import as_absorbance, as_pure, spectral_dim
from unmix.units import SPECTRAL_UNITS, length_in_cm, path_factor, split_per


def conditioning(
    pure: Any,
    *,
    noise: Any = None,
    regions: Sequence[tuple[float, float]] | None = None,
    baseline: int | None = 1,
    wanted: Any = None,
    typical: Any = None,
    path_length: Any = None,
    noise_model: str = "constant",
    max_absorbance: float = 2.0,
) -> xr.Dataset:
    """Tell how well pure spectra can be told apart in a mixture, and down to which amount.

    Parameters
    ----------
    pure : DataArray, dims (component, spectral)
        Pure spectra; limits are per unit path when they hold absorptivity.
    noise : float or array_like, shape (channels,), optional
        Standard deviation of a channel, in absorbance. Without it there are no detection limits.
    regions : list of (low, high), optional
        Parts of the axis to use, in its unit.
    baseline : int or None
        Order of the polynomial that the fit will hold; None for none.
    wanted : float or mapping, optional
        Detection limits wanted, one for all components or one each, in units of amount; with ``noise``. The result
        then also says what to change to reach them.
    typical : float or mapping, optional
        Amounts of a usual sample, which darken channels.
    path_length : float or str, optional
        Planned path, in centimetres or as a text such as ``"25 um"``, where the pure spectra hold absorptivity.
    noise_model : {'constant', 'detector', 'source'}
        How noise depends on the light: constant in absorbance, in transmittance, or as the root of the light.
    max_absorbance : float
        Absorbance above which a channel is not trusted.

    Returns
    -------
    Dataset
        ``condition_index(term)``, ``variance_proportion(term, component)``, ``variance_inflation``,
        ``selectivity``, ``detection_limit``, ``confused_with`` over component, ``spectral_angle(component,
        component_2)`` in degrees, ``net_signal(component, spectral)``, and ``verdict`` with ``reason``. With ``wanted``
        also ``window(window, edge)``, ``recommended_path``, ``recommended_scans``, ``window_limit``, ``path_limit``,
        ``scans_limit``, ``resolution_limit`` (detection limits reached), and ``attrs["advice"]``, sentences as JSON.

    Raises
    ------
    InputError, AxisError, UnitError
        When the pure spectra or options cannot be used.

    References
    ----------
    Belsley, Kuh and Welsch, Regression Diagnostics (1980), chapter 3, for condition indices and proportions.
    Lorber, Anal. Chem. 58 (1986) 1167, for selectivity and net analyte signal.

    Examples
    --------
    >>> from unmix.spectra import make_spectra
    >>> pure = make_spectra([[15.2, 0.533], [5.60, 5.07]], [400, 505], dim="wavelength", leading="component",
    ...                     quantity="absorptivity", labels=["Cr", "Co"], attrs={"per": "mol/L"})
    >>> conditioning(pure, baseline=None).selectivity.values.round(4)
    array([0.6448, 0.6448])
    """
    known, assumptions = as_absorbance(as_pure(pure), name="pure")
    given = known
    if regions is not None:
        known = select_regions(known, regions)
    check_baseline(baseline)
    check_noise(noise)
    _require_noise(noise, known, wanted)
    _refuse_zero(known)
    dim = spectral_dim(known)
    values = np.asarray(known.values, dtype=np.float64)
    usable: BoolArray = np.asarray(np.isfinite(values).all(axis=0))
    axis = np.asarray(known[dim].values, dtype=float)
    free = polynomial_terms(axis, baseline)
    k = values.shape[0]
    _require_channels(int(usable.sum()), k, free.shape[1])
    path = _path(known, path_length)
    values = values * path
    sd = None if noise is None else np.broadcast_to(np.asarray(noise, dtype=float), axis.shape)[usable]
    weight = np.ones(int(usable.sum())) if sd is None else sd.mean() / sd
    signal, free = values[:, usable].T * weight[:, None], free[usable] * weight[:, None]
    figures = design_figures(signal, free)
    at_zero = figures.unit_uncertainty * (np.nan if sd is None else sd.mean())
    names = [str(c) for c in known["component"].values]
    amount_unit, path_unit = split_per(str(known.attrs.get("per", "1")))
    verdict, reason = judge_design(dependent_groups(figures, k), figures.indices.max(), names, STRONG_INDEX)
    if known.attrs.get("quantity") == "absorptivity":
        length = f"{plain_number(path, 4)} {path_unit or 'cm'}"
        assumptions.append(f"detection limits are for a path of {length}")
    result = _labelled(known, figures, usable, at_zero, amount_unit, names)
    result["verdict"] = ((), verdict, {"long_name": "Verdict", "units": ""})
    result["reason"] = ((), reason, {"long_name": "Reason for the verdict", "units": ""})
    told: list[str] = []
    if wanted is not None:
        wish = Wish(wanted, typical, names, max_absorbance=max_absorbance, noise_model=noise_model)
        spread = np.broadcast_to(np.asarray(noise, dtype=float), axis.shape)
        variables, told = advise(np.nan_to_num(values.T), polynomial_terms(axis, baseline), axis, spread, usable, wish,
                                 (names, amount_unit, SPECTRAL_UNITS[dim]))  # fmt: skip
        result = result.assign(variables)
    settings = {"noise": noise, "regions": regions, "baseline": baseline, "wanted": wanted, "typical": typical,
                "path_length": path_length, "noise_model": noise_model, "max_absorbance": max_absorbance}  # fmt: skip
    return result.assign_attrs(
        kind="conditioning",
        title="What the pure spectra allow",
        caution=CAUTION,
        baseline="none" if baseline is None else int(baseline),
        assumptions=json.dumps(assumptions),
        notes=given.attrs.get("notes", "[]"),
        advice=json.dumps(told),
        **provenance("conditioning", settings, pure=pure),
    )


def _require_noise(noise: Any, known: xr.DataArray, wanted: Any) -> None:
    if noise is None and wanted is not None:
        raise InputError("detection limits are wanted but no noise is given", accepted="give noise as well")
    p = known.shape[-1]
    if noise is not None and np.shape(noise) not in ((), (p,)):
        raise InputError(f"noise has {np.size(noise)} values for {p} channels", accepted="give one, or one a channel")


def _refuse_zero(known: xr.DataArray) -> None:
    empty = [str(name) for name, row in zip(known["component"].values, known.values, strict=True)
             if not np.any(np.nan_to_num(row))]  # fmt: skip
    if empty:
        raise InputError(f"pure spectrum {listed(empty)} is zero at every channel that is used",
                         accepted="leave it out, or use a part of the axis in which it absorbs")  # fmt: skip


def _require_channels(usable: int, k: int, free: int) -> None:
    if usable < k + free:
        raise InputError(
            f"{usable} usable channels cannot determine {k + free} unknowns ({k} components and {free} baseline terms)",
            accepted="give more channels, fewer components or a lower baseline order",
        )


def _path(known: xr.DataArray, path_length: Any) -> float:
    """The planned path in the path unit of the pure spectra."""
    if path_length is None:
        return 1.0
    if known.attrs.get("quantity") != "absorptivity":
        raise InputError("path_length is given, but the pure spectra do not hold absorptivity",
                         accepted="leave it out; the pure spectra then stand for the path that they were measured at")
    return length_in_cm(path_length) * path_factor(split_per(str(known.attrs.get("per", "1")))[1])


def _labelled(
    known: xr.DataArray,
    figures: Conditioning,
    usable: Any,
    at_zero: FloatArray,
    amount_unit: str,
    names: list[str],
) -> xr.Dataset:
    dim = spectral_dim(known)
    k = len(names)
    net = np.full(known.shape, np.nan)
    net[:, usable] = figures.net
    found = limits(at_zero, np.asarray(np.inf))
    signal_unit = f"absorbance per {amount_unit}"

    def along(values: Any, text: str, units: str = "1") -> tuple[str, Any, dict[str, str]]:
        return "component", values, {"long_name": text, "units": units}

    partner = [names[j] if j >= 0 else "" for j in figures.partner]
    data: dict[str, Any] = {
        "condition_index": ("term", figures.indices, {"long_name": "Condition index", "units": "1"}),
        "variance_proportion": (("term", "component"), figures.proportion[:, :k],
                                {"long_name": "Variance-decomposition proportion", "units": "1"}),
        "variance_inflation": along(figures.inflation, "Variance inflation by overlap"),
        "selectivity": along(figures.selectivity, "Share of the pure spectrum that is its own"),
        "spectral_angle": (("component", "component_2"), figures.angle,
                           {"long_name": "Angle between pure spectra, baseline taken out", "units": "degrees"}),
        "detection_limit": along(found.detection, "Detection limit", amount_unit),
        "quantification_limit": along(found.quantification, "Quantification limit", amount_unit),
        "confused_with": along(partner, "Component it is most easily confused with", ""),
        "pure_signal": (("component", dim), np.asarray(known.values),
                        {"long_name": "Pure spectrum per unit amount and path", "units": signal_unit}),
        "net_signal": (("component", dim), net,
                       {"long_name": "Net analyte signal per unit amount and path", "units": signal_unit}),
    }  # fmt: skip
    axis = (dim, known[dim].values, {"units": SPECTRAL_UNITS[dim]})
    return xr.Dataset(data, coords={"component": names, "component_2": names, dim: axis})
