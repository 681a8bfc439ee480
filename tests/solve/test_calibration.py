import json

import numpy as np
import pandas as pd
import pytest
from sklearn.pipeline import make_pipeline

import unmix
from unmix.errors import AxisError, InputError
from unmix.kernels.pls import fit
from unmix.method import Method
from unmix.prepare import (
    AutoScale,
    MeanCentre,
    MultiplicativeScatterCorrection,
    Regions,
    SavitzkyGolay,
    StandardNormalVariate,
)
from unmix.solve.folds import make_plan
from unmix.spectra import make_spectra

AXIS = np.arange(1000.0, 1800.0, 10.0)
PURE = np.array([np.exp(-(((AXIS - at) / 70) ** 2)) for at in (1150, 1260, 1400)])


def labelled(x, y, names=None, **options):
    labels = names or [f"run {i + 1}" for i in range(len(x))]
    spectra = make_spectra(x, AXIS, dim="wavelength", quantity="absorbance", labels=labels, **options)
    return spectra, pd.DataFrame(y, index=labels)


def process(rng, n, noise=2e-3):
    amounts = 5 + rng.normal(size=(n, 3))
    x = amounts @ PURE + noise * rng.normal(size=(n, AXIS.size))
    return x, {"water": amounts[:, 0] + 0.05 * rng.normal(size=n), "active": amounts[:, 1] + 0.1 * rng.normal(size=n)}


@pytest.fixture
def runs(rng):
    x, y = process(rng, 40)
    return labelled(x, {"water": y["water"]})


def test_the_number_is_that_of_the_compounds_and_the_error_that_of_the_reference(runs):
    found = unmix.calibrate(*runs, unit="%", permutations=19)
    assert found.n_components == 3
    assert found.properties == ["water"]
    assert found.data["error"].sel(set="nested").item() == pytest.approx(0.05, rel=0.5)
    assert found.data["verdict"].item() == "supported"
    assert found.data["permutation_p"].item() == 0.05
    assert repr(found).startswith("<Calibration of water: 3 latent variables, SECV 0.0")


def test_several_properties_are_calibrated_together(rng):
    x, y = process(rng, 40)
    found = unmix.calibrate(*labelled(x, y), unit={"water": "%", "active": "mg/g"}, permutations=0)
    assert found.properties == ["water", "active"]
    assert found.data["property_unit"].values.tolist() == ["%", "mg/g"]
    assert found.data["error"].sel(set="nested").values == pytest.approx([0.05, 0.1], rel=0.5)
    model = fit(x, np.array(list(y.values())).T, found.n_components)
    np.testing.assert_allclose(found.data["coefficient"].values.T, model.coefficients()[-1], rtol=1e-9, atol=1e-12)


def test_rows_are_matched_by_name_and_surplus_ones_are_told(runs):
    spectra, known = runs
    plain = unmix.calibrate(spectra, known, permutations=0)
    shuffled = pd.concat([known.iloc[::-1], pd.DataFrame({"water": [9.9]}, index=["run 99"])])
    found = unmix.calibrate(spectra, shuffled, permutations=0)
    np.testing.assert_array_equal(found.data["coefficient"], plain.data["coefficient"])
    assert "'run 99' matches no spectrum" in found.data.attrs["assumptions"]


def test_samples_without_a_value_are_left_out_and_told(runs):
    spectra, known = runs
    gaps = known.copy()
    gaps.iloc[[3, 7], 0] = np.nan
    found = unmix.calibrate(spectra, gaps.drop(index="run 12"), permutations=0)
    assert found.data.sizes["sample"] == 37
    assert "'run 4', 'run 8', 'run 12'" in found.data.attrs["assumptions"]
    assert "run 4" not in found.data["sample"].values


