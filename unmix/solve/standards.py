"""``learn_pure``: pure spectra and between-sample variation from standards, replicates or mixtures of known amounts."""

import json
from typing import Any

import numpy as np
import xarray as xr

from unmix.diagnose.standards import bent, error_model, outlying, upper_limit
from unmix.errors import InputError, listed
from unmix.kernels import BoolArray, FloatArray
from unmix.kernels.noise import local_noise
from unmix.kernels.variation import choose_floor, in_own_space, learn, leave_out, like_groups, predict
from unmix.prepare.axis import select_regions
from unmix.provenance import provenance
from unmix.solve.learnt import LearntModel
from unmix.solve.tables import match_table
from unmix.spectra import as_absorbance, labels_of, rows_of, spectral_dim
from unmix.units import SPECTRAL_UNITS

#: p value below which a line counts as bent
_BENT = 0.01


def learn_pure(
    spectra: Any,
    amounts: Any,
    *,
    unit: str | None = None,
    regions: list[tuple[float, float]] | None = None,
    groups: Any = None,
) -> xr.Dataset:
    """Learn pure spectra, how measurements vary from sample to sample, and how large errors are.

    Parameters
    ----------
    spectra : DataArray, dims (sample, spectral)
        Standards or mixtures of known amounts, as absorbance or transmittance, without missing channels.
    amounts : DataFrame or DataArray, dims (sample, component)
        Known amounts; rows are matched to the spectra by name, columns are the components.
    unit : str, optional
        Unit of the amounts; by default ``amounts.attrs["units"]``.
    regions : list of (low, high), optional
        Parts of the axis to use, in its unit.
    groups : sequence, optional
        One entry a spectrum; those with equal entries are left out together when errors are found. By default
        standards of like composition.

    Returns
    -------
    Dataset
        ``pure(component, spectral)`` with ``pure_uncertainty``, ``mode(mode, spectral)`` and ``floor``: the
        between-sample variation; ``left_out(sample, component)``: amounts of each standard found without its group;
        ``error_absolute``, ``error_relative``, ``error_freedom`` (component): the error model; ``outlying(sample)``,
        ``bent(component)`` (p value), ``verdict`` and ``reason``. It is accepted as ``pure`` by ``quantify``.

    Raises
    ------
    InputError
        Names that do not match, missing or negative amounts, missing channels, or too few standards.

    Notes
    -----
    Amounts are estimated by non-negative least squares in the metric of the residuals' covariance, shrunk by a floor
    that is chosen by leaving standards out. The covariance itself does not give honest intervals; errors of left-out
    standards do, modelled as sqrt(absolute^2 + (relative x amount)^2).

    References
    ----------
    Martens and Naes, Multivariate Calibration (1989), section 3.3. Hoerl and Kennard, Technometrics 12 (1970) 55.

    Examples
    --------
    >>> import pandas as pd
    >>> from unmix.spectra import make_spectra
    >>> known = pd.DataFrame({"dye": [1.0, 2.0, 3.0, 4.0, 5.0]}, index=list("abcde"))
    >>> standards = make_spectra([[0.1, 0.21], [0.2, 0.4], [0.31, 0.6], [0.4, 0.81], [0.5, 1.0]], [500, 510],
    ...                          dim="wavelength", quantity="absorbance", labels=list("abcde"))
    >>> learn_pure(standards, known, unit="mg/L").pure.values.round(2)
    array([[0.1, 0.2]])
    """
    samples, assumptions = as_absorbance(spectra, name="spectra")
    given = samples
    if samples.ndim != 2:
        raise InputError(f"spectra has dimensions {listed(samples.dims)}", accepted="give (sample, spectral)")
    if regions is not None:
        samples = select_regions(samples, regions)
    table, more = match_table(samples, amounts)
    assumptions += more
    values = np.asarray(rows_of(samples), dtype=np.float64)
    names = [str(c) for c in table.columns]
    c = table.to_numpy(dtype=float)
    _check(values, c, samples, names)
    by = like_groups(c) if groups is None else _given_groups(groups, c)
    noise = local_noise(values)
    short = in_own_space(values)
    floor, grouped = choose_floor(short, c, noise, values.shape[1], by)
    singles = [np.array([i]) for i in range(c.shape[0])]
    alone = leave_out(short, c, floor, singles)
    model = error_model([alone, grouped], c)
    learnt = learn(values, c, floor)
    solver = LearntModel(learnt.pure, learnt.modes, floor, model, np.inf, 1.0, 0.95)
    scores, sizes = _left_out_fit(values, c, floor, solver)
    out = _outlying(short, c, floor, alone)
    p = bent(alone - c, c)
    verdict, reason = _judge(labels_of(samples), out, p, names)
    spread = np.sqrt(np.sum((values - c @ learnt.pure) ** 2, axis=0) / (c.shape[0] - c.shape[1]))
    errors = np.sqrt(np.diagonal(np.linalg.inv(c.T @ c)))[:, None] * spread
    unit = unit or str(getattr(amounts, "attrs", {}).get("units", "1"))
    dim = spectral_dim(samples)

    def over(dims: Any, array: Any, name: str, units: str = "1") -> tuple[Any, Any, dict[str, str]]:
        return dims, array, {"long_name": name, "units": units}

    data = {
        "pure": over(("component", dim), learnt.pure, "Pure spectrum per unit amount", f"absorbance per {unit}"),
        "pure_uncertainty": over(("component", dim), errors, "Standard uncertainty of the pure spectrum",
                                 f"absorbance per {unit}"),
        "mode": over(("mode", dim), learnt.modes, "Between-sample variation, one standard deviation", "absorbance"),
        "floor": over((), floor, "Standard deviation beside the modes", "absorbance"),
        "amount": over(("sample", "component"), c, "Known amount", unit),
        "left_out": over(("sample", "component"), alone, "Amount found without the standard", unit),
        "left_out_group": over(("sample", "component"), grouped, "Amount found without the standard's group", unit),
        "error_absolute": over("component", model.absolute, "Standard uncertainty at zero", unit),
        "error_relative": over("component", model.relative, "Relative standard uncertainty"),
        "error_freedom": over("component", model.freedom, "Degrees of freedom of the error model"),
        "score_limit": over((), upper_limit(scores), "Limit of the score of an unexplained band, from standards"),
        "residual_limit": over((), upper_limit(sizes), "Limit of the residual in the metric, from standards"),
        "outlying": over("sample", out, "Standard that does not agree with the others"),
        "bent": over("component", p, "p value that errors bend with the amount"),
        "verdict": over((), verdict, "Verdict", ""),
        "reason": over((), reason, "Reason for the verdict", ""),
    }  # fmt: skip
    coords = {"component": names, dim: (dim, samples[dim].values, {"units": SPECTRAL_UNITS[dim]}),
              "sample": labels_of(samples)}  # fmt: skip
    attrs = {"kind": "learnt", "title": "Pure spectra learnt from standards", "per": unit, "quantity": "absorbance",
             "assumptions": json.dumps(assumptions), "notes": given.attrs.get("notes", "[]"),
             **_path(samples),
             **provenance("learn_pure", {"unit": unit, "regions": regions}, spectra=given)}  # fmt: skip
    return xr.Dataset(data, coords=coords, attrs=attrs)


