"""``quantify``: problems built from their answer, then transformed: what must change does, what must not does not."""

import json

import numpy as np
import pytest
import xarray as xr
from scipy import stats
from scipy.interpolate import CubicSpline

import unmix
from unmix.errors import InputError
from unmix.kernels.linalg import polynomial_terms
from unmix.solve import KnownSpectra
from unmix.spectra import make_spectra

#: variables that are amounts, one a sample and component
AMOUNTS = ("concentration", "standard_uncertainty", "lower", "upper", "critical_level", "detection_limit",
           "quantification_limit", "misfit_harm")  # fmt: skip


@pytest.fixture(params=["dyes", "solvents", "gases"])
def mixture(request, dyes, solvents, gases):
    return {"dyes": dyes, "solvents": solvents, "gases": gases}[request.param]


def quantified(mixture, spectra=None, pure=None, **options):
    return unmix.quantify(mixture.spectra if spectra is None else spectra,
                          mixture.pure if pure is None else pure, **options)  # fmt: skip


def assert_same(found, expected, *, rel=1e-9, names=AMOUNTS, factor=1.0):
    for name in names:
        size = np.nanmax(np.abs(expected[name].values), initial=0.0)
        got, wanted = found[name].values, factor * expected[name].values
        assert got == pytest.approx(wanted, rel=rel, abs=rel * max(size, 1e-300), nan_ok=True), name


# ---- the answer


def test_amounts_are_the_true_ones_within_their_uncertainty(mixture):
    found = quantified(mixture)
    score = (found.concentration.values - mixture.truth) / found.standard_uncertainty.values
    assert np.abs(score).max() < 5
    # a right model is flagged in one of a hundred spectra
    assert (found.verdict.values != "supported").sum() <= 1


def test_what_is_there_is_detected_and_what_is_not_is_an_upper_limit(mixture):
    found = quantified(mixture)
    there = mixture.truth > 0
    assert found.detected.values[there].all()
    assert (found.lower.values[~there] == 0).all()
    # never nought plus or minus nought: the one-sided limit at zero at least
    assert (found.upper.values[~there] > found.critical_level.values[~there] * 0.99).all()
    assert (found.lower.values <= found.concentration.values).all()
    assert (found.concentration.values <= found.upper.values).all()


def test_fit_adds_up(mixture):
    found = quantified(mixture, baseline=2)
    dim = str(found.fitted.dims[-1])
    parts = found.concentration @ found.pure_signal * found.path_factor + found.baseline
    assert parts.transpose(..., dim).values == pytest.approx(found.fitted.values, abs=1e-10)
    rest = found.measured.values - found.fitted.values
    assert found.residual.values == pytest.approx(np.where(found.used.values, rest, np.nan), nan_ok=True)


def test_noise_level_is_that_of_the_residual(dyes):
    assert quantified(dyes).noise_level.values == pytest.approx(np.full(4, dyes.noise), rel=0.2)


@pytest.mark.parametrize("options", [{}, {"baseline": None}, {"nonnegative": False}, {"noise": 1e-3}, {"level": 0.5}])
def test_answer_has_the_same_form_whatever_the_options(mixture, options):
    plain, found = quantified(mixture), quantified(mixture, **options)
    assert {name: v.dims for name, v in plain.items()} == {name: v.dims for name, v in found.items()}
    assert list(plain.coords) == list(found.coords)
    for name, variable in found.items():
        assert variable.attrs["long_name"], name
        assert "units" in variable.attrs, name
    assert found.concentration.attrs["units"] == mixture.pure.attrs["per"].split(" ")[0]
    assert plain.concentration.dims == (mixture.spectra.dims[0], "component")
    assert list(found.component.values) == list(mixture.pure.component.values)


def test_coordinates_survive(dyes, gases):
    assert quantified(dyes).label.values.tolist() == ["vat 1", "vat 2", "vat 3", "vat 4"]
    assert quantified(dyes).batch.values.tolist() == ["A", "A", "B", "B"]
    found = quantified(gases)
    assert found.concentration.dims == ("time", "component")
    assert (found.time.values == gases.spectra.time.values).all()
    assert found.batch.values.tolist() == ["A", "A", "A", "B", "B"]
    assert found.wavenumber.attrs["units"] == "cm-1"


