"""What every step owes: labels, shapes, precision, company, laziness, additivity, and errors that say where."""

import dask
import numpy as np
import pytest
import xarray as xr
from sklearn.base import clone
from sklearn.cross_decomposition import PLSRegression
from sklearn.exceptions import NotFittedError
from sklearn.model_selection import cross_val_predict
from sklearn.pipeline import make_pipeline

from unmix import prepare
from unmix.errors import AxisError, InputError, UnmixWarning
from unmix.prepare import STEPS
from unmix.prepare.additivity import require_additive

# the made-up spectra are no shifted copies of the reference
pytestmark = pytest.mark.filterwarnings("ignore:Align")

#: steps after which a channel no longer stands where it stood
MOVES = {"Align", "GapDerivative", "Regions", "Resample", "Standardisation"}


def test_every_step_has_an_example(examples):
    assert {type(step).__name__ for step in examples} == set(STEPS)


def test_labels_survive(step, labelled):
    prepared = step.fit_transform(labelled)
    assert prepared.dims == labelled.dims
    for name in ("label", "batch"):
        xr.testing.assert_identical(prepared[name], labelled[name])
    assert prepared.attrs["quantity"] == "absorbance"
    assert prepared.attrs["note"] == "kept"
    assert prepared.attrs["preparation"].startswith(type(step).__name__ + "(")
    assert prepared.wavelength.attrs == {"units": "nm"}
    assert labelled.attrs.keys() == {"quantity", "note"}
    assert ("additivity" in prepared.attrs) is not step.additive


def test_plain_arrays_give_the_same_numbers(step, labelled):
    plain = step.fit_transform(labelled.values)
    assert isinstance(plain, np.ndarray)
    np.testing.assert_allclose(plain, step.fit_transform(labelled).values, rtol=1e-10, atol=1e-12)


def test_leading_dimensions_are_free(step, labelled):
    flat = step.fit(labelled).transform(labelled).values
    image = xr.DataArray(labelled.values.reshape(3, 4, -1), dims=("y", "x", "wavelength"),
                         coords={"wavelength": labelled.wavelength}, attrs=labelled.attrs)  # fmt: skip
    prepared = step.transform(image)
    assert prepared.dims == ("y", "x", "wavelength")
    np.testing.assert_allclose(prepared.values.reshape(12, -1), flat, atol=1e-9)
    single = step.transform(labelled.isel(sample=4))
    assert single.dims == ("wavelength",)
    assert single.label == "s4"
    np.testing.assert_allclose(single.values, flat[4], atol=1e-9)
    turned = step.transform(image.transpose("wavelength", "y", "x"))
    np.testing.assert_allclose(turned.transpose("y", "x", "wavelength").values, prepared.values, atol=1e-12)
    np.testing.assert_allclose(step.transform(labelled.values.reshape(3, 4, -1)).reshape(12, -1), flat, atol=1e-9)


def test_precision_is_kept(step, rows):
    double = step.fit_transform(rows)
    single = step.fit_transform(rows.astype(np.float32))
    assert double.dtype == np.float64
    assert single.dtype == np.float32
    scale = np.nanmax(np.abs(double))
    np.testing.assert_allclose(single, double, atol=1e-4 * max(scale, 1.0))


def test_a_spectrum_alone_and_in_a_crowd(step, make_rows):
    crowd = make_rows(10_000 if not isinstance(step, prepare.Align) else 1_000, seed=3)
    step.fit(crowd)
    together = step.transform(crowd)
    for row in (0, 517, crowd.shape[0] - 1):
        alone = step.transform(crowd[row : row + 1])[0]
        np.testing.assert_allclose(alone, together[row], atol=1e-9)


def test_inputs_are_not_touched_and_a_second_fit_forgets_the_first(step, labelled, make_rows):
    before = labelled.copy(deep=True)
    first = step.fit_transform(labelled)
    xr.testing.assert_identical(labelled, before)
    step.fit(make_rows(8, seed=9))
    xr.testing.assert_identical(step.fit_transform(labelled), first)