def test_what_a_preparation_learns_it_never_learns_from_samples_that_are_tested(rng):
    x, y = process(rng, 24, noise=0.02)
    spectra, known = labelled(x, {"water": y["water"]})
    plan = make_plan(24, folds=4).rounds[0]
    found = unmix.calibrate(spectra, known, n_components=2, preparation=AutoScale(), validation=plan, permutations=0)
    for train, test in plan:
        centre, spread = x[train].mean(axis=0), x[train].std(axis=0, ddof=1)
        model = fit((x[train] - centre) / spread, known.to_numpy()[train], 2)
        expected = (x[test] - centre) / spread @ model.coefficients()[-1]
        expected += model.y_mean - model.x_mean @ model.coefficients()[-1]
        np.testing.assert_allclose(found.data["left_out"].values[test], expected, rtol=1e-8)
    # the counter-test: scaled once with all samples, the answers differ
    scaled = labelled((x - x.mean(axis=0)) / x.std(axis=0, ddof=1), {"water": y["water"]})
    leaky = unmix.calibrate(*scaled, n_components=2, validation=plan, permutations=0)
    assert np.abs(leaky.data["left_out"] - found.data["left_out"]).max() > 1e-6


def test_a_preparation_is_accepted_in_every_form_and_does_the_same(runs):
    steps = [SavitzkyGolay(window=7, derivative=1), StandardNormalVariate()]
    forms = [Method(steps), steps, make_pipeline(*steps)]
    found = [unmix.calibrate(*runs, n_components=2, preparation=form, permutations=0) for form in forms]
    for one in found[1:]:
        np.testing.assert_array_equal(one.data["coefficient"], found[0].data["coefficient"])


def test_centring_as_a_preparation_changes_nothing(runs):
    plain = unmix.calibrate(*runs, permutations=0)
    centred = unmix.calibrate(*runs, preparation=MeanCentre(), permutations=0)
    np.testing.assert_allclose(centred.data["left_out"], plain.data["left_out"], rtol=1e-9)


def test_regions_leave_channels_with_missing_values_out(runs):
    spectra, known = runs
    values = spectra.values.copy()
    values[5, 3] = np.nan
    with pytest.raises(InputError, match="spectrum 'run 6' has no value at 1030 nm"):
        unmix.calibrate(spectra.copy(data=values), known)
    found = unmix.calibrate(spectra.copy(data=values), known, preparation=Regions(keep=[(1100, 1700)]), permutations=0)
    assert float(found.data["wavelength"].min()) == 1100


def test_a_step_that_fails_in_one_fold_names_the_samples_left_out(runs):
    spectra, known = runs
    values = spectra.values.copy()
    # without run 1 the mean spectrum, to which the scatter correction refers, is flat
    values[1:] = 1.0 + np.r_[np.tile([1.0, -1.0], 18), 2.0, -1.0, -1.0][:, None] * np.linspace(-1, 1, AXIS.size)
    with pytest.raises(InputError, match="the preparation failed when 'run 1' was left out"):
        unmix.calibrate(spectra.copy(data=values), known, preparation=MultiplicativeScatterCorrection(), folds=40)


def test_groups_by_name_of_a_coordinate_are_never_parted(rng):
    x, y = process(rng, 40)
    batch = np.repeat(np.arange(10), 4)
    spectra, known = labelled(x, {"water": y["water"]}, coords={"batch": [f"B{b}" for b in batch]})
    by_name = unmix.calibrate(spectra, known, groups="batch", permutations=19)
    by_entries = unmix.calibrate(spectra, known, groups=batch.tolist(), permutations=19)
    np.testing.assert_array_equal(by_name.data["left_out"], by_entries.data["left_out"])
    part_of = by_name.data["part_of"].values
    for one in range(10):
        assert np.unique(part_of[batch == one]).size == 1
    assert by_name.data["permutation_p"].item() == 0.05


def test_groups_that_carry_the_relation_do_not_help_when_they_are_kept_together(rng):
    # spectra and values share an accident of the batch and nothing else
    batch = np.repeat(np.arange(8), 5)
    accident = rng.normal(size=(8, 3))
    x = (5 + accident[batch]) @ PURE + 1e-3 * rng.normal(size=(40, AXIS.size))
    y = rng.normal(size=8)[batch] + 0.01 * rng.normal(size=40)
    spectra, known = labelled(x, {"water": y})
    parted = unmix.calibrate(spectra, known, permutations=0)
    together = unmix.calibrate(spectra, known, groups=batch, permutations=0)
    assert parted.data["error"].sel(set="nested").item() < 0.9 * known["water"].std()
    assert together.data["error"].sel(set="nested").item() > parted.data["error"].sel(set="nested").item()


