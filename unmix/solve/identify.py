"""``identify``: which of many library spectra are in a sample, and what else it could be."""

import json
from collections.abc import Callable, Sequence
from typing import Any, NamedTuple

import numpy as np
import xarray as xr

from unmix.errors import InputError, listed, suggestion
from unmix.kernels import BoolArray, FloatArray
from unmix.prepare.axis import common_axis, select_regions
from unmix.provenance import provenance
from unmix.solve.known import quantify
from unmix.solve.library import Library, Sets, check_most
from unmix.solve.options import check_baseline, check_level
from unmix.solve.paths import path_of
from unmix.solve.result import CAUTION
from unmix.spectra import as_absorbance, as_pure, labels_of, rows_of, spectral_dim
from unmix.units import SPECTRAL_UNITS

#: share of the evidence with the members of the first candidate from which these count as found
_ALONE = 0.95
#: candidates with less than this share of the weight of the first are not shown
_FAINT = 1e-3
#: spectra whose cosine is above this are taken for the same
_SAME = 1.0 - 1e-9
#: along a random direction these are closer than this
_CLOSE = 1e-3

_GRADES = ("supported", "doubtful", "unsupported")


class _Found(NamedTuple):
    sets: Sets
    answers: list[xr.Dataset]
    twins: list[tuple[int, int]]


def identify(
    spectra: Any,
    library: Any,
    *,
    max_components: int = 6,
    include: Sequence[str] = (),
    exclude: Sequence[str] | Callable[[str], bool] = (),
    candidates: int = 5,
    baseline: int | None = 1,
    regions: Sequence[tuple[float, float]] | None = None,
    level: float = 0.95,
    path_length: Any = None,
    progress: Callable[[int], None] | None = None,
) -> xr.Dataset:
    """Say which few spectra of a library make up each sample, how much of each, and what else it could be.

    Parameters
    ----------
    spectra : DataArray, dims (..., spectral)
        Samples as absorbance or transmittance (converted).
    library : DataArray, dims (component, spectral)
        Pure spectra with distinct names; interpolated to the channels of the samples. Their scale is free: amounts are
        multiples of the amount behind each.
    max_components : int
        Members of a mixture at most.
    include : sequence of str
        Members that are certainly there.
    exclude : sequence of str or callable
        Members that are certainly not, by name or by a function of the name.
    candidates : int
        Mixtures to report at most.
    baseline : int or None
        Order of the polynomial fitted beside the members; None for none.
    regions : list of (low, high), optional
        Parts of the axis to use, in its unit.
    level : float
        Coverage of the intervals.
    path_length : float, str or sequence, optional
        Of the samples, as for ``quantify``.
    progress : callable, optional
        Called with the number of spectra finished so far.

    Returns
    -------
    Dataset
        Over (sample, candidate, member): ``components`` (names, "" where a candidate has fewer), ``concentration``,
        ``standard_uncertainty``, ``lower``, ``upper``. Over (sample, candidate): ``weight`` of evidence and
        ``distinction`` (what sets it apart from the first). Over sample: ``verdict``, ``reason``, ``misfit_position``;
        over (sample, spectral) ``measured``, ``fitted`` and ``residual`` of the first candidate; ``rank`` over
        candidate.

    Raises
    ------
    InputError, AxisError, UnitError
        For an empty library, names that are not in it, or spectra that cannot be used together.

    Notes
    -----
    Sets of members are found by non-negative orthogonal matching pursuit with several sets kept alive and members
    exchanged, in the metric of the residual's own noise, and weighed by the extended Bayesian information criterion. A
    name is the spectrum that fits best among those given: a lead to be confirmed, not an identification.

    References
    ----------
    Bruckstein, Elad and Zibulevsky, IEEE Trans. Inf. Theory 54 (2008) 4813. Chen and Chen, Biometrika 95 (2008) 759.

    Examples
    --------
    >>> from unmix.spectra import make_spectra
    >>> axis = np.arange(400.0, 700, 5)
    >>> rows = np.exp(-(((axis - np.array([[450], [520], [600]])) / 20) ** 2))
    >>> library = make_spectra(rows, axis, dim="wavelength", quantity="absorptivity", leading="component",
    ...                        labels=["amber", "blue", "coral"])
    >>> sample = make_spectra(0.6 * rows[0] + 0.2 * rows[2] + 1e-3 * np.sin(axis), axis, dim="wavelength",
    ...                       quantity="absorbance")
    >>> identify(sample, library).components.values[0, 0].tolist()[:2]
    ['amber', 'coral']
    """
    check_most(max_components)
    check_most(candidates)
    check_baseline(baseline)
    check_level(level)
    samples, assumptions = as_absorbance(spectra, name="spectra")
    known, more = as_absorbance(as_pure(library, name="library"), name="library")
    given = samples
    samples, known, notes = common_axis(samples, known)
    if regions is not None:
        samples, known = select_regions(samples, regions), select_regions(known, regions)
    names = [str(name) for name in known["component"].values]
    allowed, required, told = _choices(names, np.asarray(known.values, dtype=float), include, exclude)
    paths = path_of(given, known, path_length)
    axis = np.asarray(samples[spectral_dim(samples)].values, dtype=float)
    searched = Library(np.asarray(known.values, dtype=float), axis, baseline)
    options = {"baseline": baseline, "level": level}
    rows = np.asarray(rows_of(samples), dtype=np.float64)
    found = []
    flat = samples.stack({"_": samples.dims[:-1]}).transpose("_", ...) if samples.ndim > 2 else samples
    for i, row in enumerate(rows):
        sets = _sets(searched, row, max_components, allowed, required, candidates)
        one = xr.DataArray(row[None], dims=("sample", spectral_dim(samples)),
                           coords={spectral_dim(samples): axis}, attrs=flat.attrs)  # fmt: skip
        length = float(paths.factor[i])
        twins = [(i, twin) for i in sets.members[0] for twin in searched.near_twins(i, allowed)]
        answers = [_answer(one, known, members, options, length) for members in sets.members]
        found.append(_Found(sets, answers, twins))
        if progress:
            progress(i + 1)
    result = _dataset(samples, names, found, max_components, paths.amount_unit)
    settings = {**options, "max_components": max_components, "include": list(include), "regions": regions,
                "exclude": "a function" if callable(exclude) else list(exclude),
                "candidates": candidates}  # fmt: skip
    return result.assign_attrs(
        kind="identify", title="Members of a library that make up the samples", caution=CAUTION, level=level,
        assumptions=json.dumps([*assumptions, *more, *paths.assumptions]),
        notes=json.dumps([*notes, *told, *json.loads(given.attrs.get("notes", "[]"))]),
        **provenance("identify", settings, spectra=given, library=library),
    )  # fmt: skip


