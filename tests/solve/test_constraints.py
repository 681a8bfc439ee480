"""Constraints on amounts against dense algebra and scipy, and the budget of uncertainty against hand arithmetic."""

import numpy as np
import pytest
import xarray as xr
from scipy.optimize import lsq_linear
from scipy.stats import t

import unmix
from unmix.errors import InputError
from unmix.solve.constraints import read_constraints

SD = 2e-3


def white(dyes, rng, truth):
    """Mixtures in white noise of known size, and their design with a line."""
    values = np.asarray(truth) @ dyes.pure.values + SD * rng.normal(size=(len(truth), dyes.pure.shape[1]))
    spectra = xr.DataArray(values, dims=("sample", "wavelength"), coords={"wavelength": dyes.pure.wavelength},
                           attrs={"quantity": "absorbance"})  # fmt: skip
    line = np.vander(np.linspace(-1, 1, values.shape[1]), 2)
    return spectra, np.hstack([line, dyes.pure.values.T])


def by_lagrange(design, y, rows, values):
    """Least squares under equalities, and its covariance for unit noise, from the bordered normal equations."""
    m, r = design.shape[1], len(rows)
    rows = np.hstack([np.zeros((r, m - rows.shape[1])), rows])
    scale = np.linalg.norm(design, axis=0)
    bordered = np.block(
        [[design.T @ design / np.outer(scale, scale), (rows / scale).T], [rows / scale, np.zeros((r, r))]]
    )
    inverse = np.linalg.inv(bordered)
    x = inverse @ np.concatenate([design.T @ y / scale, values])
    return x[:m] / scale, inverse[:m, :m] / np.outer(scale, scale)


RULES = {
    "sum": ({"sum": 10.0}, [[1.0, 1, 1]], [10.0]),
    "fixed": ({"fixed": {"azure": 5.0}}, None, [5.0]),
    "ratio": ({"ratio": {("amber", "azure"): 0.5}}, None, [0.0]),
    "two": ({"sum": 10.0, "fixed": {"azure": 5.0}}, None, [10.0, 5.0]),
}


@pytest.mark.parametrize("kind", RULES)
def test_equalities_equal_dense_algebra(dyes, rng, kind):
    names = dyes.pure.component.values.tolist()
    given, rows, values = RULES[kind]
    unit = np.eye(3)[names.index("azure")]
    rows = {"fixed": [unit], "ratio": [np.eye(3)[names.index("amber")] - 0.5 * unit], "two": [[1, 1, 1], unit]}.get(
        kind, rows
    )
    truth = np.array([[2.5, 2.5, 5.0], [3.0, 2.0, 5.0]])[:, np.argsort(np.argsort([n == "azure" for n in names]))]
    spectra, design = white(dyes, rng, truth)
    found = unmix.quantify(spectra, dyes.pure, noise=SD, constraints=given, nonnegative=False)
    for i in range(2):
        x, covariance = by_lagrange(design, spectra.values[i], np.array(rows, dtype=float), np.array(values))
        np.testing.assert_allclose(found.concentration.values[i], x[-3:], rtol=1e-8, atol=1e-10)
        size = SD * np.sqrt(np.maximum(np.diag(covariance)[-3:], 0.0))
        np.testing.assert_allclose(found.contribution.sel(source="noise of the spectrum").values[i], size, atol=1e-8)


def test_equalities_with_an_uncertainty_are_one_more_observation(dyes, rng):
    spectra, design = white(dyes, rng, [[2.0, 3.0, 5.0]])
    found = unmix.quantify(spectra, dyes.pure, noise=SD, constraints={"sum": (10.1, 0.02)}, nonnegative=False)
    stacked = np.vstack([design, [[0, 0, *np.full(3, SD / 0.02)]]])
    x = np.linalg.lstsq(stacked, np.append(spectra.values[0], 10.1 * SD / 0.02), rcond=None)[0]
    covariance = SD**2 * np.linalg.inv(stacked.T @ stacked)
    np.testing.assert_allclose(found.concentration.values[0], x[-3:], rtol=1e-9)
    parts = found.contribution.values[0]
    np.testing.assert_allclose(np.sum(parts**2, axis=1), np.diag(covariance)[-3:], rtol=1e-7)
    assert (found.contribution.sel(source="constraints").values > 0).all()