def test_a_result_remembers_how_it_came_about(dyes):
    spectra = dyes.spectra.assign_attrs(source_sha256=json.dumps({"vat.csv": "ab" * 32}))
    found = quantified(dyes, spectra, baseline=2, level=0.9)
    assert found.attrs["kind"] == "quantify"
    assert found.attrs["method"] == "quantify"
    assert json.loads(found.attrs["settings"])["baseline"] == 2
    assert json.loads(found.attrs["inputs"])["spectra"] == {"vat.csv": "ab" * 32}
    assert json.loads(found.attrs["versions"])["unmix"] == unmix.__version__
    assert found.attrs["level"] == 0.9
    assert found.attrs["baseline"] == 2
    assert quantified(dyes, baseline=None).attrs["baseline"] == "none"
    assert isinstance(json.loads(found.attrs["assumptions"]), list)
    assert isinstance(json.loads(found.attrs["notes"]), list)
    assert "validated method" in found.attrs["caution"]
    assert "repeat from sample to sample is unknown" in found.attrs["reproducibility"]


def test_inputs_are_not_changed(mixture):
    before = mixture.spectra.copy(deep=True), mixture.pure.copy(deep=True)
    quantified(mixture)
    assert mixture.spectra.identical(before[0])
    assert mixture.pure.identical(before[1])


# ---- what must not change the answer


def test_axis_reversed(mixture):
    dim = str(mixture.spectra.dims[-1])
    backwards = {dim: slice(None, None, -1)}
    found = quantified(mixture, mixture.spectra.isel(backwards), mixture.pure.isel(backwards))
    assert_same(found, quantified(mixture))
    assert (np.diff(found[dim].values) > 0).all()


def test_dimensions_swapped(mixture):
    found = quantified(mixture, mixture.spectra.transpose(), mixture.pure.transpose())
    assert_same(found, quantified(mixture))


@pytest.mark.parametrize("order", [0, 1, 3])
def test_baseline_added(dyes, order):
    at = np.linspace(-1, 1, dyes.spectra.sizes["wavelength"])
    lifted = dyes.with_values(dyes.spectra.values + 0.2 * at**order)
    assert_same(quantified(dyes, lifted, baseline=order), quantified(dyes, baseline=order), rel=1e-8)


def test_a_high_baseline_is_no_saturation(dyes):
    lifted = dyes.with_values(dyes.spectra.values + 2.0)
    found = quantified(dyes, lifted)
    assert_same(found, quantified(dyes), rel=1e-8)
    assert (found.channels_saturated.values == 0).all()


def test_a_line_on_an_uneven_axis_is_a_line_along_the_axis(gases):
    axis = gases.spectra.wavenumber.values
    slope = 10.0 ** -(0.02 * (axis - axis[0]) / (axis[-1] - axis[0]))
    tilted = gases.spectra.copy(data=gases.spectra.values * slope)
    found, expected = quantified(gases, tilted), quantified(gases)
    assert found.concentration.values == pytest.approx(expected.concentration.values, abs=0.2)
    slopes = np.diff(found.baseline.values[0]) / np.diff(axis)
    assert slopes == pytest.approx(np.full(axis.size - 1, slopes.mean()), rel=1e-6)


def test_order_of_the_components(mixture):
    found = quantified(mixture, pure=mixture.pure[::-1])
    assert_same(found.isel(component=slice(None, None, -1)), quantified(mixture))


def test_the_rest_of_the_batch(mixture):
    whole = quantified(mixture)
    dim = mixture.spectra.dims[0]
    for i in range(mixture.spectra.sizes[dim]):
        alone = quantified(mixture, mixture.spectra.isel({dim: [i]}))
        part = whole.isel({dim: [i]})
        assert_same(alone, part, names=[*AMOUNTS, "fitted", "noise_level", "misfit_z", "misfit_limit", "lack_of_fit"])
        assert alone.verdict.values[0] == part.verdict.values[0]
        assert alone.reason.values[0] == part.reason.values[0]


def test_a_batch_larger_than_a_chunk(dyes):
    many = xr.concat([dyes.spectra] * 40, "sample")
    found = quantified(dyes, many)
    assert_same(found.isel(sample=slice(156, 160)), quantified(dyes))


def test_bad_neighbours(dyes):
    # a neighbour that is missing, saturated, blank or infinite costs the others nothing
    values = dyes.spectra.values.copy()
    values[1], values[3] = np.nan, 0.0
    values[2, 50:60] = np.inf
    found, expected = quantified(dyes, dyes.with_values(values)), quantified(dyes)
    assert_same(found.isel(sample=[0]), expected.isel(sample=[0]))
    assert found.reason.values[0] == expected.reason.values[0]


