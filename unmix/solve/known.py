"""``quantify``: amounts from known pure spectra, for labelled spectra.

The numbers come from ``model``; this module checks the input and says what was assumed and left out. The estimator for
pipelines stands in ``estimator``.
"""

import json
from collections.abc import Mapping, Sequence
from dataclasses import replace
from functools import partial
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr

from unmix.chunked import by_block, is_chunked
from unmix.diagnose.residual import MAX_BANDS
from unmix.diagnose.saturation import saturated
from unmix.errors import InputError, listed
from unmix.prepare.axis import common_axis, select_regions
from unmix.provenance import provenance
from unmix.solve.analysis import Progress
from unmix.solve.axis import read_axis
from unmix.solve.constraints import plain, read_constraints
from unmix.solve.learnt import quantify_learnt
from unmix.solve.model import KnownModel
from unmix.solve.options import (
    check_baseline,
    check_dilution,
    check_flag,
    check_level,
    check_share,
    noise_of_channels,
)
from unmix.solve.passes import noise_model as models
from unmix.solve.paths import path_of, scale_to_path
from unmix.solve.result import assemble, check_coordinates
from unmix.solve.uncertainty import Scale
from unmix.spectra import as_absorbance, as_pure, rows_of, spectral_dim

if TYPE_CHECKING:
    from unmix.method import Method

#: channels below which a correlation of the noise cannot be seen (simulated; table in DEVELOPERS.md)
FEW = 60


#: rows of even noise that pass a method to see what it makes of noise
_NOISE_ROWS = 500


