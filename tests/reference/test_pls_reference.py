"""Published errors of partial least squares on open data, and outliers that are known.

Gasoline: B.-H. Mevik and R. Wehrens, The pls package, J. Stat. Softw. 18(2) (2007), whose manual prints the values to
four digits (samples 1 to 50, leave-one-out; samples 51 to 60 as test set; centred, not scaled). The further digits, and
all values of the yarn data, were computed with that package (R) and agree with an independent program to eight.
"""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from sklearn.cross_decomposition import PLSRegression

import unmix
from unmix.kernels.pls import fit
from unmix.spectra import make_spectra

DATA = Path(__file__).parent / "data"

PRINTED_CV = [
    "1.357",
    "0.2966",
    "0.2524",
    "0.2476",
    "0.2398",
    "0.2319",
    "0.2386",
    "0.2316",
    "0.2449",
    "0.2673",
]
COMPUTED_CV = [1.5450759, 1.3569509, 0.2966201, 0.2524084, 0.2475784, 0.2397936, 0.2318806, 0.2386001, 0.2315764,
               0.2449335, 0.2672890]  # fmt: skip
COMPUTED_TEST = [1.1695970, 0.2444825, 0.2341076, 0.3286840, 0.2780331, 0.2703175, 0.3301359, 0.3571089, 0.4090056,
                 0.6116408]  # fmt: skip
YARN_CV = [31.3113460, 5.3556463, 4.7537167, 2.1866213, 0.9078413, 0.5736668, 0.5228288]
YARN_TEST = [2.1426693, 2.1811139, 1.2891838, 0.4342542, 0.2860006, 0.1877103]


def labelled(x, axis, y, name):
    labels = [f"{name} {i + 1}" for i in range(len(x))]
    spectra = make_spectra(x, axis, dim="wavelength", quantity="absorbance", labels=labels)
    return spectra, pd.DataFrame({name: np.asarray(y, dtype=float)}, index=labels)


@pytest.fixture(scope="module")
def gasoline():
    table = pd.read_csv(DATA / "gasoline.csv")
    axis = [float(name.split()[0]) for name in table.columns[1:]]
    return labelled(table.iloc[:, 1:].to_numpy(), axis, table["octane"], "octane")


@pytest.fixture(scope="module")
def yarn():
    table = pd.read_csv(DATA / "yarn.csv")
    # the axis was not published; numbered channels serve
    spectra, known = labelled(
        table.iloc[:, 2:].to_numpy(), np.arange(1.0, 269.0), table["density"], "density"
    )
    train = np.flatnonzero(table["train"] == 1)
    return spectra, known, train, np.flatnonzero(table["train"] == 0)


@pytest.fixture(scope="module")
def octane():
    table = pd.read_csv(DATA / "octane_nir_with_outliers.csv", index_col=0)
    return labelled(table.iloc[:, 1:].to_numpy(), 1102.0 + 2 * np.arange(226), table["y"], "octane")


def test_gasoline_cross_validation_errors(gasoline):
    spectra, known = gasoline
    found = unmix.calibrate(
        spectra[:50], known[:50], validation="leave-one-out", max_components=10, permutations=0
    )
    curve = found.data["curve"].values.ravel()
    assert [f"{value:.4g}" for value in curve[1:]] == PRINTED_CV
    np.testing.assert_allclose(curve, COMPUTED_CV, atol=5.1e-8)


def test_gasoline_takes_three_latent_variables_by_the_one_standard_error_rule(gasoline):
    spectra, known = gasoline
    found = unmix.calibrate(
        spectra[:50], known[:50], validation="leave-one-out", max_components=10, permutations=0
    )
    assert found.n_components == 3


@pytest.mark.parametrize("components", range(1, 11))
def test_gasoline_test_errors(gasoline, components):
    spectra, known = gasoline
    found = unmix.calibrate(spectra[:50], known[:50], n_components=components, permutations=0,
                            test=(spectra[50:], known[50:])).data.sel(set="test")  # fmt: skip
    np.testing.assert_allclose(found["error"].values, COMPUTED_TEST[components - 1], atol=5.1e-8)