def test_no_relation_is_unsupported(rng):
    x, _ = process(rng, 40)
    found = unmix.calibrate(*labelled(x, {"luck": rng.normal(size=40)}), permutations=99)
    assert found.data["verdict"].item() == "unsupported"
    assert "predicts better than the mean" in found.data["reason"].item() or "Shuffled" in found.data["reason"].item()


def test_few_samples_are_doubtful(rng):
    x, y = process(rng, 20)
    found = unmix.calibrate(*labelled(x, {"water": y["water"]}), permutations=0)
    assert found.data["verdict"].item() == "doubtful"
    assert "20 samples are fewer than the 24 that ASTM E1655 asks for" in found.data["reason"].item()


def test_a_wrong_value_and_a_strange_spectrum_are_proposed_and_none_is_removed(rng):
    x, y = process(rng, 40)
    y["water"][11] += 2.0
    x[20] += 0.1 * np.exp(-(((AXIS - 1650) / 15) ** 2))
    found = unmix.calibrate(*labelled(x, {"water": y["water"]}), n_components=3, permutations=0)
    why = found.data["outlier_reason"].sel(sample=["run 12", "run 21"]).values
    assert "robust standard deviations" in why[0]
    assert "the limit of Q" in why[1]
    assert found.data.sizes["sample"] == 40
    assert "none was removed: 'run 12', 'run 21'" in found.data.attrs["notes"]


def test_identical_spectra_in_different_folds_are_told(rng):
    x, y = process(rng, 30)
    x[17] = x[4]
    found = unmix.calibrate(*labelled(x, {"water": y["water"]}), permutations=0, validation="leave-one-out")
    assert "Identical spectra were tested apart from each other: 'run 5', 'run 18'" in found.data.attrs["notes"]


def test_weights_lean_the_model_towards_a_sample(rng):
    x, y = process(rng, 30)
    y["water"][0] += 5.0
    spectra, known = labelled(x, {"water": y["water"]})
    light = unmix.calibrate(spectra, known, n_components=3, weights=[1e-3, *[1.0] * 29], permutations=0)
    left = unmix.calibrate(spectra[1:], known.iloc[1:], n_components=3, permutations=0)
    np.testing.assert_allclose(light.data["coefficient"], left.data["coefficient"], rtol=0.02, atol=1e-3)


def test_a_test_set_is_compared_and_its_bias_told(rng):
    x, y = process(rng, 60)
    spectra, known = labelled(x, {"water": y["water"]})
    shifted = known.iloc[40:] + 0.5
    found = unmix.calibrate(spectra[:40], known.iloc[:40], test=(spectra[40:], shifted), permutations=0)
    one = found.data.sel(set="test", property="water")
    assert one["bias"].item() == pytest.approx(-0.5, abs=0.05)
    assert one["bias_p"].item() < 1e-6
    assert found.data["verdict"].item() == "doubtful"
    assert "test predictions of water have a bias of -0." in found.data["reason"].item()


def test_transmittance_becomes_absorbance_and_reflectance_stays(rng):
    x, y = process(rng, 30)
    known = labelled(x, {"water": y["water"]})[1]
    plain, light, back = (
        make_spectra(values, AXIS, dim="wavelength", quantity=quantity, labels=list(known.index))
        for values, quantity in ((x, "absorbance"), (10.0**-x, "transmittance"), (x, "reflectance"))
    )
    found = [unmix.calibrate(spectra, known, permutations=0) for spectra in (plain, light, back)]
    np.testing.assert_allclose(found[1].data["left_out"], found[0].data["left_out"], rtol=1e-8)
    assert [one.data.attrs["quantity"] for one in found] == ["absorbance", "absorbance", "reflectance"]
    with pytest.raises(InputError, match="spectra hold absorbance but the calibration was made from reflectance"):
        unmix.predict(found[2], plain)


def test_repeated_validation_is_that_of_its_rounds_and_the_seed_repeats_it(runs):
    spectra, known = runs
    one, two = (unmix.calibrate(spectra, known, validation="repeated", repeats=3, permutations=9) for _ in range(2))
    assert one.data.drop_attrs().identical(two.data.drop_attrs())
    other = unmix.calibrate(spectra, known, validation="repeated", repeats=3, permutations=9, seed=1)
    assert not np.array_equal(one.data["left_out"], other.data["left_out"])