def quantify(
    spectra: Any,
    pure: Any,
    *,
    nonnegative: bool = True,
    baseline: int | None = 1,
    regions: Sequence[tuple[float, float]] | None = None,
    level: float = 0.95,
    noise: Any = None,
    noise_model: str | None = None,
    path_length: Any = None,
    constraints: Mapping[str, Any] | None = None,
    path_uncertainty: float = 0.0,
    dilution: float = 1.0,
    dilution_uncertainty: float = 0.0,
    axis: str | Sequence[str] | Mapping[str, float] | None = None,
    axis_per_component: bool = False,
    method: "Method | None" = None,
    library: Any = None,
    progress: Progress | None = None,
) -> xr.Dataset:
    """Find how much of each known component is in each sample, how sure, and whether something is missing.

    Parameters
    ----------
    spectra : DataArray, dims (..., spectral)
        Samples as absorbance, transmittance (converted) or absorptivity; NaN marks a missing channel.
    pure : DataArray, dims (component, spectral)
        Pure spectra. ``attrs["per"]`` is the unit amount; absorptivity is per unit amount and path (per cm unless
        ``per`` names another length), absorbance is taken as that of one unit amount at the samples' path. The
        coordinate ``relative_uncertainty`` may say how well each is known, the coordinate ``noise`` the standard
        deviation of its channels. Interpolated to the samples' channels.
        A Dataset from ``learn_pure`` brings its own metric and errors; ``baseline`` and ``noise`` then play no part.
    nonnegative : bool
        Whether amounts are bounded at zero.
    baseline : int or None
        Order of the polynomial in the fit; None for none.
    regions : list of (low, high), optional
        Parts of the axis to use, in its unit.
    level : float
        Coverage of the intervals.
    noise : float, array_like or DataArray, optional
        Known standard deviation of a channel, in absorbance: one, or one a channel. Repeated scans of one sample or
        blank, dims (scan, spectral), give level and correlation of the noise by their differences.
    noise_model : {'constant', 'detector', 'source'}, optional
        How the noise depends on the light: constant in absorbance, constant in transmittance (the default for
        samples that come as transmittance), or as the root of the transmittance.
    path_length : float, str or sequence, optional
        Of the samples: centimetres or a text such as ``"25 um"``, one for all or one each. Takes precedence over
        the coordinate ``path_length``.
    constraints : mapping, optional
        What is known about the amounts, in their unit. ``sum``: of all; ``fixed``: component to amount; either may be
        a pair (value, standard uncertainty). ``upper``: component to largest amount. ``ratio``: pair of components,
        or ``"a:b"``, to the ratio of the first to the second. Each is tested against the spectra.
    path_uncertainty : float
        Relative standard uncertainty of the path length.
    dilution : float
        By how much the samples were diluted; amounts are those before it.
    dilution_uncertainty : float
        Relative standard uncertainty of the dilution.
    axis : str, list or mapping, optional
        Errors of the axis between samples and pure spectra that are fitted with the amounts: any of 'shift',
        'stretch', 'broadening', or these with the largest size that they may have (shift and full width of the
        broadening in units of the axis, stretch relative). What a spectrum does not determine is left at zero and
        said. Takes 0.03 to 0.2 s a spectrum.
    axis_per_component : bool
        Whether each component has its own.
    method : Method, optional
        Preparation that samples and pure spectra pass alike, once they are on common channels; every step must keep
        Beer-Lambert additivity. Settings that it holds take the place of the options above.
    library : DataArray, dims (component, spectral), optional
        Further pure spectra: where a band is not explained, the one that would explain most of it is named.
    progress : callable, optional
        Called with the number of spectra finished so far.

    Returns
    -------
    Dataset
        ``concentration``, ``standard_uncertainty``, ``lower``, ``upper``, ``detection_limit`` and more over
        (sample, component), ``contribution`` to the standard uncertainty over (sample, component, source);
        ``fitted``, ``residual`` over (sample, spectral); ``verdict`` and ``reason`` over
        sample. Attributes hold assumptions, notes and provenance.

    Raises
    ------
    InputError, AxisError, UnitError
        When the spectra, pure spectra or options cannot be used together.

    References
    ----------
    Bro and de Jong, J. Chemometrics 11 (1997) 393. IUPAC: Currie, Pure Appl. Chem. 67 (1995) 1699, for the limits.

    Examples
    --------
    Chromium(III) and cobalt(II) from two wavelengths (Harvey, Analytical Chemistry 2.0, practice exercise 10.6):

    >>> from unmix.spectra import make_spectra
    >>> pure = make_spectra([[15.2, 0.533], [5.60, 5.07]], [400, 505], dim="wavelength", leading="component",
    ...                     quantity="absorptivity", labels=["Cr", "Co"], attrs={"per": "mol/L"})
    >>> sample = make_spectra([0.336, 0.187], [400, 505], dim="wavelength", quantity="absorbance")
    >>> found = quantify(sample, pure, baseline=None, noise=0.001, path_length=1)
    >>> [f"{value:.2e}" for value in found.concentration.values[0]]
    ['8.86e-03', '3.60e-02']
    """
    options = {"nonnegative": nonnegative, "baseline": baseline, "regions": regions, "level": level, "noise": noise,
               "noise_model": noise_model, "path_length": path_length, "constraints": constraints,
               "path_uncertainty": path_uncertainty, "dilution": dilution,
               "dilution_uncertainty": dilution_uncertainty, "axis": axis,
               "axis_per_component": axis_per_component}  # fmt: skip
    if method is not None and method.solver:
        options |= method.settings_for("quantify", options)
        return quantify(spectra, pure, method=type(method)(method.steps, method.name), library=library,
                        progress=progress, **options)  # fmt: skip
    if is_chunked(spectra):
        return _by_block(spectra, pure, {**options, "method": method, "library": library})
    scale = _check(options)
    if isinstance(pure, xr.Dataset):
        _refuse_with_learnt(method, constraints, axis)
        return quantify_learnt(spectra, pure, nonnegative=nonnegative, level=level, regions=regions,
                               path_length=path_length, dilution=dilution, scale=scale, progress=progress)  # fmt: skip
    samples, assumptions = as_absorbance(spectra, name="spectra")
    known, more = as_absorbance(as_pure(pure), name="pure")
    samples = check_coordinates(samples)
    given = samples
    sd = noise_of_channels(noise, given)
    samples, known, notes = common_axis(samples, known)
    gain = None
    if method is not None:
        samples, known, gain = _prepared(samples, known, method, noise)
    if regions is not None:
        samples, known = select_regions(samples, regions), select_regions(known, regions)
    _require_enough(known, baseline)
    if noise is None and known.shape[1] < FEW:
        more.append(f"with {known.shape[1]} channels the noise is taken as independent from channel to channel; where "
                    "neighbours share it, as after smoothing, the intervals are too narrow")  # fmt: skip
    paths = path_of(given, known, path_length).diluted(dilution)
    asked = read_constraints(constraints, known["component"].values.tolist(), nonnegative=nonnegative)
    if asked is not None:
        more += asked.sentences(paths.amount_unit)
        asked = replace(asked, scale=paths.factor)
    model = models(noise_model, measured_as_transmittance=samples.attrs.get("measured_as") == "transmittance")
    along = samples[spectral_dim(samples)]
    question = read_axis(axis, along.values, per_component=axis_per_component)
    kept = None if sd is None else sd.sel({str(along.name): along}).values
    scans = kept if kept is not None and kept.ndim == 2 else None
    solver = KnownModel(scale_to_path(known, paths), along.values, baseline=baseline, nonnegative=nonnegative,
                        level=level, noise=kept if scans is None else None, noise_model=model, scans=scans,
                        relative_noise=None if gain is None else gain.sel({str(along.name): along}).values,
                        constraints=asked, axis_fit=question)  # fmt: skip
    result = assemble(samples, known, solver, paths, progress, None if library is None else _beside(library, samples),
                      scale)  # fmt: skip
    options |= {"noise": noise if scans is None else "repeated scans", "noise_model": model,
                "constraints": plain(constraints),
                "method": "" if method is None else method.to_text()}  # fmt: skip
    return result.assign_attrs(
        kind="quantify",
        level=level,
        baseline="none" if baseline is None else int(baseline),
        assumptions=json.dumps(assumptions + more + paths.assumptions),
        notes=json.dumps(notes + json.loads(given.attrs.get("notes", "[]"))),
        **provenance("quantify", options, spectra=given, pure=pure),
    )


