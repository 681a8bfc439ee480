"""Results as ``unmix.quantify`` and ``unmix.conditioning`` return them, built here from invented bands.

The numbers come from plain least squares, so that figures and tables have something true to show; what the
tests need (doubt, saturation, hostile names) is put in by hand.
"""

import json

import numpy as np
import pytest
import xarray as xr

BANDS = {
    "isopropanol": [(952, 14, 6), (1130, 20, 5), (1380, 18, 3), (2970, 30, 8), (3340, 160, 4)],
    "acetone": [(1222, 14, 6), (1363, 12, 5), (1715, 14, 14), (3005, 20, 1)],
    "toluene": [(695, 9, 9), (729, 9, 16), (1495, 10, 5), (3030, 25, 4)],
    "water": [(1640, 70, 3), (3300, 260, 12)],
}


def bands(axis, lines):
    return sum(h / (1 + ((axis - at) / (w / 2)) ** 2) for at, w, h in lines) / 1000


def described(variable, long_name, units):
    return variable[0], variable[1], {"long_name": long_name, "units": units}


def build_quantify(n_samples=8, axis=None, names=None, labels=None, noise=5e-4, seed=1):
    rng = np.random.default_rng(seed)
    axis = np.arange(650.0, 4000.0, 4.0) if axis is None else axis
    names = list(BANDS) if names is None else names
    k, p, n = len(names), axis.size, n_samples
    lines = [list(BANDS.values())[j % 4] for j in range(k)]
    pure = np.array([bands(axis + 3 * (j // 4), one) for j, one in enumerate(lines)])
    truth = rng.uniform(5, 80, (n, k))
    truth[0, -1] = 0.0
    base = np.outer(rng.normal(0.01, 0.01, n), np.ones(p)) + np.outer(
        rng.normal(0, 0.01, n), np.linspace(-1, 1, p)
    )
    measured = truth @ pure + base + rng.normal(0, noise, (n, p))
    if n > 2:  # an unlisted compound in the second sample, saturated bands in the third
        measured[1] += 0.3 * bands(axis, [(1740, 18, 100)])
    used = np.ones((n, p), dtype=bool)
    if n > 2:
        used[2] = measured[2] < 0.9
    design = np.vstack([pure, np.ones(p), np.linspace(-1, 1, p)])
    answer, error, fitted, baseline = [], [], [], []
    for y, keep in zip(measured, used, strict=True):
        a = design[:, keep].T
        c, *_ = np.linalg.lstsq(a, y[keep], rcond=None)
        r = y[keep] - a @ c
        answer.append(c[:k])
        error.append(np.sqrt(np.diag(np.linalg.inv(a.T @ a)))[:k] * r.std())
        fitted.append(np.where(keep, design.T @ c, np.nan))
        baseline.append(design[k:].T @ c[k:])
    c, s = np.array(answer), np.array(error)
    c = np.maximum(c, 0)
    residual = measured - np.array(fitted)
    verdict = np.array(["supported"] * n, dtype=object)
    reason = np.array(["no unexplained band (largest z 3.1, limit 4.3)"] * n, dtype=object)
    if n > 2:
        verdict[1], reason[1] = (
            "unsupported",
            (
                "a band at 1740 cm-1, about 18 cm-1 wide, is not explained (z = 41); it could move acetone by 3.2 g/L"
            ),
        )
        verdict[2], reason[2] = "doubtful", "37 of 838 channels are saturated and were left out"
    per = ("sample", "component")
    spectral = ("sample", "wavenumber")
    position = np.full((n, 2), np.nan)
    position[1 if n > 2 else 0, 0] = 1740.0
    filled = np.isfinite(position)
    data = {
        "concentration": described((per, c), "concentration", "g/L"),
        "standard_uncertainty": described((per, s), "standard uncertainty", "g/L"),
        "lower": described((per, np.maximum(c - 1.96 * s, 0)), "lower limit", "g/L"),
        "upper": described((per, c + 1.96 * s), "upper limit", "g/L"),
        "critical_level": described((per, 1.65 * s), "critical level", "g/L"),
        "detection_limit": described((per, 3.3 * s), "detection limit", "g/L"),
        "quantification_limit": described((per, 10 * s), "quantification limit", "g/L"),
        "misfit_harm": described((per, 0 * s), "possible shift by unexplained bands", "g/L"),
        "detected": described((per, c > 1.65 * s), "above the critical level", "1"),
        "measured": described((spectral, measured), "measured absorbance", "1"),
        "fitted": described((spectral, np.array(fitted)), "fitted absorbance", "1"),
        "residual": described((spectral, residual), "residual absorbance", "1"),
        "baseline": described((spectral, np.array(baseline)), "fitted baseline", "1"),
        "used": described((spectral, used), "channel used", "1"),
        "pure_signal": described((("component", "wavenumber"), pure), "signal per unit concentration", "L/g"),
        "path_factor": described(("sample", np.ones(n)), "path factor", "1"),
        "verdict": described(("sample", verdict.astype(str)), "verdict", "1"),
        "reason": described(("sample", reason.astype(str)), "reason", "1"),
        "noise_level": described(("sample", np.nanstd(residual, axis=1)), "noise level", "1"),
        "noise_correlation_length": described(("sample", np.ones(n)), "noise correlation length", "channels"),
        "effective_channels": described(("sample", used.sum(1).astype(float)), "effective channels", "1"),
        "channels_used": described(("sample", used.sum(1)), "channels used", "1"),
        "channels_missing": described(("sample", np.zeros(n, dtype=int)), "channels missing", "1"),
        "channels_saturated": described(("sample", (~used).sum(1)), "channels saturated", "1"),
        "misfit_z": described(
            ("sample", np.where(np.arange(n) == 1, 41.0, 3.1)), "largest misfit score", "1"
        ),
        "misfit_limit": described(("sample", np.full(n, 4.3)), "misfit limit", "1"),
        "lack_of_fit": described(("sample", np.full(n, 0.4)), "lack of fit", "percent"),
        "misfit_position": described((("sample", "misfit_band"), position), "position", "cm-1"),
        "misfit_width": described(
            (("sample", "misfit_band"), np.where(filled, 18.0, np.nan)), "width", "cm-1"
        ),
        "misfit_height": described(
            (("sample", "misfit_band"), np.where(filled, 0.03, np.nan)), "height", "1"
        ),
        "misfit_score": described((("sample", "misfit_band"), np.where(filled, 41.0, np.nan)), "score", "1"),
        "variance_inflation": described(("component", np.linspace(1.1, 90, k)), "variance inflation", "1"),
        "selectivity": described(("component", np.linspace(0.95, 0.1, k)), "selectivity", "1"),
        "confused_with": described(
            ("component", [""] * (k - 1) + [names[0]]), "most easily confused with", "1"
        ),
        "condition_index": described(((), 12.3), "condition index", "1"),
    }
    if labels is None:
        labels = [f"drum {i + 1}" for i in range(n)]
    return xr.Dataset(
        data,
        coords={
            "component": ("component", names),
            "wavenumber": ("wavenumber", axis, {"units": "cm-1"}),
            "label": ("sample", labels),
            "file": ("sample", [f"drum_{i + 1}.jdx" for i in range(n)]),
        },
        attrs=attributes("quantify"),
    )


def attributes(kind):
    return {
        "kind": kind,
        "level": 0.95,
        "baseline": 1,
        "regions": "650 to 4000 cm-1",
        "title": "Recovered solvent",
        "caution": "The answer covers the listed components only.",
        "reproducibility": "Nothing is known about variation between repeated measurements.",
        "assumptions": json.dumps(["absorbances of the components add up", "no component is negative"]),
        "notes": json.dumps(["drum_3.jdx: 37 saturated channels left out"]),
        "method": kind,
        "settings": json.dumps({"baseline": 1, "level": 0.95}),
        "versions": json.dumps({"python": "3.11", "unmix": "0.1.0"}),
        "inputs": json.dumps({"spectra": {"drum_1.jdx": "ab" * 32}}),
        "created": "2030-01-01T12:00:00+00:00",
    }


def build_conditioning(noise=True):
    axis = np.arange(650.0, 4000.0, 8.0)
    names = list(BANDS)
    pure = np.array([bands(axis, lines) for lines in BANDS.values()])
    k = len(names)
    unit = pure / np.linalg.norm(pure, axis=1, keepdims=True)
    angle = np.degrees(np.arccos(np.clip(unit @ unit.T, -1, 1)))
    limit = np.linspace(0.2, 4, k) if noise else np.full(k, np.nan)
    return xr.Dataset(
        {
            "condition_index": described(("term", np.linspace(1, 34, k + 2)), "condition index", "1"),
            "variance_proportion": described(
                (("term", "component"), np.full((k + 2, k), 1 / (k + 2))), "variance proportion", "1"
            ),
            "variance_inflation": described(
                ("component", np.linspace(1.0, 60, k)), "variance inflation", "1"
            ),
            "selectivity": described(("component", np.linspace(1.0, 0.13, k)), "selectivity", "1"),
            "spectral_angle": described((("component", "component_2"), angle), "spectral angle", "degree"),
            "detection_limit": described(("component", limit), "detection limit", "g/L"),
            "confused_with": described(("component", ["", "", "", "isopropanol"]), "confused with", "1"),
            "pure_signal": described(
                (("component", "wavenumber"), pure), "signal per unit concentration", "L/g"
            ),
            "net_signal": described((("component", "wavenumber"), 0.7 * pure), "net analyte signal", "L/g"),
            "verdict": described(((), "doubtful"), "verdict", "1"),
            "reason": described(
                ((), "water is hardly told apart from isopropanol (index 34)"), "reason", "1"
            ),
        },
        coords={
            "component": ("component", names),
            "component_2": ("component_2", names),
            "term": ("term", [*names, "offset", "slope"]),
            "wavenumber": ("wavenumber", axis, {"units": "cm-1"}),
        },
        attrs=attributes("conditioning"),
    )


@pytest.fixture
def composition():
    return build_quantify()


@pytest.fixture
def design():
    return build_conditioning()


@pytest.fixture
def make_composition():
    return build_quantify


@pytest.fixture
def make_conditioning():
    return build_conditioning