def test_single_precision(mixture):
    found = quantified(mixture, mixture.spectra.astype(np.float32), mixture.pure.astype(np.float32))
    expected = quantified(mixture)
    assert found.concentration.dtype == np.float64
    size = expected.standard_uncertainty.values
    assert np.abs((found.concentration.values - expected.concentration.values) / size).max() < 0.05


def test_a_spectrum_without_a_leading_dimension(dyes):
    one = dyes.spectra[1].drop_vars(["label", "batch"])
    found = quantified(dyes, one)
    assert found.concentration.dims == ("sample", "component")
    assert_same(found, quantified(dyes).isel(sample=[1]))


def test_an_image(dyes):
    values = np.stack([dyes.spectra.values[:3], dyes.spectra.values[[3, 2, 0]]])
    image = xr.DataArray(values, dims=("y", "x", "wavelength"),
                         coords={"wavelength": dyes.spectra.wavelength, "y": [0.1, 0.2], "x": [5, 6, 7],
                                 "lit": (("y", "x"), np.ones((2, 3)))},
                         attrs={"quantity": "absorbance"})  # fmt: skip
    found, flat = quantified(dyes, image), quantified(dyes)
    assert found.concentration.dims == ("y", "x", "component")
    assert found.fitted.dims == ("y", "x", "wavelength")
    assert found.verdict.shape == (2, 3)
    assert found.x.values.tolist() == [5, 6, 7]
    assert found.lit.dims == ("y", "x")
    assert found.concentration.values[0] == pytest.approx(flat.concentration.values[:3], rel=1e-9, abs=1e-12)
    assert found.concentration.values[1] == pytest.approx(flat.concentration.values[[3, 2, 0]], rel=1e-9, abs=1e-12)


def test_duplicated_rows_have_the_same_answer(dyes):
    found = quantified(dyes, dyes.spectra[[2, 2, 2]])
    assert (found.concentration.values == found.concentration.values[0]).all()


def test_wavenumber_for_wavelength(dyes):
    pure = make_spectra(dyes.pure.values, 1e7 / dyes.pure.wavelength.values, dim="wavenumber", quantity="absorptivity",
                        leading="component", labels=dyes.pure.component.values, attrs={"per": "mg/L"})  # fmt: skip
    found = quantified(dyes, pure=pure)
    assert_same(found, quantified(dyes), rel=1e-6)
    assert any("converted" in note for note in json.loads(found.attrs["notes"]))


def test_pure_spectra_on_a_finer_and_longer_grid(dyes):
    own, axis = dyes.pure.wavelength.values, np.arange(380.0, 740.0, 0.3)
    fine = make_spectra(CubicSpline(own, dyes.pure.values, axis=1)(axis), axis, dim="wavelength", leading="component",
                        quantity="absorptivity", labels=dyes.pure.component.values, attrs={"per": "mg/L"})  # fmt: skip
    found = quantified(dyes, pure=fine)
    size = quantified(dyes).standard_uncertainty.values
    assert np.abs((found.concentration.values - quantified(dyes).concentration.values) / size).max() < 0.2
    assert any("interpolated" in note for note in json.loads(found.attrs["notes"]))


def test_pure_spectra_that_cover_a_part(dyes):
    found = quantified(dyes, pure=dyes.pure.sel(wavelength=slice(430, 670)))
    assert found.sizes["wavelength"] == 241
    assert np.abs((found.concentration.values - dyes.truth) / found.standard_uncertainty.values).max() < 5
    assert any("60 of 301 channels" in note for note in json.loads(found.attrs["notes"]))


# ---- what must change


@pytest.mark.parametrize("factor", [2.0, 0.1, 250.0])
def test_path_doubled_concentration_halved(dyes, factor):
    assert_same(quantified(dyes, path_length=factor), quantified(dyes, path_length=1.0), factor=1 / factor)


def test_paths_of_samples_one_by_one(dyes):
    found = quantified(dyes, path_length=[1, "2 cm", "5 mm", 0.1])
    single = quantified(dyes, path_length=1)
    by = np.array([1, 2, 0.5, 0.1])[:, None]
    assert found.concentration.values == pytest.approx(single.concentration.values / by, rel=1e-9, abs=1e-12)
    assert found.path_factor.values == pytest.approx(by[:, 0])