def test_lazy_arrays_stay_lazy_and_agree(step, labelled):
    def refuse(*_, **__):
        raise AssertionError("computed too early")

    step.fit(labelled)
    lazy = labelled.chunk({"sample": 5, "wavelength": 40})
    with dask.config.set(scheduler=refuse), pytest.warns(UnmixWarning, match="chunks along 'wavelength'"):
        prepared = step.transform(lazy)
    xr.testing.assert_allclose(prepared.compute(scheduler="synchronous"), step.transform(labelled), atol=1e-9)


@pytest.mark.filterwarnings("ignore::unmix.errors.UnmixWarning")
def test_missing_channels_stay_missing_and_harm_no_other_spectrum(step, labelled):
    step.fit(labelled)
    whole = step.transform(labelled).values
    holed = labelled.copy(deep=True)
    holed.values[2, 70:73] = np.nan
    prepared = step.transform(holed).values
    np.testing.assert_allclose(np.delete(prepared, 2, axis=0), np.delete(whole, 2, axis=0), atol=1e-12)
    bridged = getattr(step, "fill", "") == "interpolate"
    if type(step).__name__ not in MOVES and not bridged:
        assert np.isnan(prepared[2, 70:73]).all()
    lost = np.flatnonzero(np.isnan(prepared[2]) & ~np.isnan(whole[2]))
    assert 2 <= lost.size <= 3 + 2 * 13 or bridged


@pytest.mark.filterwarnings("ignore::unmix.errors.UnmixWarning")
def test_a_spectrum_of_nothing_stays_nothing(step, rows):
    step.fit(rows)
    nothing = np.full((2, rows.shape[1]), np.nan)
    assert np.isnan(step.transform(nothing)).all()


def test_additive_means_one_linear_map(step, make_rows):
    one, two = make_rows(4, seed=1), make_rows(4, seed=2)
    step.fit(np.concatenate([one, two]))
    mixed = step.transform(0.6 * one + 1.7 * two)
    added = 0.6 * step.transform(one) + 1.7 * step.transform(two)
    same = np.allclose(mixed, added, atol=1e-9 * np.nanmax(np.abs(added)), equal_nan=True)
    assert same is step.additive


def test_additivity_with_missing_channels_is_as_declared(examples, make_rows):
    differs = {}
    for step in examples:
        if not step.additive:
            continue
        one, two = make_rows(4, seed=1), make_rows(4, seed=2)
        mixed = 0.6 * one + 1.7 * two
        step.fit(np.concatenate([one, two]))
        added = 0.6 * step.transform(one) + 1.7 * step.transform(two)
        mixed[:, [4, 5, 60, 61, 62, 90, 91]] = np.nan
        prepared = step.transform(mixed)
        kept = np.isfinite(prepared)
        same = np.allclose(prepared[kept], added[kept], atol=1e-9 * np.nanmax(np.abs(added)))
        assert same or step.complete_only, step
        differs[type(step)] = differs.get(type(step), False) or not same
    assert {kind for kind, found in differs.items() if found} == {kind for kind in differs if kind.complete_only}


def test_what_was_learned_can_be_given(step, labelled, make_rows):
    step.fit(labelled)
    frozen = step.frozen()
    assert not frozen.learns
    later = labelled.copy(data=make_rows(12, seed=5))
    np.testing.assert_allclose(frozen.fit_transform(later).values, step.transform(later).values, atol=1e-12)


def test_names_and_frames_of_scikit_learn(step, rows):
    names = step.fit(rows).get_feature_names_out()
    frame = clone(step).set_output(transform="pandas").fit_transform(rows)
    assert list(frame.columns) == list(names)
    np.testing.assert_array_equal(frame.to_numpy(), step.transform(rows))


def test_another_axis_is_refused(step, labelled):
    step.fit(labelled)
    moved = labelled.assign_coords(wavelength=labelled.wavelength + 0.5)
    with pytest.raises(
        AxisError, match=r"works on 160 channels, 0 to 159 nm but is given 160 channels, 0.5 to 159.5 nm"
    ):
        step.transform(moved.assign_coords(wavelength=("wavelength", moved.wavelength.values, {"units": "nm"})))
    with pytest.raises(ValueError, match="159 features"):
        step.transform(labelled.values[:, :-1])
    step.fit(labelled.values)
    with pytest.raises(AxisError, match="was fitted on a plain array"):
        step.transform(labelled)


