"""``joint_region``: what two amounts of a sample can be together."""

from collections.abc import Sequence

import numpy as np
import xarray as xr
from scipy.stats import chi2
from scipy.stats import f as fisher

from unmix.errors import InputError, listed
from unmix.solve.options import check_level

#: points of a boundary
_POINTS = 181


def joint_region(result: xr.Dataset, components: Sequence[str], *, level: float = 0.95) -> xr.Dataset:
    """Joint confidence region of two amounts, for every sample: an ellipse around the values found.

    Parameters
    ----------
    result : Dataset
        From ``quantify`` with pure spectra (standards give no correlation of their errors).
    components : (str, str)
        The two.
    level : float
        Coverage of the region.

    Returns
    -------
    Dataset
        ``boundary(..., component, point)``, ``correlation(...)``, ``semi_axis(..., axis)`` (the longer first) and
        ``covered_alone``: coverage that each amount's own interval would need for the same reach. NaN where a
        component is at its bound or not determined: no ellipse describes what is known there, the intervals do.

    Raises
    ------
    InputError
        When the result is another one, or the components are not two of it.

    References
    ----------
    N. R. Draper and H. Smith, Applied Regression Analysis, 3rd ed. (1998), section 5.4 (F distribution; chi-squared
    where the noise was given).

    Examples
    --------
    >>> from unmix.solve.known import quantify
    >>> from unmix.spectra import make_spectra
    >>> pure = make_spectra([[1.0, 0.5], [0.5, 1.0]], [500, 600], dim="wavelength", leading="component",
    ...                     quantity="absorptivity", labels=["a", "b"], attrs={"per": "g/L"})
    >>> sample = make_spectra([1.5, 1.5], [500, 600], dim="wavelength", quantity="absorbance")
    >>> found = quantify(sample, pure, baseline=None, noise=0.01, path_length=1)
    >>> joint_region(found, ("a", "b")).correlation.values.round(3)
    array([-0.8])
    """
    check_level(level)
    if not isinstance(result, xr.Dataset) or "correlation" not in result or "degrees_of_freedom" not in result:
        raise InputError("joint_region needs correlations, which this result does not have",
                         accepted="give the whole Dataset that quantify returned")  # fmt: skip
    names = [str(name) for name in result["component"].values]
    pair = [str(name) for name in components]
    missing = [name for name in pair if name not in names]
    if len(pair) != 2 or pair[0] == pair[1] or missing:
        raise InputError(f"components is {listed(pair)}", accepted=f"give two of {listed(names)}")
    leading = [str(dim) for dim in result["concentration"].dims if dim != "component"]
    at = [names.index(name) for name in pair]
    center, size, upper = (result[name].transpose(*leading, "component").values[..., at]
                           for name in ("concentration", "standard_uncertainty", "upper"))  # fmt: skip
    correlation = result["correlation"].transpose(*leading, "component", "component_2").values[..., at[0], at[1]]
    freedom = result["degrees_of_freedom"].transpose(*leading).values
    with np.errstate(invalid="ignore"):
        finite = np.where(freedom > 0, freedom, 1.0)
        reach = np.where(np.isinf(freedom), chi2.ppf(level, 2), 2.0 * fisher.ppf(level, 2, finite))
        free = (center > 0).all(axis=-1) & np.isfinite(upper).all(axis=-1) & (freedom > 0)
    reach = np.where(free, reach, np.nan)
    turn = np.linspace(0.0, 2.0 * np.pi, _POINTS)
    unit = np.stack([np.broadcast_to(np.cos(turn), (*correlation.shape, _POINTS)),
                     correlation[..., None] * np.cos(turn) + np.sqrt(1 - correlation[..., None] ** 2) * np.sin(turn)],
                    axis=-2)  # fmt: skip
    boundary = center[..., None] + np.sqrt(reach)[..., None, None] * size[..., None] * unit
    covariance = correlation * size[..., 0] * size[..., 1]
    middle, half = (size**2).sum(axis=-1) / 2.0, (size[..., 0] ** 2 - size[..., 1] ** 2) / 2.0
    apart = np.hypot(half, covariance)
    axes = np.sqrt(reach[..., None] * np.maximum(np.stack([middle + apart, middle - apart], axis=-1), 0.0))
    units = str(result["concentration"].attrs.get("units", ""))
    data = {
        "boundary": ((*leading, "component", "point"), boundary, {"long_name": "Boundary", "units": units}),
        "center": ((*leading, "component"), center, {"long_name": "Amounts found", "units": units}),
        "correlation": (leading, correlation, {"long_name": "Correlation of the errors", "units": "1"}),
        "semi_axis": ((*leading, "axis"), axes, {"long_name": "Half axes of the region", "units": units}),
        "covered_alone": (leading, chi2.cdf(reach, 1),
                          {"long_name": "Coverage of one amount's interval of the same reach", "units": "1"}),
    }  # fmt: skip
    coords = {str(name): c for name, c in result.coords.items() if set(c.dims) <= set(leading)}
    return xr.Dataset(data, coords={**coords, "component": pair}, attrs={
        "kind": "joint region", "title": f"{pair[0]} and {pair[1]} together", "level": level,
        "caution": result.attrs.get("caution", ""),
    })  # fmt: skip