def test_pure_spectra_scaled(dyes):
    found = quantified(dyes, pure=(dyes.pure * 1000).assign_attrs(quantity="absorptivity", per="g/L"))
    assert_same(found, quantified(dyes), factor=1e-3)
    assert found.concentration.attrs["units"] == "g/L"


@pytest.mark.parametrize("scale", [(1e-6, 1.0, 1e6), (1e6, 1e-6, 1.0)])
def test_pure_spectra_that_differ_by_1e12(dyes, scale):
    by = np.array(scale)
    found = quantified(dyes, pure=dyes.pure * by[:, None])
    expected = quantified(dyes)
    for name in AMOUNTS:
        assert found[name].values * by == pytest.approx(expected[name].values, rel=1e-6, abs=1e-9), name
    assert found.verdict.values.tolist() == expected.verdict.values.tolist()


def test_samples_added_amounts_added(dyes):
    clean = dyes.truth @ dyes.pure.values
    total = dyes.with_values(clean + clean[::-1] + 5e-4 * np.sin(1e4 * np.arange(clean.shape[1])))
    assert quantified(dyes, total).concentration.values == pytest.approx(dyes.truth + dyes.truth[::-1], abs=0.02)


def test_a_component_split_in_two_is_found_twice(solvents):
    # a spectrum cut into its carbonyl bands and the rest: both halves have the amount of the whole
    whole = solvents.pure.sel(component="ester")
    part = whole.where(whole.wavenumber > 1500, 0.0)
    names = ["alcohol", "ketone", "carbonyl", "rest"]
    pure = xr.concat([solvents.pure[:2], part, whole - part], "component", coords="minimal", compat="override")
    pure = pure.assign_coords(component=names).assign_attrs(solvents.pure.attrs)
    found = quantified(solvents, pure=pure)
    for half in ("carbonyl", "rest"):
        got = found.sel(component=half)
        score = (got.concentration.values - solvents.truth[:, 2]) / got.standard_uncertainty.values
        assert np.abs(score).max() < 5
    assert (found.verdict.values != "unsupported").all()


@pytest.mark.parametrize("factor", [1.0, 3.0, 1.0001])
def test_a_component_duplicated_is_unsupported_and_says_which(dyes, factor):
    twin = (dyes.pure[:1] * factor).assign_coords(component=["ruby"])
    found = quantified(dyes, pure=xr.concat([dyes.pure, twin], "component").assign_attrs(dyes.pure.attrs))
    with_crimson = dyes.truth[:, 0] > 0
    assert (found.verdict.values[with_crimson] == "unsupported").all()
    for reason in found.reason.values[with_crimson]:
        assert "crimson" in reason
        assert "ruby" in reason
        assert "amber" not in reason
    # nothing narrow may be said of either, and the others keep their answer
    width = (found.upper - found.lower).sel(component=["crimson", "ruby"]).values
    assert not (width < 1e3).any()
    kept = found.sel(component=["amber", "azure"])
    expected = quantified(dyes).sel(component=["amber", "azure"])
    assert_same(kept, expected, names=["concentration"], rel=1e-9)
    assert_same(kept, expected, rel=0.02)  # one more unknown, although no channel less


def test_near_twins_are_not_supported(dyes, rng):
    bent = dyes.pure[0] * (1 + 0.005 * rng.normal(size=dyes.pure.sizes["wavelength"]))
    twin = bent.expand_dims("component").assign_coords(component=["ruby"])
    found = quantified(dyes, pure=xr.concat([dyes.pure, twin], "component").assign_attrs(dyes.pure.attrs))
    assert (found.verdict.values[dyes.truth[:, 0] > 0] == "unsupported").all()


def test_a_pure_spectrum_that_is_a_baseline_is_unsupported(dyes):
    line = xr.full_like(dyes.pure[:1], 0.01).assign_coords(component=["haze"])
    pure = xr.concat([dyes.pure, line], "component").assign_attrs(dyes.pure.attrs)
    found = quantified(dyes, pure=pure)
    assert (found.verdict.values == "unsupported").all()
    assert all("haze and the baseline" in reason for reason in found.reason.values)
    assert "nan" not in "".join(found.reason.values)
    # without baseline terms it is a component like any other
    flat = dyes.with_values(dyes.spectra.values - 0.01 * np.linspace(-1, 1, 301))
    free = quantified(dyes, flat, pure=pure, baseline=None)
    assert (free.verdict.values == "supported").sum() >= 3
    assert free.concentration.sel(component="haze").values == pytest.approx([2.0] * 4, abs=0.05)  # 0.02 in all