def test_infinite_values_are_refused_by_name(step, labelled):
    labelled.values[3, 5] = np.inf
    with pytest.raises(
        InputError, match="spectrum 's3' is infinite at channel 6 of 160; mark a missing channel by NaN"
    ):
        step.fit(labelled)


def test_not_before_fit(labelled):
    with pytest.raises(NotFittedError):
        prepare.SavitzkyGolay().transform(labelled)


def test_labelled_spectra_pass_a_pipeline_and_a_cross_validation(labelled):
    amounts = labelled.values[:, 60]
    model = make_pipeline(prepare.SavitzkyGolay(derivative=1), prepare.StandardNormalVariate(), PLSRegression(3))
    predicted = cross_val_predict(model, labelled, amounts, cv=4)
    np.testing.assert_allclose(predicted, cross_val_predict(model, labelled.values, amounts, cv=4), atol=1e-9)


def test_preparation_is_written_down_step_by_step(labelled):
    first = prepare.Regions(keep=[(10, 150)]).fit_transform(labelled)
    second = prepare.StandardNormalVariate().fit_transform(first)
    third = prepare.Normalise().fit_transform(second)
    assert third.attrs["preparation"] == (
        "Regions(drop=None, keep=[[10, 150]]); StandardNormalVariate(); Normalise(by=area, region=None, to=1)"
    )
    assert third.attrs["additivity"].startswith("lost by StandardNormalVariate: every spectrum is divided")


def test_refusals_name_the_step_and_the_alternative(labelled):
    with pytest.raises(InputError) as caught:
        require_additive([prepare.SavitzkyGolay(), prepare.AsymmetricLeastSquares()], "quantify")
    assert str(caught.value) == (
        "quantify needs spectra in which contributions add up, and AsymmetricLeastSquares does not keep that: the "
        "baseline is estimated from each spectrum and takes a different part of the bands with it; put baseline terms "
        "into the fit (baseline=0, 1 or 2), or take a derivative with SavitzkyGolay"
    )
    scaled = prepare.Normalise().fit_transform(labelled)
    with pytest.raises(InputError, match="additivity was lost by Normalise: every spectrum is divided by its own size"):
        require_additive([], "quantify", scaled)
    labelled.values[0, 0] = np.nan
    require_additive([prepare.SavitzkyGolay()], "quantify", labelled)
    with pytest.raises(
        InputError, match=r"WhittakerSmoother is the same linear map .* only where no channel is missing"
    ):
        require_additive([prepare.WhittakerSmoother()], "quantify", labelled)


def test_every_refusal_has_a_reason_and_an_alternative(examples):
    for step in examples:
        assert step.additive or (step.lost_because and step.instead)


