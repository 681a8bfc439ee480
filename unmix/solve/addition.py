"""``standard_addition``: the amount in a sample whose matrix changes the response, from additions to the sample."""

from typing import Any

import numpy as np
import xarray as xr
from scipy.stats import t as student

from unmix.errors import InputError, listed
from unmix.provenance import provenance
from unmix.solve.options import check_level
from unmix.solve.result import CAUTION

#: fewest measurements: two for the line, one to judge it by
_FEWEST = 3
#: chance that a straight line is called bent, and a slope of one another
_DOUBT = 0.01


def standard_addition(result: xr.Dataset, added: Any, component: str, *, level: float = 0.95) -> xr.Dataset:
    """Amount of a component in a sample, from spectra of the sample with known additions of it.

    Parameters
    ----------
    result : Dataset
        From ``quantify``, one row an addition (the sample itself is the addition of 0).
    added : array_like or DataArray, shape (sample,)
        What was added to each, as amounts in the measured solution, in the unit of the result.
    component : str
    level : float
        Coverage of the interval.

    Returns
    -------
    Dataset
        ``concentration`` with ``standard_uncertainty``, ``lower``, ``upper`` (Fieller's interval, unbounded where the
        slope is not determined), ``slope`` and ``intercept`` of amounts found against amounts added with their
        uncertainties, ``bent_p``, ``verdict`` and ``reason``.

    Raises
    ------
    InputError
        When the component or the amounts do not fit the result, or all additions are equal.

    Notes
    -----
    The amount is intercept over slope, so that a response that the matrix scales by a common factor does not matter; an
    offset that the matrix adds does, and no addition shows it.

    References
    ----------
    J. N. Miller and J. C. Miller, Statistics and Chemometrics for Analytical Chemistry, 6th ed. (2010), section 5.8.
    E. C. Fieller, J. R. Stat. Soc. B 16 (1954) 175.

    Examples
    --------
    >>> found = xr.Dataset({"concentration": (("sample", "component"), [[2.1], [3.0], [4.1], [5.0]])},
    ...                    coords={"component": ["dye"]})
    >>> standard_addition(found, [0.0, 1.0, 2.0, 3.0], "dye").concentration.round(2).item()
    2.12
    """
    check_level(level)
    found, x = _pairs(result, added, component)
    n = x.size
    middle, spread = x.mean(), float(np.sum((x - x.mean()) ** 2))
    slope = float(np.sum((x - middle) * (found - found.mean())) / spread)
    intercept = float(found.mean() - slope * middle)
    rest = found - intercept - slope * x
    size = float(np.sqrt(np.sum(rest**2) / (n - 2)))
    reach = float(student.ppf(0.5 + level / 2.0, n - 2))
    amount = intercept / slope if slope > 0 else np.nan
    # the textbook's standard error, to first order
    uncertainty = size / slope * np.sqrt(1.0 / n + found.mean() ** 2 / (slope**2 * spread)) if slope > 0 else np.nan
    lower, upper = _fieller(intercept, slope, size, n, middle, spread, reach)
    bent = _bent(x, rest, n)
    told, verdict = _judge(slope, size / np.sqrt(spread), bent, reach, upper, n)
    unit = str(result["concentration"].attrs.get("units", ""))

    def one(value: float, text: str, units: str = unit) -> tuple[tuple[()], float, dict[str, str]]:
        return (), float(value), {"long_name": text, "units": units}

    data = {
        "concentration": one(amount, f"Amount of {component} in the sample"),
        "standard_uncertainty": one(uncertainty, "Standard uncertainty of the amount"),
        "lower": one(lower, "Lower end of the interval"),
        "upper": one(upper, "Upper end of the interval"),
        "slope": one(slope, "Amount found for one added", "1"),
        "slope_uncertainty": one(size / np.sqrt(spread), "Standard uncertainty of the slope", "1"),
        "intercept": one(intercept, "Amount found without addition"),
        "intercept_uncertainty": one(size * np.sqrt(1.0 / n + middle**2 / spread), "Standard uncertainty of it"),
        "residual_deviation": one(size, "Standard deviation about the line"),
        "bent_p": one(bent, "p value that the line is bent", "1"),
        "found": ("addition", found, {"long_name": "Amount found", "units": unit}),
        "added": ("addition", x, {"long_name": "Amount added", "units": unit}),
        "verdict": ((), verdict, {"long_name": "Verdict", "units": ""}),
        "reason": ((), told, {"long_name": "Reason for the verdict", "units": ""}),
    }  # fmt: skip
    attrs = {"kind": "standard addition", "title": f"Standard addition of {component}", "level": level,
             "caution": CAUTION,
             **provenance("standard_addition", {"component": component, "level": level}, result=result)}  # fmt: skip
    return xr.Dataset(data, attrs=attrs)


