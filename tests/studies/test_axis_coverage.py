"""Intervals of ``quantify`` when the axis of the samples is off and the axis is fitted."""

import mixtures as make
import numpy as np
import pytest
from scipy.interpolate import CubicSpline

import unmix

pytestmark = pytest.mark.study

#: sets of pure spectra, mixtures of each
SETS, EACH = 20, 25


def moved(rng, pure, truth, shift, width):
    """Mixtures shifted, and broadened by a Gaussian of some full width, in the unit of the axis."""
    fine = np.arange(make.AXIS[0] - 100, make.AXIS[-1] + 100, 0.5)
    rows = np.clip(fine, make.AXIS[0], make.AXIS[-1])
    whole = CubicSpline(make.AXIS, pure, axis=1)(rows)
    if width:
        reach = np.arange(-4 * width, 4 * width + 0.5, 0.5)
        kernel = np.exp(-0.5 * (reach / (width / 2.3548)) ** 2)
        whole = np.array([np.convolve(row, kernel / kernel.sum(), "same") for row in whole])
    spline = CubicSpline(fine, whole, axis=1)
    return np.array([c @ spline(make.AXIS - b) for c, b in zip(truth, shift, strict=True)])


CASES = {
    "shift, white noise": ("shift", "white", 2.0, 0.0),
    "shift, AR(1) noise": ("shift", "ar", 2.0, 0.0),
    "broadening, white noise": ("broadening", "white", 0.0, 4.0),
    "shift and broadening, AR(1) noise": (["shift", "broadening"], "ar", 2.0, 4.0),
    "nothing, shift fitted": ("shift", "white", 0.0, 0.0),
}


@pytest.mark.parametrize("name", CASES)
def test_intervals_cover(name):
    axis, noise, most, width = CASES[name]
    missed, flagged, z, gain, refused = [], [], [], [], 0
    for seed in range(SETS):
        rng = np.random.default_rng([9, seed])
        pure = make.pure_spectra(rng, 2 + seed % 5)
        truth = make.amounts(rng, EACH, pure.shape[0])
        shift = rng.uniform(-most, most, EACH)
        y = moved(rng, pure, truth, shift, width) + make.baseline_of(rng, EACH, 1)
        y = y + 1e-3 * make.noise_of(noise, rng, y.shape)
        spectra, known = make.labelled(y), make.labelled_pure(pure)
        found = unmix.quantify(spectra, known, axis=axis)
        before = unmix.quantify(spectra, known)
        missed.append(((found.lower.values > truth) | (found.upper.values < truth)).ravel())
        flagged.append(found.verdict.values != "supported")
        errors = [np.abs(one.concentration.values - truth).mean() for one in (found, before)]
        gain.append(errors[0] / errors[1])
        if "axis_shift" in found:
            refused += int(np.isnan(found.axis_shift.values[:, 0]).sum())
            z.append((found.axis_shift.values[:, 0] - shift) / found.axis_shift_uncertainty.values[:, 0])
    miss, alarm = np.concatenate(missed).mean(), np.concatenate(flagged).mean()
    outside = f", shift outside 95% in {np.mean(np.abs(np.concatenate(z)) > 1.96):.1%}" if z else ""
    print(f"\n{name}: miss {miss:.1%}, flagged {alarm:.1%}, error {np.median(gain):.2f} of that without{outside}, "
          f"refused {refused}")  # fmt: skip
    assert 0.03 <= miss <= 0.065
    assert alarm <= 0.05