def _outlying(a: FloatArray, c: FloatArray, floor: float, alone: FloatArray) -> BoolArray:
    """Standards that do not agree with the others, each judged by errors that it had no part in, the worst first."""
    found = np.zeros(c.shape[0], dtype=np.bool_)
    errors = alone - c
    while found.sum() < c.shape[0] // 5:
        kept = np.flatnonzero(~found)
        size = error_model([c[kept] + errors[kept]], c[kept]).at(c[kept])
        z = np.divide(np.abs(errors[kept]), size, out=np.zeros_like(size), where=size > 0)
        worst = int(kept[np.argmax(z.max(axis=1))])
        rest = kept[kept != worst]
        if np.linalg.matrix_rank(c[rest]) < c.shape[1] or rest.size < c.shape[1] + 3:
            break
        without = leave_out(a[rest], c[rest], floor, [np.array([i]) for i in range(rest.size)])
        one = predict(learn(a[rest], c[rest], floor), a[[worst]]) - c[[worst]]
        if not outlying(one, error_model([without], c[rest]), c[[worst]], among=errors.size).any():
            break
        found[worst] = True
        errors[rest] = without - c[rest]
    return found


def _check(values: FloatArray, c: FloatArray, samples: xr.DataArray, names: list[str]) -> None:
    missing = ~np.isfinite(values)
    if missing.any():
        i, j = np.argwhere(missing)[0]
        dim = spectral_dim(samples)
        raise InputError(f"spectrum '{labels_of(samples)[i]}' has no value at {samples[dim].values[j]:g} "
                         f"{SPECTRAL_UNITS[dim]}", accepted="leave the channel or the standard out")  # fmt: skip
    n, k = c.shape
    few = [name for name, held in zip(names, np.count_nonzero(c, axis=0), strict=True) if held < 3]
    if few:
        raise InputError(f"component {listed(few)} is in fewer than three standards",
                         accepted="give three or more standards that hold each component")  # fmt: skip
    if n < k + 3:
        raise InputError(f"{n} standards for {k} components", accepted=f"give {k + 3} or more")
    if np.linalg.matrix_rank(c) < k:
        raise InputError("the amounts of the components always change together in the standards",
                         accepted="give standards in which every component varies on its own")  # fmt: skip


