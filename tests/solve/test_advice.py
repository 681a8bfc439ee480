"""Advice on windows, path, scans and resolution against brute force and seeded measurements."""

import itertools
import json

import numpy as np
import pytest

import unmix
from unmix.diagnose.limits import limits
from unmix.diagnose.measurement import PATHS, choose_windows, detection_limits
from unmix.errors import InputError
from unmix.spectra import make_spectra

SD = 1e-3


def test_limits_are_those_of_dense_algebra(dyes):
    found = unmix.conditioning(dyes.pure, noise=SD, wanted=0.1)
    axis = np.linspace(-1, 1, dyes.pure.shape[1])
    design = np.column_stack([np.ones_like(axis), axis, dyes.pure.values.T])
    size = SD * np.sqrt(np.diag(np.linalg.inv(design.T @ design)))[2:]
    np.testing.assert_allclose(found.present_limit, limits(size, np.inf).detection, rtol=1e-9)
    np.testing.assert_allclose(found.present_limit, found.detection_limit, rtol=1e-9)
    # limits fall as one over the path where nothing is dark
    np.testing.assert_allclose(found.path_limit * found.path_multiple, np.tile(found.present_limit, (PATHS.size, 1)))


def test_scans_reach_what_they_promise(dyes):
    found = unmix.conditioning(dyes.pure, noise=SD, wanted=0.01)
    scans = found.recommended_scans.item()
    assert scans > 1
    assert (found.scans_limit <= found.wanted * (1 + 1e-9)).all()
    fewer = unmix.conditioning(dyes.pure, noise=SD / np.sqrt(scans - 1), wanted=0.01)
    assert (fewer.present_limit > fewer.wanted).any()


def test_windows_reach_nearly_what_the_best_choice_does(rng):
    # small enough to try every pair of blocks
    axis = np.arange(24.0)
    signal = np.exp(-(((axis[:, None] - np.array([6.0, 9.0])) / 2.5) ** 2))
    free, sd, usable = np.ones((24, 1)), np.full(24, SD), np.ones(24, dtype=bool)
    whole = detection_limits(signal, free, sd, usable)
    found = choose_windows(signal, free, sd, usable, whole)
    count = int(found.chosen.sum())
    assert (found.limit <= 1.1 * whole * (1 + 1e-9)).all()
    best = min(
        np.max(detection_limits(signal, free, sd, np.isin(axis, kept)) / whole)
        for kept in (rng.choice(24, count, replace=False) for _ in range(4000))
    )
    assert np.max(found.limit / whole) <= 1.03 * best


def test_windows_have_the_smallest_size_that_suffices():
    axis = np.arange(12.0)
    signal = np.exp(-(((axis[:, None] - 5.0) / 1.5) ** 2))
    free, sd, usable = np.empty((12, 0)), np.full(12, SD), np.ones(12, dtype=bool)
    wanted = 1.2 * detection_limits(signal, free, sd, usable)
    found = choose_windows(signal, free, sd, usable, wanted)
    count = int(found.chosen.sum())
    fewer = [np.isin(axis, kept) for kept in itertools.combinations(axis, count - 1)]
    assert all((detection_limits(signal, free, sd, one) > wanted).any() for one in fewer)


def test_recommended_windows_deliver_in_a_measurement(dyes, rng):
    found = unmix.conditioning(dyes.pure, noise=SD, wanted=0.2)
    regions = [tuple(edges) for edges in found.window.values]
    assert sum(high - low for low, high in regions) < 250
    # an absent component's estimate scatters by the detection limit over 2 x 1.645
    truth = np.array([0.0, 4.0, 5.0])
    values = truth @ dyes.pure.values + SD * rng.normal(size=(600, dyes.pure.shape[1]))
    spectra = make_spectra(values, dyes.pure.wavelength.values, dim="wavelength", quantity="absorbance")
    got = unmix.quantify(spectra, dyes.pure, regions=regions, nonnegative=False, noise=SD, path_length=1)
    promised = found.window_limit.values / (2 * 1.6448536)
    np.testing.assert_allclose(got.concentration.std("sample").values, promised, rtol=0.1)


def test_a_long_path_is_not_advised_where_channels_go_dark(dyes):
    options = {"noise": SD, "wanted": 1e-4, "typical": {"crimson": 20.0}}
    found = unmix.conditioning(dyes.pure, **options)
    multiple = found.recommended_path.item()
    at = int(np.argmin(np.abs(PATHS - multiple)))
    # brute force over the paths: that channels are lost where crimson absorbs more than 2
    for factor, limit in zip(PATHS[[0, at, -1]], found.path_limit.values[[0, at, -1]], strict=True):
        bright = 20.0 * factor * dyes.pure.values[0] <= 2.0
        axis = np.linspace(-1, 1, bright.size)
        design = np.column_stack([np.ones_like(axis), axis, factor * dyes.pure.values.T])[bright]
        size = SD * np.sqrt(np.diag(np.linalg.inv(design.T @ design)))[2:]
        np.testing.assert_allclose(limit, limits(size, np.inf).detection, rtol=1e-6)
    dark = unmix.conditioning(dyes.pure, noise_model="detector", **options)
    assert dark.recommended_path.item() < multiple
    assert found.path_saturated.values[-1] > 0.2


def test_a_resolution_that_blurs_the_bands_is_not_advised(solvents):
    found = unmix.conditioning(solvents.pure, noise=1e-4, wanted=1.0)
    limit = found.resolution_limit.values
    # the same signal on fewer channels, and blurred: never better
    assert (np.diff(limit, axis=0) > 0).all()
    said = json.loads(found.attrs["advice"])
    assert any(text.startswith("Resolution: ") for text in said)


def test_twins_are_not_helped_by_scans():
    pure = make_spectra([[1.0, 2, 1, 0, 0], [2.0, 4, 2, 0, 0]], range(5), dim="wavelength", quantity="absorptivity",
                        leading="component", labels=["a", "b"], attrs={"per": "g/L"})  # fmt: skip
    found = unmix.conditioning(pure, noise=SD, wanted=1.0, baseline=None)
    assert np.isinf(found.recommended_scans)
    assert "no number of scans helps" in found.attrs["advice"]


@pytest.mark.parametrize(
    ("options", "told"),
    [
        ({"wanted": 1.0}, "no noise is given"),
        ({"wanted": {"amber": 1.0}, "noise": SD}, "has no number for"),
        ({"wanted": {"ambre": 1.0}, "noise": SD}, "'ambre', which is not a component"),
        ({"wanted": 0.0, "noise": SD}, "wanted is 0.0"),
        ({"wanted": 1.0, "noise": SD, "typical": -1}, "typical is -1"),
        ({"wanted": 1.0, "noise": SD, "max_absorbance": 0}, "max_absorbance is 0"),
        ({"wanted": 1.0, "noise": SD, "noise_model": "pink"}, "noise_model is 'pink'"),
    ],
)
def test_wishes_that_cannot_be_are_refused(dyes, options, told):
    with pytest.raises(InputError, match=told):
        unmix.conditioning(dyes.pure, **options)
