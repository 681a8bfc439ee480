"""Seeded simulation of what a calibration promises: coverage of its intervals, false alarms, and the permutation test.

Margins are four standard errors of the simulated rate, or as stated.
"""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import unmix
from unmix.diagnose.jackknife import jackknife_plus
from unmix.kernels.pls import fit
from unmix.solve.folds import make_plan
from unmix.solve.validation import permutation_test
from unmix.spectra import make_spectra

pytestmark = pytest.mark.study

DATA = Path(__file__).parents[1] / "reference" / "data"


def labelled(x, axis, y):
    labels = [f"s{i + 1}" for i in range(len(x))]
    spectra = make_spectra(x, axis, dim="wavelength", quantity="absorbance", labels=labels)
    return spectra, pd.DataFrame({"property": y}, index=labels)


def process(rng, n, noise=2e-3, spread="normal"):
    """Spectra of four compounds and a scatter-like offset; the first is the property."""
    axis = np.arange(1000.0, 1800.0, 8.0)
    pure = np.array([np.exp(-(((axis - at) / 70) ** 2)) for at in (1150, 1260, 1400, 1600)])
    amounts = 5 + rng.normal(size=(n, 4)) if spread == "normal" else 3 + 4 * rng.random((n, 4))
    x = amounts @ pure + 0.05 * rng.normal(size=(n, 1)) + noise * rng.normal(size=(n, axis.size))
    return x, axis, amounts[:, 0] + 0.1 * rng.normal(size=n)


def test_intervals_of_gasoline_cover_on_200_random_splits():
    table = pd.read_csv(DATA / "gasoline.csv")
    axis = np.array([float(name.split()[0]) for name in table.columns[1:]])
    x, y = table.iloc[:, 1:].to_numpy(), table["octane"].to_numpy()
    covered = []
    for seed in range(200):
        order = np.random.default_rng(seed).permutation(60)
        spectra, known = labelled(x[order], axis, y[order])
        found = unmix.calibrate(spectra[:45], known[:45], n_components=3, permutations=0, max_components=3)
        predicted = unmix.predict(found, spectra[45:], level=0.9)
        true = known.to_numpy()[45:]
        covered.append(((predicted["lower"].values <= true) & (true <= predicted["upper"].values)).mean())
    print(f"\ngasoline, 200 splits: {np.mean(covered):.3f}")
    assert 0.88 <= np.mean(covered) <= 0.93


@pytest.mark.parametrize(("n", "validation"), [(40, "k-fold"), (150, "k-fold")])
def test_intervals_cover_and_limits_alarm_at_their_rate(n, validation):
    covered, q, t2 = [], [], []
    for seed in range(100):
        rng = np.random.default_rng([seed, n])
        x, axis, y = process(rng, n + 200)
        spectra, known = labelled(x, axis, y)
        found = unmix.calibrate(spectra[:n], known[:n], permutations=0, max_components=8, validation=validation,
                                limit_level=0.95)  # fmt: skip
        predicted = unmix.predict(found, spectra[n:], level=0.9)
        true = known.to_numpy()[n:]
        covered.append(((predicted["lower"].values <= true) & (true <= predicted["upper"].values)).mean())
        q.append(float((predicted["q_residual"] > predicted["q_limit"]).mean()))
        t2.append(float((predicted["t2"] > predicted["t2_limit"]).mean()))
    print(f"\n{n} samples: coverage {np.mean(covered):.3f}, alarms at 0.05: Q {np.mean(q):.3f}, T2 {np.mean(t2):.3f}")
    assert 0.88 <= np.mean(covered) <= 0.93
    assert 0.03 <= np.mean(q) <= 0.07
    assert 0.03 <= np.mean(t2) <= 0.07


def test_intervals_from_fitted_errors_would_not_cover():
    # the counter-test: errors of samples that the model was fitted to make the interval too narrow
    covered = []
    for seed in range(100):
        rng = np.random.default_rng([seed, 7])
        x, _, y = process(rng, 230, noise=0.05)
        model = fit(x[:30], y[:30, None], 8)
        slopes = model.coefficients()[-1]
        fitted, new = ((part - model.x_mean) @ slopes + model.y_mean for part in (x[:30], x[30:]))
        low, high = jackknife_plus(new, np.abs(fitted[:, 0] - y[:30]), np.zeros(30, dtype=int), 0.9)
        covered.append(((low <= y[30:]) & (y[30:] <= high)).mean())
    assert np.mean(covered) < 0.7


@pytest.mark.parametrize("way", ["k-fold", "groups", "blocks"])
def test_p_of_the_permutation_test_is_uniform_without_a_relation(way):
    found = []
    for seed in range(300):
        rng = np.random.default_rng([seed, 11])
        n = 24
        x = process(rng, n)[0]
        if way == "groups":
            # values alike within a group, spectra too: shuffling single samples would take that for a relation
            x += np.repeat(rng.normal(size=(8, 1)), 3, axis=0) * np.linspace(0, 1, x.shape[1])
            y = np.repeat(rng.normal(size=8), 3) + 0.1 * rng.normal(size=n)
            plan = make_plan(n, "k-fold", folds=4, groups=np.repeat(np.arange(8), 3), seed=seed)
        else:
            y = rng.normal(size=n)
            plan = make_plan(n, "blocks" if way == "blocks" else "k-fold", folds=4, seed=seed)
        found.append(permutation_test(x, y[:, None], 5, plan, 19, seed, None))
    rates = [np.mean(np.array(found) <= level) for level in (0.05, 0.1, 0.2, 0.5)]
    print(f"\n{way}: p at most 0.05, 0.1, 0.2, 0.5 in {rates}")
    for rate, level in zip(rates, (0.05, 0.1, 0.2, 0.5), strict=True):
        assert abs(rate - level) <= 4 * np.sqrt(level * (1 - level) / 300)
