"""``calibrate``: from spectra with reference values to a calibration that guards its predictions.

This module checks the input and runs the loops; ``calibration_result`` labels what they found. Predicting is done in
``prediction``, the estimator for pipelines stands in ``latent``.
"""

import json
from collections.abc import Mapping, Sequence
from functools import cached_property
from typing import Any

import numpy as np
import xarray as xr
from sklearn.pipeline import Pipeline

from unmix.diagnose.calibration import figures
from unmix.errors import InputError, listed
from unmix.kernels import FloatArray, IntArray
from unmix.kernels.pls import fit
from unmix.method import Method
from unmix.prepare.step import Step, require_same_axis
from unmix.provenance import provenance
from unmix.solve.calibration_result import assemble
from unmix.solve.calibration_verdict import Evidence
from unmix.solve.folds import Plan, make_plan
from unmix.solve.latent_model import LatentModel
from unmix.solve.options import check_level
from unmix.solve.problem import Problem, Progress, require_complete
from unmix.solve.tables import match_table
from unmix.solve.validation import choose, interval_folds, most_components, nested, permutation_test
from unmix.spectra import as_absorbance, check_spectra, labels_of, spectral_dim


class Calibration:
    """A fitted calibration: everything needed to predict, and everything that says how good it is.

    Parameters
    ----------
    data : Dataset
        The arrays of the model, its validation, limits and provenance; ``kind`` is ``calibration``.
    preparation : Method
        The steps that spectra pass before they are predicted, with all that they learnt.
    """

    def __init__(self, data: xr.Dataset, preparation: Method) -> None:
        self.data = data
        self.preparation = preparation

    @property
    def n_components(self) -> int:
        """Latent variables used."""
        return int(self.data.sizes["latent"])

    @property
    def properties(self) -> list[str]:
        """Names of the properties that it predicts."""
        return [str(name) for name in self.data["property"].values]

    @cached_property
    def model(self) -> LatentModel:
        """What predicts, as plain arrays."""
        d = self.data
        return LatentModel.from_arrays(*(d[name].values for name in (
            "x_mean", "y_mean", "rotation", "loading", "y_loading", "score_variance", "score")))  # fmt: skip

    def prepare(self, spectra: Any) -> tuple[xr.DataArray, xr.DataArray, list[str]]:
        """Spectra as the model wants them.

        Parameters
        ----------
        spectra : DataArray, dims (..., spectral)
            On the axis of the calibration.

        Returns
        -------
        given : DataArray
            Checked, as absorbance where they came as transmittance.
        prepared : DataArray
        assumptions : list of str

        Raises
        ------
        AxisError, InputError
            For another axis or another quantity than the calibration's.
        """
        given, assumptions = working(spectra)
        own = str(self.data.attrs["spectral"])
        axis = np.asarray(self.data["original_axis"].values)
        dim = spectral_dim(given)
        require_same_axis("the calibration", (own, axis), (dim, np.asarray(given[dim].values, dtype=np.float64)))
        quantity, wanted = str(given.attrs["quantity"]), str(self.data.attrs["quantity"])
        if quantity != wanted:
            raise InputError(f"spectra hold {quantity} but the calibration was made from {wanted}",
                             accepted=f"give {wanted}")  # fmt: skip
        prepared = self.preparation.apply(given) if self.preparation.steps else given
        return given, prepared, assumptions

    def __repr__(self) -> str:
        names, k = ", ".join(self.properties), self.n_components
        error = self.data["error"].sel(set="cross-validation").values
        found = ", ".join(f"{value:.4g}" for value in error)
        return f"<Calibration of {names}: {k} latent variable{'s' * (k != 1)}, SECV {found}>"