def test_upper_bounds_equal_bounded_least_squares(dyes, rng):
    truth = [[2.0, 3.0, 0.001], [4.0, 0.0, 3.0], [2.0, 5.0, 2.0]]
    spectra, design = white(dyes, rng, truth)
    names = dyes.pure.component.values.tolist()
    given = {"upper": {names[0]: 1.99, names[1]: 4.99}}
    found = unmix.quantify(spectra, dyes.pure, noise=SD, constraints=given)
    low, high = [-np.inf, -np.inf, 0, 0, 0], [np.inf, np.inf, 1.99, 4.99, np.inf]
    for i in range(3):
        expected = lsq_linear(design, spectra.values[i], (low, high), method="bvls", tol=1e-14).x[-3:]
        np.testing.assert_allclose(found.concentration.values[i], expected, rtol=1e-6, atol=1e-7)
    # 4 g/L where 1.99 was allowed
    assert found.verdict.values[1] == "unsupported"
    assert f"The largest amount of {names[0]} was given as 1.99" in found.reason.values[1]


def test_a_known_ratio_tells_twins_apart(dyes, rng):
    twin = dyes.pure[:1].assign_coords(component=["twin"])
    pure = xr.concat([dyes.pure, twin], "component").assign_attrs(dyes.pure.attrs)
    spectra, _ = white(dyes, rng, [[3.0, 4.0, 5.0]])
    name = dyes.pure.component.values[0]
    alone = unmix.quantify(spectra, pure, noise=SD)
    assert alone.verdict.values == "unsupported"
    found = unmix.quantify(spectra, pure, noise=SD, constraints={"ratio": {(name, "twin"): 2.0}})
    assert found.verdict.values == "supported"
    got = found.sel(component=[name, "twin"])
    np.testing.assert_allclose(got.concentration.values[0], [2.0, 1.0], atol=0.01)
    assert (got.lower.values <= [[2.0, 1.0]]).all()
    assert (got.upper.values >= [[2.0, 1.0]]).all()


@pytest.mark.parametrize(
    ("given", "told"),
    [
        ({"sum": 1.0, "fixed": {"amber": 2.0}}, r"the sum of all amounts = 1 and .*amber = 2"),
        ({"fixed": {"amber": 2.0}, "upper": {"amber": 1.0}}, r"amber = 2 and the largest amount of amber = 1"),
        ({"fixed": {"amber": 2.0}, "ratio": {"amber:azure": 2.0}, "upper": {"azure": 0.5}}, "contradict each other"),
        ({"fixed": {"ambre": 2.0}}, "'ambre', which is not a component"),
        ({"sums": 1.0}, "'sums' is not known"),
        ({"sum": "one"}, "the sum is 'one'"),
        ({"sum": (1.0, -0.1)}, "standard uncertainty of the sum is -0.1"),
        ({"fixed": {"amber": -1.0}}, "no amount is below zero"),
        ({"ratio": {"amber:amber": 1.0}}, "ratio of 'amber' to 'amber'"),
        ([1.0], "constraints is a list"),
        ({"fixed": {"amber": 1.0, "azure": 1.0, "crimson": 1.0}}, "nothing is left to determine"),
    ],
)
def test_constraints_that_cannot_hold_are_refused(given, told):
    with pytest.raises(InputError, match=told):
        read_constraints(given, ["amber", "azure", "crimson"], nonnegative=True)


def test_images_paths_and_missing_channels(dyes, rng):
    spectra, _ = white(dyes, rng, [[2.0, 3.0, 5.0]] * 4)
    cube = xr.DataArray(2.0 * spectra.values.reshape(2, 2, -1), dims=("y", "x", "wavelength"),
                        coords={"wavelength": spectra.wavelength}, attrs=spectra.attrs)  # fmt: skip
    cube[0, 1, 40:60] = np.nan
    cube[1, 1] = np.nan
    found = unmix.quantify(cube, dyes.pure, path_length=2.0, constraints={"sum": 10.0})
    total = found.concentration.sum("component", skipna=False).values
    np.testing.assert_allclose(total.ravel()[:3], 10.0, rtol=1e-9)
    assert np.isnan(total[1, 1])
    np.testing.assert_allclose(found.concentration.values[0, 0], [2.0, 3.0, 5.0], atol=0.05)