def _choices(
    names: list[str], rows: FloatArray, include: Sequence[str], exclude: Sequence[str] | Callable[[str], bool]
) -> tuple[BoolArray, tuple[int, ...], list[str]]:
    """Which members may be chosen, which must be, and what was left out."""
    if isinstance(include, str) or isinstance(exclude, str):
        raise InputError("include and exclude are lists of names", accepted="give for example include=['water']")
    gone = [name for name in names if exclude(name)] if callable(exclude) else [str(name) for name in exclude]
    for what, asked in (("include", [str(name) for name in include]), ("exclude", gone)):
        absent = [name for name in asked if name not in names]
        if absent:
            raise InputError(f"{what} names {listed(absent)}, which the library does not hold"
                             f"{suggestion(absent[0], names)}", accepted="give names of the library")  # fmt: skip
    both = [str(name) for name in include if str(name) in gone]
    if both:
        raise InputError(f"{listed(both)} is included and excluded", accepted="decide for one")
    allowed = np.array([name not in gone for name in names])
    told = []
    reach = np.isfinite(rows).all(axis=1) & (np.abs(np.nan_to_num(rows)).max(axis=1) > 0)
    if not reach.all():
        told.append(f"members without signal in these channels were left out: {listed(np.array(names)[~reach])}")
    for i, twin in _same(np.nan_to_num(rows), reach):
        reach[i] = False
        told.append(f"'{names[i]}' has the same spectrum as '{names[twin]}', which stands for both")
    if not (allowed & reach).any():
        raise InputError("no member of the library may be chosen", accepted="exclude fewer, or widen the regions")
    required = tuple(sorted(names.index(str(name)) for name in include))
    return allowed & reach, required, told