# ---- the edges


def test_one_component(dyes):
    found = quantified(dyes, dyes.spectra[[2]], dyes.pure[:1])  # the third vat holds crimson alone
    assert found.concentration.values[0, 0] == pytest.approx(5.0, abs=0.02)
    assert found.verdict.values[0] == "supported"
    assert found.confused_with.values.tolist() == [""]


def test_a_spectrum_of_zeros_tells_nothing(dyes):
    found = quantified(dyes, dyes.with_values(np.zeros(dyes.spectra.shape)))
    assert (found.concentration.values == 0).all()
    assert (found.verdict.values == "doubtful").all()
    assert "nothing was measured" in found.reason.values[0]
    assert not np.signbit(found.concentration.values).any()


def test_a_spectrum_of_nothing_has_no_answer_and_a_reason(mixture):
    found = quantified(mixture, mixture.with_values(np.full(mixture.spectra.shape, np.nan)))
    for name in AMOUNTS:
        assert np.isnan(found[name].values).all(), name
    assert (found.verdict.values == "unsupported").all()
    assert all(reason.startswith("Only 0 channels can be used") for reason in found.reason.values)
    assert not found.detected.values.any()


def test_missing_channels_are_left_out_for_that_sample_alone(dyes):
    values = dyes.spectra.values.copy()
    values[1, 40:90] = np.nan
    found, expected = quantified(dyes, dyes.with_values(values)), quantified(dyes)
    assert_same(found.isel(sample=[0, 2, 3]), expected.isel(sample=[0, 2, 3]))
    assert found.channels_missing.values.tolist() == [0, 50, 0, 0]
    assert found.channels_used.values.tolist() == [301, 251, 301, 301]
    assert np.isnan(found.residual.values[1, 40:90]).all()
    keep = np.r_[0:40, 90:301]
    cut = quantified(dyes, dyes.spectra[[1]].isel(wavelength=keep), baseline=None)
    same = quantified(dyes, dyes.with_values(values), baseline=None).isel(sample=[1])
    assert cut.concentration.values == pytest.approx(same.concentration.values, rel=0.02, abs=0.02)
    holed, whole = (quantified(dyes, y, noise=dyes.noise) for y in (dyes.with_values(values), dyes.spectra))
    assert (holed.detection_limit.values[1] > whole.detection_limit.values[1]).all()


def test_infinite_values_are_missing_ones(dyes):
    values = dyes.spectra.values.copy()
    values[0, 100] = np.inf
    missing = values.copy()
    missing[0, 100] = np.nan
    assert_same(quantified(dyes, dyes.with_values(values)), quantified(dyes, dyes.with_values(missing)))


def test_a_channel_missing_from_a_pure_spectrum_is_left_out_for_all(dyes):
    holed = dyes.pure.copy(data=np.where(dyes.pure.wavelength == 500, np.nan, dyes.pure.values))
    found = quantified(dyes, pure=holed)
    assert (found.channels_used.values == 300).all()
    assert not found.used.values[:, 100].any()
    assert np.abs(found.concentration.values - dyes.truth).max() < 0.1


def test_as_few_channels_as_unknowns_need_the_noise(dyes):
    few = dyes.spectra.sel(wavelength=[450, 530, 610, 690])
    flat = few - 0.01 * (few.wavelength - 550) / 150
    few = few.copy(data=flat.values)
    found = quantified(dyes, few, baseline=0)
    assert (found.verdict.values == "doubtful").all()
    assert np.isnan(found.upper.values).all()
    assert "give the noise level" in found.reason.values[0]
    given = quantified(dyes, few, baseline=0, noise=dyes.noise)
    assert np.isfinite(given.upper.values).all()
    assert given.concentration.values == pytest.approx(found.concentration.values)
    score = (given.concentration.values - dyes.truth) / given.standard_uncertainty.values
    assert np.abs(score[dyes.truth > 0]).max() < 5