def test_a_budget_by_hand(rng):
    # one component of absorptivity 1 on two channels, amount 2: the mean of the channels, by hand
    pure = xr.DataArray([[1.0, 1.0]], dims=("component", "wavelength"),
                        coords={"component": ["dye"], "wavelength": [500.0, 510.0],
                                "relative_uncertainty": ("component", [0.03]), "noise": ("component", [0.004])},
                        attrs={"quantity": "absorptivity", "per": "g/L"})  # fmt: skip
    sample = xr.DataArray([[0.79, 0.81]], dims=("sample", "wavelength"), coords={"wavelength": [500.0, 510.0]},
                          attrs={"quantity": "absorbance"})  # fmt: skip
    found = unmix.quantify(sample, pure, baseline=None, noise=0.01, path_length=4.0, dilution=10.0,
                           path_uncertainty=0.01, dilution_uncertainty=0.02)  # fmt: skip
    # c = 10 x mean / 4
    assert found.concentration.values == pytest.approx(2.0)
    part = {str(name): float(value) for name, value in zip(found.source.values, found.contribution.values[0, 0],
                                                           strict=True)}  # fmt: skip
    assert part["noise of the spectrum"] == pytest.approx(10 * 0.01 / np.sqrt(2) / 4)
    assert part["pure spectra"] == pytest.approx(0.03 * 2.0)
    assert part["path length"] == pytest.approx(0.01 * 2.0)
    assert part["dilution"] == pytest.approx(0.02 * 2.0)
    # amount in the cell 0.2, path 4: noise 0.8 x 0.004 on each channel; attenuation 0.2 x 2 x (4 x 0.004)^2 / 32
    noise = 10 * 0.8 * 0.004 / np.sqrt(2) / 4
    bias = 2.0 * 2 * (4 * 0.004) ** 2 / (2 * 4**2)
    assert part["noise of the pure spectra"] == pytest.approx(np.hypot(noise, bias), rel=1e-6)
    total = np.sqrt(sum(value**2 for value in part.values()))
    assert found.standard_uncertainty.values == pytest.approx(total)
    # endless degrees of freedom: 1.96 standard uncertainties
    assert (found.upper - found.concentration).values == pytest.approx(1.959964 * total, rel=1e-6)


def test_effective_degrees_of_freedom(dyes, rng):
    # Welch-Satterthwaite (JCGM 100:2008, G.2b): nu_eff = u^4 / (u_noise^4 / nu) when the rest is known without end
    pure = dyes.pure[:, ::30].assign_coords(relative_uncertainty=("component", [0.001, 0.0, 0.0]))
    sample = (pure * xr.DataArray([2.0, 3.0, 4.0], dims="component")).sum("component")
    sample = (sample + 0.01 * rng.normal(size=sample.size)).assign_attrs(quantity="absorbance").expand_dims("sample")
    found = unmix.quantify(sample, pure, path_length=1.0)
    nu = found.degrees_of_freedom.item()
    assert nu == pure.shape[1] - 5
    noise = found.contribution.sel(source="noise of the spectrum").values[0, 0]
    whole = found.standard_uncertainty.values[0, 0]

    reach = t.ppf(0.975, nu * (whole / noise) ** 4) * whole
    assert (found.upper - found.concentration).values[0, 0] == pytest.approx(reach, rel=1e-6)


def test_correlation_is_that_of_the_design(dyes, rng):
    spectra, design = white(dyes, rng, [[2.0, 3.0, 5.0]])
    found = unmix.quantify(spectra, dyes.pure, noise=SD)
    covariance = np.linalg.inv(design.T @ design)[-3:, -3:]
    size = np.sqrt(np.diag(covariance))
    np.testing.assert_allclose(found.correlation.values[0], covariance / np.outer(size, size), atol=1e-8)
    # an error of the path moves all amounts together
    together = unmix.quantify(spectra, dyes.pure, noise=SD, path_uncertainty=0.1)
    assert together.correlation.values.min() > 0.99


def test_a_known_sum_makes_the_path_irrelevant(dyes, rng):
    spectra, _ = white(dyes, rng, [[2.0, 3.0, 5.0]])
    options = {"noise": SD, "path_uncertainty": 0.05}
    free = unmix.quantify(spectra, dyes.pure, **options)
    closed = unmix.quantify(spectra, dyes.pure, constraints={"sum": 10.0}, **options)
    path = {"source": "path length"}
    np.testing.assert_allclose(free.contribution.sel(path).values[0], 0.05 * free.concentration.values[0])
    # what a wrong path does under a known sum is tested on the spectra themselves
    wrong = unmix.quantify(
        spectra * 1.001, dyes.pure.assign_attrs(dyes.pure.attrs), constraints={"sum": 10.0}, noise=SD
    )
    moved = np.abs(wrong.concentration - closed.concentration).values[0]
    np.testing.assert_allclose(closed.contribution.sel(path).values[0] * 0.001 / 0.05, moved, rtol=1e-6, atol=1e-12)


def test_chance_alone_does_not_break_a_true_constraint(dyes, rng):
    truth = rng.dirichlet([1, 1, 1], 400)
    spectra, _ = white(dyes, rng, truth)
    found = unmix.quantify(spectra, dyes.pure, constraints={"sum": 1.0})
    inside = (found.lower.values <= truth) & (truth <= found.upper.values)
    assert 0.925 < inside.mean() < 0.99
    assert (found.verdict.values != "supported").mean() < 0.025
    # and the intervals are no wider than without it
    free = unmix.quantify(spectra, dyes.pure)
    assert (found.standard_uncertainty.mean() < free.standard_uncertainty.mean()).item()
    wrong = unmix.quantify(spectra, dyes.pure, constraints={"sum": 1.5})
    assert (wrong.verdict.values != "supported").all()