def test_gasoline_bias_and_corrected_error_of_the_test_set(gasoline):
    spectra, known = gasoline
    found = unmix.calibrate(spectra[:50], known[:50], n_components=2, permutations=0, validation="leave-one-out",
                            test=(spectra[50:], known[50:])).data.sel(set="test")  # fmt: skip
    assert found["bias"].item() == pytest.approx(-0.07722518, abs=5e-9)
    assert found["corrected"].item() == pytest.approx(0.24451304, abs=5e-9)
    # t of E1655 by hand from these two: 0.07722518 sqrt(10) / 0.24451304 = 0.99874 with 9 degrees of freedom
    assert found["bias_p"].item() == pytest.approx(0.344, abs=5e-4)


def test_gasoline_predictions_and_coefficients_with_two_latent_variables(gasoline):
    spectra, known = gasoline
    found = unmix.calibrate(spectra[:50], known[:50], n_components=2, permutations=0)
    predicted = unmix.predict(found, spectra[50:])["predicted"].values.ravel()
    printed = [
        87.94124,
        87.25242,
        88.15832,
        84.96913,
        85.15396,
        84.51415,
        87.56190,
        86.84622,
        89.18925,
        87.09116,
    ]
    np.testing.assert_allclose(predicted, printed, atol=5.1e-6)
    slopes = found.data["coefficient"].sel(property="octane")
    np.testing.assert_allclose(
        slopes[:5], [0.3396048, 0.4094040, 0.4297729, 0.5289316, 0.5753354], atol=5.1e-8
    )
    assert np.linalg.norm(slopes) == pytest.approx(23.8683, abs=5e-5)
    assert slopes.wavelength.values[np.abs(slopes.values).argmax()] == 1206.0


def test_gasoline_score_variances_and_explained_variance(gasoline):
    spectra, known = gasoline
    found = unmix.calibrate(spectra[:50], known[:50], n_components=3, permutations=0).data
    np.testing.assert_allclose(found["score_variance"], [0.036419214, 0.004327657, 0.004357792], atol=5.1e-10)
    total = np.sum(spectra.values[:50].var(axis=0, ddof=1))
    of_x = 100 * found["score_variance"] * np.sum(found["loading"] ** 2, axis=0) / total
    np.testing.assert_allclose(of_x, [78.170768, 7.4122245, 7.8241556], atol=5.1e-7)


def test_yarn_cross_validation_and_test_errors(yarn):
    spectra, known, train, test = yarn
    for components in range(1, 7):
        found = unmix.calibrate(spectra[train], known.iloc[train], n_components=components, max_components=6,
                                validation="leave-one-out", permutations=0,
                                test=(spectra[test], known.iloc[test])).data  # fmt: skip
        np.testing.assert_allclose(found["curve"].values.ravel(), YARN_CV, atol=5.1e-8)
        np.testing.assert_allclose(found["error"].sel(set="test"), YARN_TEST[components - 1], atol=5.1e-8)


@pytest.mark.parametrize("data", ["gasoline", "yarn", "octane"])
def test_coefficients_equal_those_of_scikit_learn(data, request):
    given = request.getfixturevalue(data)
    x, y = given[0].values, given[1].to_numpy()
    slopes = fit(x, y, 10).coefficients()
    for k in range(1, 11):
        expected = PLSRegression(k, scale=False).fit(x, y).coef_.T
        np.testing.assert_allclose(slopes[k - 1], expected, rtol=0, atol=1e-9 * np.abs(expected).max())


def test_all_gasolines_with_alcohol_are_flagged_and_the_region_is_named(octane):
    spectra, known = octane
    alcohol = np.isin(np.arange(39), [24, 25, 35, 36, 37, 38])
    found = unmix.calibrate(spectra[~alcohol], known[~alcohol])
    predicted = unmix.predict(found, spectra[alcohol])
    beyond = (predicted["q_residual"] > predicted["q_limit"]) | (predicted["t2"] > predicted["t2_limit"])
    assert beyond.all()
    assert (predicted["verdict"] == "unsupported").all()
    # the first overtone of the hydroxyl group of alcohols is near 1410 nm (Workman and Weyer, 2012)
    assert ((predicted["q_position"] > 1395) & (predicted["q_position"] < 1425)).all()
    assert all("from 1404 to" in reason for reason in predicted["reason"].values)
    others = (found.data["q_left_out"] > found.data["q_limit"]) | (
        found.data["t2_left_out"] > found.data["t2_limit"]
    )
    assert int(others.sum()) <= 2