def _check(options: Mapping[str, Any]) -> Scale:
    """Refuse options out of range; the uncertainties of path and dilution."""
    check_baseline(options["baseline"])
    check_level(options["level"])
    check_flag("nonnegative", options["nonnegative"])
    check_dilution(options["dilution"])
    return Scale(*(check_share(name, options[name]) for name in Scale._fields))


def _refuse_with_learnt(method: Any, constraints: Any, axis: Any) -> None:
    if method is not None:
        raise InputError("a method cannot prepare what was learnt already",
                         accepted="prepare the standards before learn_pure, and the samples alike")  # fmt: skip
    if constraints or axis:
        what = "constraints" if constraints else "axis"
        raise InputError(f"{what} is given with learnt pure spectra, whose errors were found without it",
                         accepted="leave them out, or give pure spectra as a DataArray")  # fmt: skip


def _by_block(spectra: xr.DataArray, pure: Any, options: dict[str, Any]) -> xr.Dataset:
    """The same for spectra in chunks, when it is asked for."""
    if isinstance(options["path_length"], Sequence) and not isinstance(options["path_length"], str):
        raise InputError("path_length holds one length a spectrum, and the spectra are in chunks",
                         accepted="give the coordinate path_length of the spectra, or one length for all")  # fmt: skip
    given: dict[str, Any] = {key: value.load() if isinstance(value, (xr.DataArray, xr.Dataset)) else value
                             for key, value in options.items()}  # fmt: skip
    known = pure.load() if isinstance(pure, (xr.DataArray, xr.Dataset)) else pure
    return by_block(partial(quantify, pure=known, **given), spectra, room={"misfit_band": MAX_BANDS})


def _beside(library: Any, samples: xr.DataArray) -> xr.DataArray:
    """Library spectra on the channels of the samples; channels that they do not reach count as zero."""
    spectra, _ = as_absorbance(as_pure(library, name="library"), name="library")
    shared, on, _ = common_axis(samples, spectra)
    dim = spectral_dim(samples)
    return on.reindex({dim: samples[dim]}) if shared.sizes[dim] < samples.sizes[dim] else on


def _prepared(
    samples: xr.DataArray, known: xr.DataArray, method: "Method", noise: Any
) -> tuple[xr.DataArray, xr.DataArray, xr.DataArray]:
    """Samples and pure spectra after the same steps, and what the steps make of even noise, channel by channel.

    Channels at flat tops are taken out before. Steps are noisier at the ends of the axis, where they see less.
    """
    method.require_additive("quantify", samples)
    method.require_additive("quantify", known)
    if noise is not None and method.steps:
        raise InputError("noise is that of the spectra as measured, and the method changes it",
                         accepted="leave noise out, so that it is found after the method")  # fmt: skip
    if samples.attrs.get("quantity") == "absorbance":
        bent, _ = saturated(np.asarray(rows_of(samples), dtype=np.float64))
        if bent.any():
            samples = samples.where(~bent.reshape(samples.shape))
            method.require_additive("quantify", samples)
    prepared: xr.DataArray = method.apply(samples)
    dim = spectral_dim(known)
    even = np.random.default_rng(20260101).standard_normal((_NOISE_ROWS, known.sizes[dim]))
    noise_rows = xr.DataArray(even, dims=("sample", dim), coords={dim: known[dim]}, attrs={"quantity": "absorbance"})
    after: xr.DataArray = method.apply(noise_rows)
    return prepared.assign_attrs(prepared="yes"), method.apply(known), after.std("sample")


def _require_enough(known: xr.DataArray, baseline: int | None) -> None:
    """Refuse fewer channels than unknowns, and pure spectra of which nothing is left."""
    k, p = known.shape
    extra = 0 if baseline is None else baseline + 1
    if p < k + extra:
        raise InputError(
            f"{p} channels cannot determine {k + extra} unknowns ({k} components"
            + (")" if baseline is None else f" and {extra} baseline terms)"),
            accepted="give more channels, fewer components or a lower baseline order (None for no baseline)",
        )
    empty = [str(name) for name, row in zip(known["component"].values, known.values, strict=True)
             if not np.any(np.nan_to_num(row))]  # fmt: skip
    if empty:
        raise InputError(f"pure spectrum {listed(empty)} is zero at every channel that is used",
                         accepted="leave it out, or use a part of the axis in which it absorbs")  # fmt: skip