def _given_groups(groups: Any, c: FloatArray) -> list[Any]:
    entries = [str(g) for g in np.asarray(groups).ravel()]
    if len(entries) != c.shape[0]:
        raise InputError(f"groups has {len(entries)} entries for {c.shape[0]} spectra", accepted="give one each")
    found = [np.array([i for i, g in enumerate(entries) if g == name]) for name in dict.fromkeys(entries)]
    for rows in found:
        if np.linalg.matrix_rank(np.delete(c, rows, axis=0)) < c.shape[1]:
            raise InputError(f"without group '{entries[rows[0]]}' the standards do not determine every component",
                             accepted="give smaller groups")  # fmt: skip
    return found


def _left_out_fit(
    values: FloatArray, c: FloatArray, floor: float, solver: LearntModel
) -> tuple[FloatArray, FloatArray]:
    """Largest score and size of the residual of every standard, found without it."""
    scores, sizes = np.empty(c.shape[0]), np.empty(c.shape[0])
    used = np.ones((1, values.shape[1]), dtype=bool)
    for i in range(c.shape[0]):
        rest = np.arange(c.shape[0]) != i
        learnt = learn(values[rest], c[rest], floor)
        one = LearntModel(learnt.pure, learnt.modes, floor, solver.errors, np.inf, 1.0, 0.95)
        answer = one.analyse(values[i : i + 1], used)
        scores[i], sizes[i] = abs(answer.misfit_z[0]), answer.residual_excess[0]
    return scores, sizes


def _judge(labels: list[str], out: Any, p: FloatArray, names: list[str]) -> tuple[str, str]:
    found = []
    if out.any():
        found.append(f"Standard {listed(np.array(labels)[out])} does not agree with the others: it may be an outlier "
                     "or have a wrong label.")  # fmt: skip
    curved = [name for name, value in zip(names, p, strict=True) if value < _BENT]
    if curved:
        found.append(f"The errors of {listed(curved)} bend with the amount: the relation may not be a straight line.")
    if found:
        return "doubtful", " ".join(found)
    return "supported", f"The {len(labels)} standards agree with each other and with straight lines."


def _path(samples: xr.DataArray) -> dict[str, float]:
    found = samples.coords.get("path_length")
    if found is None:
        return {}
    lengths = np.unique(np.asarray(found.values, dtype=float))
    if lengths.size > 1:
        raise InputError(f"the standards have different path lengths ({lengths[0]:g} to {lengths[-1]:g} cm)",
                         accepted="give standards of one path length")  # fmt: skip
    return {} if np.isnan(lengths).any() else {"path_length": float(lengths[0])}