def test_transmittance_at_or_below_zero_is_left_out_counted_and_told(gases):
    light = gases.spectra.values.copy()
    light[1, 200:230], light[1, 230] = -1e-4, 0.0
    found = quantified(gases, gases.with_values(light))
    assert found.channels_saturated.values[1] == 31
    assert not found.used.values[1, 200:231].any()
    assert np.isnan(found.measured.values[1, 200:231]).all()
    assert found.verdict.values[1] == "doubtful"
    assert "31 of 600 channels" in found.reason.values[1]
    assert any("31 of 3000 values have a transmittance at or below zero" in text
               for text in json.loads(found.attrs["assumptions"]) + json.loads(found.attrs["notes"]))  # fmt: skip
    assert_same(found.isel(time=[0]), quantified(gases).isel(time=[0]))


def test_no_light_at_all_is_no_answer(gases):
    light = gases.spectra.values.copy()
    light[2] = 0.0
    found = quantified(gases, gases.with_values(light))
    assert found.verdict.values[2] == "unsupported"
    assert np.isnan(found.concentration.values[2]).all()


def test_pure_spectra_as_transmittance(dyes):
    attrs = {"per": "10 mg/L", "path_length": 1.0}
    dark = (10 * dyes.pure).assign_attrs(quantity="absorbance", **attrs)
    light = (10.0**-dark).assign_attrs(quantity="transmittance", **attrs)
    expected = quantified(dyes, pure=dark, path_length=1.0)
    assert_same(quantified(dyes, pure=light, path_length=1.0), expected, rel=1e-6)


def test_exact_data_are_answered_exactly_and_supported(dyes):
    for baseline in (None, 1):
        found = quantified(dyes, dyes.with_values(dyes.truth @ dyes.pure.values), baseline=baseline)
        assert found.concentration.values == pytest.approx(dyes.truth, abs=1e-9)
        assert (found.verdict.values == "supported").all()


def test_the_pure_spectra_themselves_are_samples_too(dyes):
    found = quantified(dyes, dyes.pure.assign_attrs(quantity="absorbance"), baseline=None, path_length=1)
    assert found.concentration.dims == ("sample", "component")
    assert found.concentration.values == pytest.approx(np.eye(3), abs=1e-9)


# ---- noise, intervals and limits in closed form


def unflagged(found):
    """The samples in which chance raised no flag; a flag widens the interval."""
    kept = found.isel(sample=np.flatnonzero(found.verdict.values == "supported"))
    assert kept.sizes["sample"] >= 2
    return kept


def expected_spread(mixture, baseline=1):
    axis = mixture.pure.wavelength.values
    a = np.column_stack([mixture.pure.values.T, polynomial_terms(axis, baseline)])
    return np.sqrt(np.diag(np.linalg.inv(a.T @ a)))[: mixture.pure.shape[0]]


def test_known_noise_gives_the_textbook_interval(dyes):
    found = unflagged(quantified(dyes, noise=dyes.noise, nonnegative=False))
    spread = np.tile(dyes.noise * expected_spread(dyes), (found.sizes["sample"], 1))
    assert found.standard_uncertainty.values == pytest.approx(spread, rel=1e-6)
    assert (found.upper - found.concentration).values == pytest.approx(1.959964 * spread, rel=1e-5)
    assert found.critical_level.values == pytest.approx(1.644854 * spread, rel=1e-5)
    assert found.detection_limit.values == pytest.approx(3.289707 * spread, rel=1e-5)
    assert found.quantification_limit.values == pytest.approx(10 * spread, rel=1e-6)


def test_estimated_noise_has_student_s_quantiles_of_a_short_spectrum(dyes):
    few = dyes.spectra.isel(wavelength=slice(None, None, 25))
    found = unflagged(quantified(dyes, few, nonnegative=False))
    free = few.sizes["wavelength"] - 5
    reach = (found.upper - found.concentration).values / found.standard_uncertainty.values
    assert reach == pytest.approx(np.full(reach.shape, stats.t.ppf(0.975, free)), rel=1e-5)


def test_noise_of_each_channel_weighs_it(dyes, rng):
    sd = rng.uniform(2e-4, 5e-3, dyes.pure.sizes["wavelength"])
    values = dyes.truth @ dyes.pure.values + sd * rng.normal(size=(4, sd.size))
    found = quantified(dyes, dyes.with_values(values), noise=sd, nonnegative=False, baseline=None)
    a, w = dyes.pure.values.T, 1 / sd**2
    covariance = np.linalg.inv(a.T @ (w[:, None] * a))
    assert found.concentration.values == pytest.approx((covariance @ a.T @ (w[:, None] * values.T)).T, rel=1e-7)
    assert found.standard_uncertainty.values == pytest.approx(np.tile(np.sqrt(np.diag(covariance)), (4, 1)), rel=1e-6)