def _same(rows: FloatArray, reach: BoolArray) -> list[tuple[int, int]]:
    """Later spectra that are the same as an earlier one up to a factor: neighbours along one random direction."""
    places = np.flatnonzero(reach)
    length = np.linalg.norm(rows[places], axis=1)
    shade = rows[places] @ np.random.default_rng(0).standard_normal(rows.shape[1]) / length
    order = np.argsort(shade, kind="stable")
    found: list[tuple[int, int]] = []
    start = 0
    for end in range(1, order.size + 1):
        if end < order.size and shade[order[end]] - shade[order[end - 1]] < _CLOSE:
            continue
        group = np.sort(order[start:end])
        unit = rows[places[group]] / length[group, None]
        kept: list[int] = []
        for k in range(group.size):
            twin = next((j for j in kept if float(unit[j] @ unit[k]) > _SAME), None)
            if twin is None:
                kept.append(k)
            else:
                found.append((int(places[group[k]]), int(places[group[twin]])))
        start = end
    return sorted(found)


def _sets(
    library: Library, row: FloatArray, most: int, allowed: BoolArray, required: tuple[int, ...], number: int
) -> Sets:
    good = np.isfinite(row)
    if good.sum() < library.free.shape[1] + len(required) + 3 or not np.ptp(row[good]):
        return Sets([required], np.ones(1), 1.0, float("nan"))
    limit = min(most, int(good.sum()) - library.free.shape[1] - 2)
    found = library.search(row, most=max(limit, len(required)), allowed=allowed, required=required, number=number)
    keep = found.weight >= _FAINT * found.weight[0]
    keep[0] = True
    return found._replace(members=[m for m, k in zip(found.members, keep, strict=True) if k], weight=found.weight[keep])


def _answer(
    one: xr.DataArray, known: xr.DataArray, members: tuple[int, ...], options: dict[str, Any], path: float
) -> Any:
    """Amounts of one candidate, by ``quantify``; None for the baseline alone or too few channels."""
    if not members:
        return None
    pure = known.isel(component=list(members))
    length: dict[str, Any] = {"path_length": path} if known.attrs.get("quantity") == "absorptivity" else {}
    try:
        return quantify(one, pure.assign_attrs({**pure.attrs, "per": "1"}), **length, **options)
    except InputError:
        return None