def calibrate(
    spectra: Any,
    reference: Any,
    *,
    n_components: int | None = None,
    preparation: Any = None,
    validation: Any = "k-fold",
    folds: int = 10,
    repeats: int = 5,
    groups: Any = None,
    weights: Any = None,
    max_components: int = 15,
    test: tuple[Any, Any] | None = None,
    unit: str | Mapping[str, str] | None = None,
    reference_error: float | Mapping[str, float] | None = None,
    permutations: int = 199,
    limit_level: float = 0.99,
    seed: int = 0,
    progress: Progress | None = None,
) -> Calibration:
    """Calibrate spectra against reference values by partial least squares, and prove the calibration.

    Parameters
    ----------
    spectra : DataArray, dims (sample, spectral)
        Absorbance, transmittance (converted), reflectance or intensity, without missing channels.
    reference : DataFrame, Series or DataArray, dims (sample, property)
        Reference values, matched to the spectra by name; samples without a value are left out.
    n_components : int, optional
        Latent variables; by default the smallest number within one standard error of the best.
    preparation : Method, Step, Pipeline of steps, or sequence of steps, optional
        What the spectra pass first; what it learns, it learns anew in every fold.
    validation : {'k-fold', 'repeated', 'leave-one-out', 'blocks'} or list of (train, test)
        How cross-validation parts the samples; blocks keep the order, for a process along time.
    folds, repeats : int
        Parts of ``k-fold``, ``repeated`` and ``blocks``; how often ``repeated`` parts them.
    groups : sequence or str, optional
        One entry a spectrum, or the name of a coordinate (batch, day); equal entries are never parted.
    weights : sequence of float, optional
        Weight of each spectrum in training.
    max_components : int
        Largest number of latent variables tried.
    test : (spectra, reference), optional
        A separate test set.
    unit : str or mapping, optional
        Unit of the reference values, of all or by property; by default ``reference.attrs["units"]``.
    reference_error : float or mapping, optional
        Standard deviation of the reference method itself, for comparison.
    permutations : int
        Shuffles of the permutation test; 0 for none.
    limit_level : float
        Part of samples like the calibration that stay below the limits of Q and T2.
    seed : int
        Of the random parts and shuffles.
    progress : callable, optional
        Called with the part of the work that is done and the whole.

    Returns
    -------
    Calibration
        ``data`` holds ``error``, ``bias``, ``slope``, ``r2``, ``rpd`` and more over (set, property), with the sets
        calibration (SEC), cross-validation (SECV), nested (the choice proven outside the loop that chose) and test
        (SEP); ``curve(components, property)``; ``left_out(sample, property)``; ``outlier_reason(sample)`` proposes
        outliers, none is removed; ``verdict`` and ``reason``.

    Raises
    ------
    InputError, AxisError, UnitError
        Names that match nothing, constant reference values, missing channels, too few samples, or options that
        cannot be used.

    Notes
    -----
    Intervals of predictions come from single samples left out, or from the folds where samples belong together or
    there are more than 60.

    References
    ----------
    Dayal and MacGregor, J. Chemometrics 11 (1997) 73. ASTM E1655. Barber et al., Ann. Stat. 49 (2021) 486.

    Examples
    --------
    >>> import pandas as pd
    >>> from unmix.spectra import make_spectra
    >>> rng = np.random.default_rng(0)
    >>> amount = rng.random((30, 2))
    >>> bands = np.exp(-(((np.arange(50) - np.array([[20], [30]])) / 8) ** 2))
    >>> names = [f"s{i}" for i in range(30)]
    >>> spectra = make_spectra(amount @ bands + 1e-3 * rng.normal(size=(30, 50)), 1000 + 10 * np.arange(50),
    ...                        dim="wavelength", quantity="absorbance", labels=names)
    >>> found = calibrate(spectra, pd.DataFrame({"water": amount[:, 0]}, index=names), unit="g/L", permutations=19)
    >>> found.n_components, found.data["error"].sel(set="cross-validation").values.round(3)
    (2, array([0.]))
    """
    check_level(limit_level)
    method = as_method(preparation)
    given, notes = working(spectra)
    if given.ndim != 2:
        raise InputError(f"spectra has dimensions {listed(given.dims)}", accepted="give (sample, spectral)")
    samples, values, names, more = matched(given, reference)
    kept: IntArray = np.flatnonzero(np.isfinite(values).all(axis=1))
    assumptions, more = notes + more, []
    if kept.size < values.shape[0]:
        lost = np.array(labels_of(samples))[~np.isfinite(values).all(axis=1)]
        assumptions.append(f"samples without a reference value were left out: {listed(lost)}")
    samples, values = samples[kept], values[kept]
    units = _groups(groups, given, kept)
    shares = _weights(weights, given.shape[0], kept)
    _check(values, names, n_components, max_components, permutations)
    plan = make_plan(len(values), validation, folds=folds, repeats=repeats, groups=units, seed=seed)
    problem = Problem.make(samples, values, method, shares)
    frozen = method.fit(samples)
    prepared = frozen.apply(samples) if frozen.steps else samples
    require_complete(prepared)
    evidence = _prove(problem, prepared, plan, n_components, max_components, folds, permutations, seed, progress)
    if test is not None:
        evidence.test = _tested(evidence.model, frozen, samples, test, names)
    settings = {"n_components": n_components, "validation": validation if isinstance(validation, str) else "given",
                "folds": folds, "repeats": repeats, "grouped": units is not None, "weighted": shares is not None,
                "max_components": max_components, "permutations": permutations, "limit_level": limit_level}  # fmt: skip
    data = assemble(samples, prepared, values, names, evidence, limit_level, shares)
    data = data.assign_attrs(
        assumptions=json.dumps(assumptions),
        notes=json.dumps([*evidence.remarks, *json.loads(given.attrs.get("notes", "[]"))]),
        preparation=frozen.to_text(),
        **provenance("calibrate", settings, seed=seed, spectra=given),
    )
    data["property_unit"] = ("property", _units(unit, reference, names), {"long_name": "Unit", "units": ""})
    own_error = {"long_name": "Standard deviation of the reference method", "units": "as property"}
    data["reference_error"] = ("property", _per_property(reference_error, names), own_error)
    return Calibration(data, frozen)


