"""Intervals and false alarms under constraints, true and false."""

import mixtures as make
import numpy as np
import pytest

import unmix

pytestmark = pytest.mark.study

#: sets of pure spectra, mixtures of each
SETS, EACH = 20, 50


def shares(rng, k):
    """Mass fractions, some components absent."""
    there = rng.random((EACH, k)) < 0.7
    there[np.arange(EACH), rng.integers(0, k, EACH)] = True
    found = rng.dirichlet(np.ones(k), EACH) * there
    return found / found.sum(axis=1, keepdims=True)


def given(kind, rng, truth):
    """A constraint that holds for every mixture, as its maker changes the truth to obey it."""
    k = truth.shape[1]
    if kind == "sum":
        return {"sum": 1.0}, truth
    if kind == "sum, known to 0.5%":
        return {"sum": (1.0, 0.005)}, truth * (1.0 + 0.005 * rng.normal(size=(EACH, 1)))
    if kind == "fixed":
        truth = truth.copy()
        truth[:, 0] = 0.2
        return {"fixed": {"component 1": 0.2}}, truth
    if kind == "upper":
        return {"upper": {f"component {j + 1}": 1.0 for j in range(k)}}, truth
    truth = truth.copy()
    truth[:, 0] = 0.5 * truth[:, 1]
    return {"ratio": {"component 1:component 2": 0.5}}, truth


@pytest.mark.parametrize("noise", ["white", "ar"])
@pytest.mark.parametrize("kind", ["sum", "sum, known to 0.5%", "fixed", "upper", "ratio"])
def test_intervals_cover_under_true_constraints(kind, noise):
    missed, flagged, narrower = [], [], []
    for seed in range(SETS):
        rng = np.random.default_rng([7, seed])
        k = 2 + seed % 5
        pure = make.pure_spectra(rng, k)
        constraints, truth = given(kind, rng, shares(rng, k))
        y = truth @ pure + make.baseline_of(rng, EACH, 1) + 5e-3 * make.noise_of(noise, rng, (EACH, make.AXIS.size))
        spectra, known = make.labelled(y), make.labelled_pure(pure)
        found = unmix.quantify(spectra, known, constraints=constraints)
        free = unmix.quantify(spectra, known)
        # an amount that the constraint fixes is not an estimate
        open_ = found.standard_uncertainty.values > 1e-12
        wrong = (found.lower.values > truth) | (found.upper.values < truth)
        missed.append(wrong[open_])
        flagged.append(found.verdict.values != "supported")
        narrower.append((found.standard_uncertainty.values / free.standard_uncertainty.values)[open_])
    miss, alarm, ratio = (np.concatenate(part).mean() for part in (missed, flagged, narrower))
    print(f"\n{kind}, {noise} noise: miss {miss:.1%}, flagged {alarm:.1%}, uncertainty {ratio:.2f} of that without")
    assert 0.02 <= miss <= 0.065
    assert alarm <= 0.025
    assert ratio <= 1.001


@pytest.mark.parametrize("kind", ["sum", "fixed", "ratio"])
def test_false_constraints_are_flagged(kind):
    flagged, harmed = [], []
    for seed in range(SETS):
        rng = np.random.default_rng([8, seed])
        k = 2 + seed % 5
        pure = make.pure_spectra(rng, k)
        constraints, truth = given(kind, rng, shares(rng, k))
        off = 1.0 + np.exp(rng.uniform(np.log(0.001), np.log(0.3), (EACH, 1)))
        false = truth * off if kind == "sum" else truth * np.where(np.arange(k) == 0, off, 1.0)
        y = false @ pure + make.baseline_of(rng, EACH, 1) + 5e-3 * rng.normal(size=(EACH, make.AXIS.size))
        spectra, known = make.labelled(y), make.labelled_pure(pure)
        found = unmix.quantify(spectra, known, constraints=constraints)
        # what the spectrum alone would have told: a smaller shift is not in the data
        told = unmix.quantify(spectra, known).standard_uncertainty.values
        moved = np.abs(found.concentration.values - false) > 4.5 * told
        moved &= found.standard_uncertainty.values > 1e-12
        harmed.append(moved.any(axis=1))
        flagged.append(found.verdict.values != "supported")
    harm, alarm = np.concatenate(harmed), np.concatenate(flagged)
    print(f"\nfalse {kind}: {harm.mean():.0%} of the mixtures are harmed, {alarm[harm].mean():.1%} of them flagged")
    assert alarm[harm].mean() >= 0.95
