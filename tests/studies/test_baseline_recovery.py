"""How well each baseline method finds a baseline that is known: the table behind the default penalty.

Two hundred synthetic spectra a situation, 1,000 channels, seed 1. Error: root mean square of found minus true
baseline, median over the spectra, in units of the height of a full-size band.
"""

import warnings

import numpy as np
import pytest
from scipy.interpolate import CubicSpline

from unmix.errors import UnmixWarning
from unmix.kernels.whittaker import penalty_of_cutoff
from unmix.prepare import (
    AdaptiveReweighted,
    AsymmetricallyReweighted,
    AsymmetricLeastSquares,
    PolynomialBaseline,
    RubberBand,
)

CHANNELS, SPECTRA = 1000, 200
X = np.linspace(0, 1, CHANNELS)


def band(at, width):
    return np.exp(-4 * np.log(2) * ((X - at) / width) ** 2)


def sharp_bands(rng):
    """Ten bands, full widths 0.8 to 3% of the range."""
    rows = [sum(rng.uniform(0.2, 1) * band(rng.uniform(0.05, 0.95), rng.uniform(0.008, 0.03)) for _ in range(10))
            for _ in range(SPECTRA)]  # fmt: skip
    return np.array(rows)


def crowded_bands(rng):
    """Eight strong bands, 2 to 8% wide, so close that the spectrum does not come down between them."""
    rows = []
    for _ in range(SPECTRA):
        centre = rng.uniform(0.3, 0.7)
        rows.append(sum(rng.uniform(0.3, 1) * band(centre + 0.06 * rng.normal(), rng.uniform(0.02, 0.08))
                        for _ in range(8)))  # fmt: skip
    return np.array(rows)


def broad_band(rng):
    """One band of 8 to 15% of the range, such as hydrogen-bonded OH, among the sharp ones."""
    broad = [rng.uniform(0.5, 1) * band(rng.uniform(0.2, 0.8), rng.uniform(0.08, 0.15)) for _ in range(SPECTRA)]
    return sharp_bands(rng) + np.array(broad)


def column(rng, low, high):
    return rng.uniform(low, high, (SPECTRA, 1)) * rng.choice([-1, 1], (SPECTRA, 1))


def line(rng):
    return column(rng, 0.5, 1) + column(rng, 0.25, 0.5) * X


def sine(rng):
    """0.7 to 1.5 waves over the range, amplitude 0.15 to 0.3."""
    wave = np.sin(2 * np.pi * (X * rng.uniform(0.7, 1.5, (SPECTRA, 1)) + rng.uniform(size=(SPECTRA, 1))))
    return column(rng, 0.5, 1) + column(rng, 0.15, 0.3) * wave


def sigmoid(rng):
    """A step of 0.25 to 0.5 over 10 to 35% of the range."""
    step = 1 / (1 + np.exp(-(X - rng.uniform(0.3, 0.7, (SPECTRA, 1))) / rng.uniform(0.03, 0.08, (SPECTRA, 1))))
    return column(rng, 0.5, 1) + column(rng, 0.25, 0.5) * step


def drifting(rng):
    """A random walk through twelve knots."""
    walk = np.cumsum(rng.normal(size=(SPECTRA, 12)), axis=1)
    return column(rng, 0.5, 1) + 0.1 * CubicSpline(np.linspace(0, 1, 12), walk, axis=1)(X)


SITUATIONS = {
    "line": (sharp_bands, line),
    "sine": (sharp_bands, sine),
    "sigmoid": (sharp_bands, sigmoid),
    "drifting": (sharp_bands, drifting),
    "crowded, line": (crowded_bands, line),
    "crowded, sine": (crowded_bands, sine),
    "broad, line": (broad_band, line),
    "broad, sine": (broad_band, sine),
}

METHODS = {
    "asymmetric least squares, 0.01": AsymmetricLeastSquares(),
    "asymmetric least squares, 0.001": AsymmetricLeastSquares(asymmetry=0.001),
    "adaptive reweighted": AdaptiveReweighted(),
    "asymmetrically reweighted": AsymmetricallyReweighted(),
    "asymmetrically reweighted, third differences": AsymmetricallyReweighted(difference=3),
    "polynomial 3, clipped": PolynomialBaseline(3),
    "polynomial 5, clipped": PolynomialBaseline(5),
    "rubber band": RubberBand(),
}


def error(step, situation, noise):
    rng = np.random.default_rng([1, list(SITUATIONS).index(situation)])
    bands, baseline = SITUATIONS[situation]
    true = baseline(rng)
    y = bands(rng) + true + noise * rng.normal(size=true.shape)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", UnmixWarning)
        found = step.fit(y).baseline(y)
    return float(np.median(np.sqrt(np.mean((found - true) ** 2, axis=1))))


def table(rows):
    head = "| " + " | ".join(["method", *SITUATIONS]) + " |"
    body = [f"| {name} | " + " | ".join(f"{value:.4f}" for value in values.values()) + " |"
            for name, values in rows.items()]  # fmt: skip
    return "\n".join([head, "|" + "---|" * (len(SITUATIONS) + 1), *body])


@pytest.mark.study
@pytest.mark.parametrize("noise", [0.002, 0.01])
def test_recovery_of_known_baselines_with_the_defaults(noise):
    found = {name: {s: error(step, s, noise) for s in SITUATIONS} for name, step in METHODS.items()}
    print(f"\nnoise {noise}\n{table(found)}")
    mean = {name: np.mean(list(values.values())) for name, values in found.items()}
    best = found["asymmetrically reweighted"]
    # the recommendation in DEVELOPERS.md: of the methods with their defaults this one errs least on average, and
    # in no situation more than the noise of a poor spectrum, the fast drift apart
    published = [name for name in mean if "third" not in name]
    assert min(published, key=mean.get) == "asymmetrically reweighted"
    assert max(value for s, value in best.items() if s != "drifting") < 0.05
    assert best["line"] < 2 * noise
    # and a counter-check: a method that cannot bend must fail where the baseline does
    assert found["rubber band"]["sine"] > 5 * best["sine"]


@pytest.mark.study
def test_the_default_cutoff_is_near_the_best_compromise():
    cutoffs = [1 / 12, 1 / 8, 1 / 6, 1 / 4, 1 / 2]
    noise = 0.005
    rows, mean = {}, {}
    for cutoff in cutoffs:
        step = AsymmetricallyReweighted(penalty=penalty_of_cutoff(cutoff * CHANNELS, 2))
        rows[f"cutoff {cutoff:.3f} of the range"] = values = {s: error(step, s, noise) for s in SITUATIONS}
        mean[cutoff] = np.mean(list(values.values()))
    print(f"\nasymmetrically reweighted, noise {noise}\n{table(rows)}")
    assert mean[1 / 6] < 1.25 * min(mean.values())
    assert mean[1 / 2] > 1.5 * mean[1 / 6]