def working(spectra: Any) -> tuple[xr.DataArray, list[str]]:
    """Spectra in the quantity that is calibrated: transmittance as absorbance, everything else as it is."""
    found = check_spectra(spectra)
    if found.attrs.get("quantity") in ("reflectance", "intensity"):
        return found, []
    return as_absorbance(found, name="spectra")


def matched(spectra: xr.DataArray, reference: Any) -> tuple[xr.DataArray, FloatArray, list[str], list[str]]:
    """Spectra, their reference values, the names of the properties, and what was assumed."""
    table, notes = match_table(spectra, reference, name="reference", signed=True, gaps=True)
    if not len(table.columns):
        raise InputError("reference has no column of values", accepted="give one column a property")
    return spectra, table.to_numpy(dtype=float), [str(name) for name in table.columns], notes


def as_method(preparation: Any) -> Method:
    """A preparation in whatever form it was given, as a method.

    Raises
    ------
    InputError
        For something that is no step of ``unmix.prepare``: it could neither be proven nor saved.
    """
    if preparation is None:
        return Method()
    if isinstance(preparation, Method):
        return Method(preparation.steps, preparation.name)
    if isinstance(preparation, Step):
        return Method([preparation])
    steps = [step for _, step in preparation.steps] if isinstance(preparation, Pipeline) else preparation
    if not isinstance(steps, Sequence) or isinstance(steps, str):
        raise InputError(f"preparation is a {type(preparation).__name__}",
                         accepted="give a Method, or steps of unmix.prepare")  # fmt: skip
    return Method(list(steps))


def _check(values: FloatArray, names: list[str], n_components: Any, most: Any, permutations: Any) -> None:
    for name, value, least in (("n_components", n_components, 1), ("max_components", most, 1),
                               ("permutations", permutations, 0)):  # fmt: skip
        whole = isinstance(value, (int, np.integer)) and not isinstance(value, bool)
        if not (whole and value >= least) and not (name == "n_components" and value is None):
            raise InputError(f"{name} is {value!r}", accepted=f"give a whole number from {least}")
    if len(values) < 5:
        raise InputError(f"{len(values)} samples have reference values", accepted="give five or more")
    for name, spread, size in zip(names, np.ptp(values, axis=0), np.abs(values).max(axis=0), strict=True):
        if spread <= 1e-12 * size:
            raise InputError(f"the reference values of '{name}' are all {size:g}", accepted="give values that differ")