def _dataset(
    samples: xr.DataArray, names: list[str], found: list[_Found], most: int, unit: str
) -> xr.Dataset:
    leading = tuple(str(d) for d in samples.dims[:-1])
    shape = tuple(samples.sizes[d] for d in leading)
    dim, n = spectral_dim(samples), len(found)
    count = max(len(one.sets.members) for one in found)
    texts = np.full((n, count, most), "", dtype=object)
    words = {"concentration": "Concentration", "standard_uncertainty": "Standard uncertainty of the concentration",
             "lower": "Lower end of the interval", "upper": "Upper end of the interval"}  # fmt: skip
    tables = {name: np.full((n, count, most), np.nan) for name in words}
    weight = np.full((n, count), np.nan)
    apart = np.full((n, count), "", dtype=object)
    rows = np.asarray(rows_of(samples), dtype=float)
    fitted, position = np.full(rows.shape, np.nan), np.full(n, np.nan)
    verdicts, reasons = [], []
    for i, one in enumerate(found):
        weight[i, : len(one.sets.members)] = one.sets.weight
        for c, (members, answer) in enumerate(zip(one.sets.members, one.answers, strict=True)):
            order = list(range(len(members)))
            if answer is not None:
                order = np.argsort(-answer["concentration"].values[0], kind="stable").tolist()
                for name, table in tables.items():
                    table[i, c, : len(order)] = answer[name].values[0, order]
            texts[i, c, : len(order)] = [names[members[k]] for k in order]
            apart[i, c] = "" if c == 0 else _difference(names, one.sets.members[0], members)
        first = one.answers[0]
        if first is not None:
            fitted[i] = first["fitted"].values[0]
            position[i] = first["misfit_position"].values[0, 0] if first.sizes["misfit_band"] else np.nan
        verdict, reason = _judge(one, names)
        verdicts.append(verdict)
        reasons.append(reason)

    def over(values: Any, *more: str, name: str, units: str = "1") -> tuple[Any, Any, dict[str, str]]:
        array = np.asarray(values)
        return ((*leading, *more), array.reshape(*shape, *array.shape[1:]), {"long_name": name, "units": units})

    data = {name: over(table, "candidate", "member", name=words[name], units=unit) for name, table in tables.items()}
    data["components"] = over(texts.astype(str), "candidate", "member", name="Members of the mixture", units="")
    data["weight"] = over(weight, "candidate", name="Weight of evidence")
    data["distinction"] = over(apart.astype(str), "candidate", name="What sets it apart from the first", units="")
    data["rank"] = ("candidate", np.arange(1, count + 1), {"long_name": "Rank", "units": "1"})
    data["misfit_position"] = over(position, name="Strongest band that none explains", units=SPECTRAL_UNITS[dim])
    data["measured"] = over(rows, dim, name="Measured", units="absorbance")
    data["fitted"] = over(fitted, dim, name="Fitted by the first candidate", units="absorbance")
    data["residual"] = over(rows - fitted, dim, name="Measured less fitted", units="absorbance")
    data["verdict"] = over(verdicts, name="Verdict", units="")
    data["reason"] = over(reasons, name="Reason for the verdict", units="")
    coords = {name: c for name, c in samples.coords.items() if name != dim}
    return xr.Dataset(data, coords={**coords, "label": (leading, np.array(labels_of(samples)).reshape(shape)),
                                    dim: samples[dim]})  # fmt: skip


def _difference(names: list[str], first: tuple[int, ...], other: tuple[int, ...]) -> str:
    gone = [names[i] for i in first if i not in other]
    new = [names[i] for i in other if i not in first]
    if gone and new:
        return f"{listed(new)} in place of {listed(gone)}"
    return f"with {listed(new)}" if new else f"without {listed(gone)}"


def _judge(one: _Found, names: list[str]) -> tuple[str, str]:
    first = one.answers[0]
    if not one.sets.members[0] or first is None:
        return "doubtful", "No member of the library is seen: the spectrum is baseline and noise to what can be told."
    grade, said = 0, []
    lack = float(first["lack_of_fit"].values[0])
    bands = [x for x in first["misfit_position"].values[0] if np.isfinite(x)] if first.sizes["misfit_band"] else []
    if bands:
        grade = max(1, _GRADES.index(str(first["verdict"].values[0])))
        unit = str(first["misfit_position"].attrs["units"])
        places = ", ".join(f"{x:.5g}" for x in bands[:3])
        said.append(f"None of the library's spectra explains the band at {places} {unit}: something that it does not "
                    f"hold is in the sample (lack of fit {lack:.2g}%, noise included).")  # fmt: skip
    top = set(one.sets.members[0])
    if one.sets.sure < _ALONE and len(one.sets.members) > 1:
        grade = max(grade, 1)
        others = [f"{_difference(names, one.sets.members[0], m)} ({w:.0%})" for m, w in
                  zip(one.sets.members, one.sets.weight, strict=True) if not top <= set(m)][:3]  # fmt: skip
        said.append(f"It may as well be the mixture {'; or '.join(others)}.")
    if one.twins:
        grade = max(grade, 1)
        pairs = [f"{names[i]} and {names[j]}" for i, j in one.twins[:3]]
        said.append("An error of a hundredth in a spectrum of the library would be enough to exchange "
                    f"{'; '.join(pairs)}.")  # fmt: skip
    worst = str(first["verdict"].values[0])
    if not bands and worst != "supported":
        grade = max(grade, _GRADES.index(worst))
        said.append(str(first["reason"].values[0]))
    if not said:
        return "supported", (f"Mixtures with these members hold {one.sets.sure:.1%} of the evidence, and what is left"
                             " is noise. A name is the best fit among those given, to be confirmed.")  # fmt: skip
    return _GRADES[grade], " ".join(said)