@pytest.mark.parametrize(
    ("make", "text"),
    [
        (lambda: prepare.SavitzkyGolay(window=10), "window is 10; give an odd whole number from 1"),
        (lambda: prepare.SavitzkyGolay(window=161), "window is 161, but there are 160"),
        (lambda: prepare.SavitzkyGolay(window=5, order=5), "order is 5, too high for a window of 5"),
        (lambda: prepare.SavitzkyGolay(order=1, derivative=2), "derivative is 2, but a polynomial of order 1 has none"),
        (lambda: prepare.GapDerivative(gap=2), "gap is 2; give an odd whole number"),
        (lambda: prepare.GapDerivative(segment=61, gap=61), "span 183 channels, but there are 160"),
        (lambda: prepare.WhittakerSmoother(penalty=0), "penalty is 0; give a number above 0, or None"),
        (lambda: prepare.WhittakerSmoother(difference=4), "difference is 4; give a whole number from 1 to 3"),
        (lambda: prepare.AsymmetricLeastSquares(penalty=-1.0), "penalty is -1.0; give a number above 0"),
        (lambda: prepare.AsymmetricLeastSquares(asymmetry=1.5), "asymmetry is 1.5; give a number above 0 to 1"),
        (lambda: prepare.AsymmetricLeastSquares(weights=np.zeros(160)), "weights are negative, or zero"),
        (lambda: prepare.AdaptiveReweighted(iterations=0), "iterations is 0; give a whole number from 1"),
        (lambda: prepare.PolynomialBaseline(order=160), "order is 160, too high for 160"),
        (lambda: prepare.PolynomialBaseline(regions=[(5.0, 2.0)]), r"\(5, 2\) nm ends before it starts"),
        (lambda: prepare.Regions(keep=[(100.0, 400.0)]), r"\(100, 400\) nm reaches beyond the axis"),
        (lambda: prepare.Regions(drop=[(0.0, 159.0)]), "leave no channel"),
        (lambda: prepare.MultiplicativeScatterCorrection(np.ones(100)), "reference has 100 channels"),
        (lambda: prepare.MultiplicativeScatterCorrection(np.ones(160)), "the reference is constant"),
        (lambda: prepare.MultiplicativeScatterCorrection("mean"), "reference is 'mean'; give a spectrum"),
        (lambda: prepare.ExtendedScatterCorrection(interferents=np.ones((1, 160))), "of 5 terms only 4"),
        (lambda: prepare.Normalise("height"), "by is 'height'; give one of 'area', 'maximum'"),
        (lambda: prepare.Normalise("band"), "by is 'band' and region is None"),
        (lambda: prepare.Normalise("area", region=(1.0, 2.0)), "by is 'area' and region is"),
        (lambda: prepare.Normalise(to=0.0), "to is 0.0; give a number above 0"),
        (lambda: prepare.AutoScale(scale=np.zeros(160)), "scale is 0 at a channel"),
        (lambda: prepare.MaskSaturated(limit=-1.0), "limit is -1.0"),
        (lambda: prepare.SpikeRemoval(fill="zero"), "fill is 'zero'; give one of 'missing', 'interpolate'"),
        (lambda: prepare.Resample(spacing=1.0, axis=[1.0, 2.0]), "both spacing and axis are given"),
        (lambda: prepare.Resample(axis=[1.0, 200.0]), "axis runs from 1 to 200 nm, beyond that of the spectra"),
        (lambda: prepare.Resample(axis=[2.0, 1.0]), "axis does not increase"),
        (lambda: prepare.Resample(resolution=2.0, from_resolution=2.0), "a spectrum cannot be sharpened"),
        (lambda: prepare.Resample(resolution=2.1, from_resolution=2.0), "narrower than the channel spacing"),
        (lambda: prepare.Resample(resolution=120.0), "reaches beyond both ends of the axis"),
        (lambda: prepare.Resample(spacing=500.0, axis=None), None),
        (lambda: prepare.ExternalParameterOrthogonalisation(components=50), "differ in 11 directions only"),
        (lambda: prepare.ExternalParameterOrthogonalisation(basis=np.ones((1, 160))), "rows of basis are not"),
        (lambda: prepare.GeneralisedLeastSquaresWeighting(basis=np.eye(160)[:2]), "kept has shape"),
        (lambda: prepare.VapourRemoval(np.ones(160)), "of 1 vapours only 0 can be told apart"),
        (lambda: prepare.VapourRemoval(np.full(160, np.nan)), "vapour has no finite value at channel 1"),
    ],
)  # fmt: skip
def test_what_cannot_be_used_is_said(make, text, labelled):
    step = make()
    if text is None:
        # 0 is a whole multiple of any spacing, so one channel is left
        assert step.fit_transform(labelled).sizes["wavelength"] == 1
        return
    with pytest.raises(InputError, match=text):
        step.fit(labelled)


def test_a_reference_on_another_grid_names_both(labelled):
    reference = labelled.isel(sample=0).assign_coords(
        wavelength=("wavelength", labelled.wavelength.values + 3, {"units": "nm"})
    )
    with pytest.raises(
        AxisError, match=r"MultiplicativeScatterCorrection: reference works on 160 channels, 0 to 159 nm"
    ):
        prepare.MultiplicativeScatterCorrection(reference).fit(labelled)
    prepare.MultiplicativeScatterCorrection(labelled.isel(sample=0)).fit(labelled)


def test_a_channel_missing_everywhere_cannot_be_learned(labelled):
    labelled.values[:, 7] = np.nan
    with pytest.raises(InputError, match="MeanCentre cannot learn from channel 8 of 160"):
        prepare.MeanCentre().fit(labelled)