def test_blocks_of_a_process_along_time(rng):
    x, y = process(rng, 40)
    time = np.datetime64("2021-03-04T08:00", "ns") + np.arange(40) * np.timedelta64(10, "m")
    spectra = make_spectra(x, AXIS, dim="wavelength", quantity="absorbance", leading="time", coords={"time": time})
    known = pd.DataFrame({"water": y["water"]}, index=[str(t) for t in spectra["time"].values])
    found = unmix.calibrate(spectra, known, validation="blocks", folds=5, permutations=19)
    assert (np.diff(found.data["part_of"].values) >= 0).all()
    assert found.data.attrs["validation"] == "5 blocks in the order of the samples"
    predicted = unmix.predict(found, spectra[:3])
    assert predicted["predicted"].dims == ("time", "property")


def test_nested_errors_come_from_choices_without_the_sample(runs):
    found = unmix.calibrate(*runs, permutations=0, folds=5)
    assert found.data["nested_components"].size == 5
    given = unmix.calibrate(*runs, permutations=0, folds=5, n_components=3)
    assert (given.data["nested_components"] == 3).all()
    np.testing.assert_allclose(given.data["nested"], given.data["left_out"], rtol=1e-9)


def test_progress_runs_from_start_to_end(runs):
    seen = []
    unmix.calibrate(*runs, permutations=40, progress=lambda done, whole: seen.append(done / whole))
    assert seen == sorted(seen)
    assert seen[-1] == 1.0


def test_every_variable_has_a_name_and_a_unit(runs):
    found = unmix.calibrate(*runs, permutations=0)
    for name, variable in found.data.data_vars.items():
        assert {"long_name", "units"} <= set(variable.attrs), name
    assert json.loads(found.data.attrs["settings"])["folds"] == 10
    assert found.data.attrs["method"] == "calibrate"


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"n_components": 0}, "n_components is 0; give a whole number from 1"),
        ({"n_components": 39}, "n_components is 39 but the training sets of the validation"),
        ({"max_components": 2.5}, "max_components is 2.5"),
        ({"permutations": -1}, "permutations is -1"),
        ({"limit_level": 1.0}, "level is 1.0"),
        ({"validation": "kfold"}, "did you mean 'k-fold'"),
        ({"groups": "batch"}, "have no coordinate 'batch' along 'sample'"),
        ({"groups": [1, 2]}, "groups has 2 entries for 40 spectra"),
        ({"weights": [1, 2]}, "weights has 2 entries for 40 spectra"),
        ({"weights": [0.0] * 40}, "not above zero"),
        ({"preparation": "snv"}, "preparation is a str"),
        ({"preparation": [np.log]}, "a method is made of steps, not of ufunc"),
        ({"test": 3}, "test is not a pair"),
        ({"reference_error": {"wter": 0.1}}, "reference_error names 'wter'"),
    ],
)
def test_options_that_cannot_be_used_are_named(runs, change, words):
    with pytest.raises(InputError, match=words):
        unmix.calibrate(*runs, **change)


def test_reference_values_that_cannot_be_used_are_named(runs):
    spectra, known = runs
    with pytest.raises(InputError, match="the reference values of 'water' are all 3"):
        unmix.calibrate(spectra, known * 0 + 3.0)
    with pytest.raises(InputError, match=r"no row for sample 'run 1'.*did you mean 'Run 1'"):
        unmix.calibrate(spectra, known.set_axis(known.index.str.title(), axis=0))
    text = known.astype(object)
    text.iloc[4, 0] = "trace"
    with pytest.raises(InputError, match="'trace' for 'water' in sample 'run 5'"):
        unmix.calibrate(spectra, text)
    with pytest.raises(InputError, match="4 samples have reference values"):
        unmix.calibrate(spectra[:4], known)
    with pytest.raises(InputError, match="has no column 'water'"):
        unmix.calibrate(spectra[:30], known[:30], test=(spectra[30:], known[30:].rename(columns={"water": "wet"})))


def test_a_test_set_on_another_axis_is_refused(runs):
    spectra, known = runs
    with pytest.raises(AxisError, match="the calibration works on 80 channels"):
        unmix.calibrate(spectra[:30], known[:30], test=(spectra[30:, 1:], known[30:]))
