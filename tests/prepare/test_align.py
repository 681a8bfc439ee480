"""Alignment: put-in shifts are taken out, and what cannot be aligned is said."""

import numpy as np
import pytest

from unmix.errors import UnmixWarning
from unmix.prepare import Align
from unmix.spectra import make_spectra

AXIS = 400.0 + 0.5 * np.arange(600)


def bands(x):
    return sum(h * np.exp(-(((x - at) / w) ** 2)) for at, w, h in ((470, 12, 1), (540, 8, 0.4), (630, 15, 0.8)))


def labelled(values):
    return make_spectra(np.atleast_2d(values), AXIS, dim="wavelength", quantity="absorbance", labels=["a", "b", "c"])


def test_shifts_are_found_and_taken_out():
    shifts = np.array([0.4, -1.3, 2.2])
    spectra = labelled(np.stack([h * bands(AXIS - s) + 0.1 for h, s in zip((1, 2, 0.3), shifts, strict=True)]))
    step = Align(reference=bands(AXIS), max_shift=4.0).fit(spectra)
    moves = step.moves(spectra)
    assert moves.dims == ("sample", "move")
    assert moves.label.values.tolist() == ["a", "b", "c"]
    np.testing.assert_allclose(moves.sel(move="shift"), shifts, atol=2e-3)
    aligned = step.transform(spectra).values
    expected = np.stack([h * bands(AXIS) + 0.1 for h in (1, 2, 0.3)])
    inside = np.isfinite(aligned)
    np.testing.assert_allclose(aligned[inside], expected[inside], atol=1e-4)
    lost = [np.isnan(row).nonzero()[0] for row in aligned]
    assert [part.size for part in lost] == [1, 3, 5]
    assert lost[0][0] == 599
    assert lost[1][0] == 0


def test_stretch_is_found_with_the_shift():
    lever = np.linspace(-1, 1, 600)
    spectra = labelled(np.stack([bands(AXIS - 0.7 - 1.2 * lever)] * 3))
    moves = Align(reference=bands(AXIS), max_shift=3.0, max_stretch=3.0).fit(spectra).moves(spectra)
    np.testing.assert_allclose(moves, [[0.7, 1.2]] * 3, atol=5e-3)


def test_the_mean_is_the_reference_unless_given():
    spectra = labelled(np.stack([bands(AXIS - s) for s in (-0.5, 0.0, 0.5)]))
    step = Align().fit(spectra)
    np.testing.assert_allclose(step.reference_, spectra.mean("sample"), atol=1e-15)
    np.testing.assert_allclose(step.moves(spectra)[:, 0], [-0.5, 0, 0.5], atol=0.02)


def test_what_stops_at_the_bound_or_has_no_band_is_said():
    spectra = labelled(np.stack([bands(AXIS - 5), np.full(600, 2.0), bands(AXIS)]))
    with pytest.warns(UnmixWarning) as caught:
        aligned = Align(reference=bands(AXIS), max_shift=2.0).fit_transform(spectra)
    messages = [str(warning.message) for warning in caught]
    assert any("1 spectra stop at max_shift 2 and 0 had not settled, of 3" in text for text in messages)
    assert any("no answer for spectra without a band to go by: 'b'" in text for text in messages)
    assert np.isnan(aligned.values[1]).all()


def test_no_shift_allowed_is_no_shift():
    values = np.stack([bands(AXIS - 0.4)] * 3)
    np.testing.assert_array_equal(Align(reference=bands(AXIS), max_shift=0.0).fit_transform(labelled(values)), values)