def _groups(groups: Any, spectra: xr.DataArray, kept: IntArray) -> IntArray | None:
    if groups is None:
        return None
    if isinstance(groups, str):
        if groups not in spectra.coords or spectra[groups].dims != spectra.dims[:1]:
            raise InputError(f"spectra have no coordinate '{groups}' along '{spectra.dims[0]}'",
                             accepted="give the name of one, or one entry a spectrum")  # fmt: skip
        groups = spectra[groups].values
    entries = [str(entry) for entry in np.asarray(groups).ravel()]
    if len(entries) != spectra.shape[0]:
        raise InputError(f"groups has {len(entries)} entries for {spectra.shape[0]} spectra", accepted="give one each")
    numbers: IntArray = np.unique(np.array(entries)[kept], return_inverse=True)[1]
    return numbers.ravel()


def _weights(weights: Any, n: int, kept: IntArray) -> FloatArray | None:
    if weights is None:
        return None
    found = np.asarray(weights, dtype=np.float64).ravel()
    if found.size != n:
        raise InputError(f"weights has {found.size} entries for {n} spectra", accepted="give one each")
    if not (np.isfinite(found).all() and (found > 0).all()):
        raise InputError("weights holds a value that is not above zero", accepted="leave samples of no weight out")
    # a mean of one keeps the meaning of sums over samples
    part: FloatArray = found[kept] / found[kept].mean()
    return part


def _prove(
    problem: Problem, prepared: xr.DataArray, plan: Plan, components: int | None, most: int, folds: int,
    permutations: int, seed: int, progress: Progress | None,
) -> Evidence:  # fmt: skip
    """Run every loop; a third of the progress each."""
    rows = np.asarray(prepared.values, dtype=np.float64)
    singly = interval_folds(plan, len(rows))
    limit = most_components(rows.shape[1], [*plan.rounds, singly], max(most, components or 0))
    if components is not None and components > limit:
        raise InputError(f"n_components is {components} but the training sets of the validation ({len(rows)} samples "
                         f"of {rows.shape[1]} channels in all) hold {limit} at most",
                         accepted=f"give 1 to {limit}, or more samples")  # fmt: skip

    def tick(part: int, done: int, whole: int) -> None:
        if progress is not None:
            progress(int(100 * (part + done / whole)), 300)

    choice = choose(problem, limit, plan, components)
    tick(0, 1, 1)
    outer, chosen = nested(problem, limit, plan, components, folds=folds, seed=seed, tick=lambda i, n: tick(1, i, n))
    p = permutation_test(rows, problem.values, limit, plan, permutations, seed, lambda i, n: tick(2, i, n))
    model = LatentModel.from_fit(fit(rows, problem.values, choice.components, problem.weights), len(rows))
    left = problem.leave_out(model.rotations.shape[1], singly)
    tick(2, 1, 1)
    return Evidence(plan, choice, outer, chosen, p, permutations, model, left)


def _tested(
    model: LatentModel, method: Method, samples: xr.DataArray, test: tuple[Any, Any], names: list[str]
) -> list[Any]:
    """Figures of a separate test set, one a property."""
    if not isinstance(test, tuple) or len(test) != 2:
        raise InputError("test is not a pair", accepted="give (spectra, reference)")
    others, _ = working(test[0])
    dim, own = spectral_dim(others), spectral_dim(samples)
    require_same_axis("the calibration", (own, np.asarray(samples[own].values, dtype=float)),
                      (dim, np.asarray(others[dim].values, dtype=float)))  # fmt: skip
    _, values, found, _ = matched(others, test[1])
    absent = [name for name in names if name not in found]
    if absent:
        raise InputError(f"the reference of the test set has no column {listed(absent)}",
                         accepted="name its columns as those of the calibration")  # fmt: skip
    prepared = method.apply(others) if method.steps else others
    predicted = model.guard(np.asarray(prepared.values, dtype=np.float64)).predicted
    return [figures(values[:, found.index(name)], predicted[:, j]) for j, name in enumerate(names)]


def _units(unit: Any, reference: Any, names: list[str]) -> list[str]:
    held = unit or getattr(reference, "attrs", {}).get("units", "1")
    if isinstance(held, Mapping):
        return [str(held.get(name, "1")) for name in names]
    return [str(held)] * len(names)


def _per_property(given: Any, names: list[str]) -> list[float]:
    if isinstance(given, Mapping):
        unknown = [name for name in given if name not in names]
        if unknown:
            raise InputError(f"reference_error names {listed(unknown)}", accepted=f"the properties are {listed(names)}")
        return [float(given.get(name, np.nan)) for name in names]
    return [np.nan if given is None else float(given)] * len(names)