def test_noise_of_each_channel_follows_regions_and_overlap(dyes):
    sd = np.full(dyes.spectra.sizes["wavelength"], dyes.noise)
    one = quantified(dyes, noise=dyes.noise, regions=[(430, 520), (560, 660)])
    assert_same(quantified(dyes, noise=sd, regions=[(430, 520), (560, 660)]), one)
    short = dyes.pure.sel(wavelength=slice(420, 680))
    assert_same(quantified(dyes, pure=short, noise=sd), quantified(dyes, pure=short, noise=dyes.noise))


@pytest.mark.parametrize(("level", "reach"), [(0.5, 0.67449), (0.9, 1.64485), (0.99, 2.57583)])
def test_level_is_that_of_the_interval(dyes, level, reach):
    found = unflagged(quantified(dyes, level=level, noise=dyes.noise, nonnegative=False))
    half = (found.upper - found.lower) / 2 / found.standard_uncertainty
    assert half.values == pytest.approx(np.full(half.shape, reach), rel=1e-4)
    assert found.attrs["level"] == level


def test_uncertainty_of_the_pure_spectra_adds_in_quadrature(dyes):
    sure = quantified(dyes)
    found = quantified(dyes, pure=dyes.pure.assign_coords(relative_uncertainty=("component", [0.02, 0.0, 0.05])))
    expected = np.hypot(sure.standard_uncertainty.values, found.concentration.values * [0.02, 0.0, 0.05])
    assert found.standard_uncertainty.values == pytest.approx(expected, rel=1e-6)
    assert found.concentration.values == pytest.approx(sure.concentration.values)


def test_signed_amounts_on_request(dyes):
    found = quantified(dyes, nonnegative=False)
    expected = np.linalg.lstsq(np.column_stack([dyes.pure.values.T, np.ones(301), np.linspace(-1, 1, 301)]),
                               dyes.spectra.values.T, rcond=None)[0][:3].T  # fmt: skip
    assert found.concentration.values == pytest.approx(expected, abs=5 * found.standard_uncertainty.values.max())
    assert found.concentration.values.min() < quantified(dyes).concentration.values.min() or expected.min() > 0
    assert quantified(dyes).concentration.values.min() >= 0.0


def test_regions_are_the_channels_inside_them(dyes):
    regions = [(430, 500), (520, 640)]
    found = quantified(dyes, regions=regions)
    axis = found.wavelength.values
    assert ((axis >= 430) & (axis <= 500) | (axis >= 520) & (axis <= 640)).all()
    assert found.sizes["wavelength"] == 71 + 121
    assert np.abs((found.concentration.values - dyes.truth) / found.standard_uncertainty.values).max() < 5
    assert (found.standard_uncertainty.values > quantified(dyes).standard_uncertainty.values * 0.9).all()


def test_intervals_cover_and_too_narrow_ones_are_caught(dyes, rng):
    # 300 mixtures of three dyes: 900 values, standard error 0.7% at 95%
    truth = rng.uniform(0, 10, (300, 3)) * (rng.random((300, 3)) < 0.7)
    values = truth @ dyes.pure.values + 0.02 + dyes.noise * rng.normal(size=(300, 301))
    found = quantified(dyes, make_spectra(values, dyes.pure.wavelength.values, dim="wavelength", quantity="absorbance"))
    missed = np.mean((found.lower.values > truth) | (found.upper.values < truth))
    assert 0.02 < missed < 0.075
    assert np.mean(found.verdict.values != "supported") < 0.04
    middle, half = (found.upper + found.lower).values / 2, (found.upper - found.lower).values / 4
    assert np.mean(np.abs(truth - middle) > half) > 0.2


# ---- what is not on the list


