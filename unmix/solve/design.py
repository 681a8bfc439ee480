"""Could this measurement answer at all? ``conditioning`` judges the pure spectra before any sample is measured."""

import json
from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr

from unmix.diagnose.conditioning import STRONG_INDEX, Conditioning, dependent_groups, design_figures
from unmix.diagnose.limits import limits
from unmix.diagnose.verdict import judge_design
from unmix.errors import InputError
from unmix.kernels import FloatArray
from unmix.kernels.linalg import polynomial_terms
from unmix.prepare.axis import select_regions
from unmix.provenance import provenance
from unmix.solve.options import check_baseline, check_noise
from unmix.solve.result import CAUTION
from unmix.spectra import as_absorbance, as_pure, spectral_dim
from unmix.units import SPECTRAL_UNITS, split_per


def conditioning(
    pure: Any,
    *,
    noise: Any = None,
    regions: Sequence[tuple[float, float]] | None = None,
    baseline: int | None = 1,
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

    Returns
    -------
    Dataset
        ``condition_index(term)``, ``variance_proportion(term, component)``, ``variance_inflation``,
        ``selectivity``, ``detection_limit``, ``confused_with`` over component, ``spectral_angle(component,
        component_2)`` in degrees, ``net_signal(component, spectral)``, and ``verdict`` with ``reason``.

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
    dim = spectral_dim(known)
    values = np.asarray(known.values, dtype=np.float64)
    usable = np.isfinite(values).all(axis=0)
    axis = np.asarray(known[dim].values, dtype=float)
    free = polynomial_terms(axis, baseline)
    k, terms = values.shape[0], values.shape[0] + free.shape[1]
    if usable.sum() < terms:
        raise InputError(
            f"{int(usable.sum())} usable channels cannot determine {terms} unknowns ({k} components and "
            f"{free.shape[1]} baseline terms)",
            accepted="give more channels, fewer components or a lower baseline order",
        )
    sd = None if noise is None else np.broadcast_to(np.asarray(noise, dtype=float), axis.shape)[usable]
    weight = np.ones(int(usable.sum())) if sd is None else sd.mean() / sd
    signal, free = values[:, usable].T * weight[:, None], free[usable] * weight[:, None]
    figures = design_figures(signal, free)
    at_zero = figures.unit_uncertainty * (np.nan if sd is None else sd.mean())
    names = [str(c) for c in known["component"].values]
    amount_unit, path_unit = split_per(str(known.attrs.get("per", "1")))
    verdict, reason = judge_design(dependent_groups(figures, k), figures.indices.max(), names, STRONG_INDEX)
    if known.attrs.get("quantity") == "absorptivity":
        assumptions.append(f"detection limits are for a path of 1 {path_unit or 'cm'}")
    result = _labelled(known, figures, usable, at_zero, amount_unit, names)
    result["verdict"] = ((), verdict, {"long_name": "Verdict", "units": ""})
    result["reason"] = ((), reason, {"long_name": "Reason for the verdict", "units": ""})
    settings = {"noise": noise, "regions": regions, "baseline": baseline}
    return result.assign_attrs(
        kind="conditioning",
        title="What the pure spectra allow",
        caution=CAUTION,
        baseline="none" if baseline is None else int(baseline),
        assumptions=json.dumps(assumptions),
        notes=given.attrs.get("notes", "[]"),
        **provenance("conditioning", settings, pure=pure),
    )


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