def _pairs(result: xr.Dataset, added: Any, component: str) -> tuple[Any, Any]:
    if not isinstance(result, xr.Dataset) or "concentration" not in result:
        raise InputError(f"result is a {type(result).__name__} without amounts", accepted="give what quantify returned")
    names = [str(name) for name in result["component"].values]
    if component not in names:
        raise InputError(f"component is '{component}'", accepted=f"give one of {listed(names)}")
    amounts = result["concentration"].sel(component=component)
    if isinstance(added, xr.DataArray) and amounts.dims == added.dims and amounts.dims[0] in added.coords:
        added = added.reindex({amounts.dims[0]: amounts[amounts.dims[0]]})
    found, x = np.asarray(amounts.values, dtype=float).ravel(), np.asarray(added, dtype=float).ravel()
    if x.size != found.size:
        raise InputError(f"added has {x.size} amounts for {found.size} spectra", accepted="give one for each")
    if not np.isfinite(x).all() or (x < 0).any():
        raise InputError("added holds an amount that is missing or below zero", accepted="give 0 for the sample itself")
    good = np.isfinite(found)
    found, x = found[good], x[good]
    if x.size < _FEWEST or np.ptp(x) == 0:
        raise InputError(f"{x.size} usable measurements with {np.unique(x).size} different additions",
                         accepted=f"give {_FEWEST} or more measurements with two or more additions")  # fmt: skip
    return found, x


def _fieller(
    a: float, b: float, size: float, n: int, middle: float, spread: float, reach: float
) -> tuple[float, float]:
    """Interval of a / b for correlated a and b; everything where the slope may be zero."""
    c = (reach * size) ** 2
    aa, bb, ab = 1.0 / n + middle**2 / spread, 1.0 / spread, -middle / spread
    if b <= 0 or b**2 <= c * bb:
        return 0.0, np.inf
    half = a * b - c * ab
    root = np.sqrt(max(half**2 - (b**2 - c * bb) * (a**2 - c * aa), 0.0))
    ends = (half - root) / (b**2 - c * bb), (half + root) / (b**2 - c * bb)
    return max(ends[0], 0.0), ends[1]


def _bent(x: Any, rest: Any, n: int) -> float:
    """P value of a quadratic term; NaN where there are too few additions."""
    if n < _FEWEST + 1 or np.unique(x).size < _FEWEST + 1 or not np.any(np.abs(rest) > 0):
        return float("nan")
    columns = np.vander(x / x.max(), 3)
    solution = np.linalg.lstsq(columns, rest, rcond=None)[0]
    variance = np.sum((rest - columns @ solution) ** 2) / (n - 3) * np.linalg.inv(columns.T @ columns)[0, 0]
    return float(2.0 * student.sf(abs(solution[0]) / np.sqrt(variance), n - 3)) if variance > 0 else float("nan")


def _judge(slope: float, error: float, bent: float, reach: float, upper: float, n: int) -> tuple[str, str]:
    if not np.isfinite(upper):
        return ("The amounts found do not rise with those added: a slope of zero is not excluded, so no amount can be "
                "given."), "unsupported"  # fmt: skip
    said, verdict = [], "supported"
    if bent < _DOUBT:
        verdict = "doubtful"
        said.append(f"The amounts found bend with those added (p = {bent:.2g}): the line to extend is not straight.")
    said.append(f"One unit added is found as {slope:.3g} (standard uncertainty {error:.2g}, {n} measurements)"
                + (": the matrix changes the response, which the additions correct." if abs(slope - 1) > reach * error
                   else "."))  # fmt: skip
    return " ".join(said), verdict