@pytest.mark.parametrize("height", [0.01, 0.03, 0.3])
def test_a_hidden_band_is_flagged_with_its_place_and_harm(solvents, height):
    axis = solvents.spectra.wavenumber.values
    hidden = height / (1 + ((axis - 1670) / 8) ** 2)
    values = solvents.spectra.values.copy()
    values[1] += hidden
    found = quantified(solvents, solvents.with_values(values))
    assert found.verdict.values[1] in ("doubtful", "unsupported")
    assert found.misfit_position.values[1, 0] == pytest.approx(1670, abs=6)
    assert "cm-1" in found.reason.values[1]
    # what the band does to the amounts is inside the interval
    inside = (found.lower.values[1] <= solvents.truth[1]) & (solvents.truth[1] <= found.upper.values[1])
    assert inside.all()
    assert_same(found.isel(sample=[0, 2]), quantified(solvents).isel(sample=[0, 2]))


def test_a_hidden_component_is_flagged_wherever_it_matters(dyes):
    found = quantified(dyes, pure=dyes.pure.sel(component=["crimson", "amber"]))
    wrong = (found.lower.values > dyes.truth[:, :2]) | (found.upper.values < dyes.truth[:, :2])
    silent = wrong.any(axis=1) & (found.verdict.values == "supported")
    assert not silent.any()
    assert (found.verdict.values[dyes.truth[:, 2] > 0] != "supported").all()


def test_a_component_that_the_sample_lacks_harms_nothing(dyes):
    extra = make_spectra([np.exp(-(((dyes.pure.wavelength.values - 660) / 15) ** 2))], dyes.pure.wavelength.values,
                         dim="wavelength", quantity="absorptivity", leading="component", labels=["green"])  # fmt: skip
    found = quantified(dyes, pure=xr.concat([dyes.pure, extra], "component").assign_attrs(dyes.pure.attrs))
    assert np.abs((found.concentration.values[:, :3] - dyes.truth) / found.standard_uncertainty.values[:, :3]).max() < 5
    assert (found.upper.values[:, 3] < 0.01).all()


def test_inverted_spectra_are_unsupported(dyes):
    found = quantified(dyes, dyes.with_values(-dyes.spectra.values))
    assert (found.verdict.values == "unsupported").all()


def test_percent_taken_for_fractions_is_flagged(gases):
    percent = quantified(gases, gases.with_values(100 * gases.spectra.values), baseline=None)
    assert (percent.verdict.values != "supported").all()


def test_an_axis_that_is_off_is_flagged(solvents):
    moved = solvents.spectra.assign_coords(
        wavenumber=("wavenumber", solvents.spectra.wavenumber.values + 4.0, {"units": "cm-1"})
    )
    found = quantified(solvents, moved)
    wrong = (found.lower.values > solvents.truth) | (found.upper.values < solvents.truth)
    assert not (wrong.any(axis=1) & (found.verdict.values == "supported")).any()


# ---- progress and the estimator


def test_progress_runs_up_to_the_number_of_spectra(dyes):
    seen = []
    quantified(dyes, xr.concat([dyes.spectra] * 40, "sample"), progress=seen.append)
    assert seen == sorted(seen)
    assert seen[-1] == 160
    assert len(seen) > 1


def test_estimator_gives_the_numbers_of_the_function(dyes):
    found = quantified(dyes)
    estimator = KnownSpectra(axis=dyes.pure.wavelength.values).fit(dyes.pure.values)
    assert estimator.predict(dyes.spectra.values) == pytest.approx(found.concentration.values, rel=1e-9, abs=1e-12)
    answer = estimator.analyse(dyes.spectra.values)
    assert answer.upper == pytest.approx(found.upper.values, rel=1e-9)


def test_estimator_learns_pure_spectra_from_known_amounts(dyes, rng):
    amounts = rng.uniform(0, 10, (12, 3))
    estimator = KnownSpectra(baseline=None).fit(amounts @ dyes.pure.values, amounts)
    assert estimator.pure_ == pytest.approx(dyes.pure.values, abs=1e-12)
    assert estimator.n_features_in_ == 301
    assert estimator.predict(dyes.truth @ dyes.pure.values) == pytest.approx(dyes.truth, abs=1e-8)


def test_estimator_refuses_standards_that_do_not_tell_components_apart(dyes):
    amounts = np.outer(np.arange(1.0, 6.0), [1.0, 2.0, 0.5])
    with pytest.raises(InputError, match="rank 1 do not determine 3 pure spectra"):
        KnownSpectra().fit(amounts @ dyes.pure.values, amounts)
    with pytest.raises(InputError, match=r"axis has shape \(5,\) but the spectra have 301 channels"):
        KnownSpectra(axis=np.arange(5.0)).fit(dyes.pure.values)
