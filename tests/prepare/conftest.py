"""Every step with parameters that suit spectra of 160 channels, so that a new step is tested at birth."""

import numpy as np
import pytest

from unmix import prepare as p
from unmix.spectra import make_spectra

CHANNELS = 160
PLAIN_AXIS = np.arange(float(CHANNELS))


def band(x, at, width):
    return np.exp(-4 * np.log(2) * ((x - at) / width) ** 2)


VAPOUR = sum(band(PLAIN_AXIS, at, 2.5) for at in (20, 27, 33, 41, 90, 96, 105, 118))
PATTERN = band(PLAIN_AXIS, 60, 25) + 0.6 * band(PLAIN_AXIS, 110, 30)

#: one example and more of each step
EXAMPLES = [
    p.AdaptiveReweighted(),
    p.Align(reference=PATTERN, max_shift=3.0, max_stretch=1.0),
    p.AsymmetricLeastSquares(),
    p.AsymmetricLeastSquares(penalty=1e3, asymmetry=0.1, difference=3, weights=np.linspace(0.5, 1, CHANNELS)),
    p.AsymmetricallyReweighted(tolerance=0.05),
    p.AutoScale(),
    p.ExtendedScatterCorrection(reference=PATTERN, interferents=[VAPOUR]),
    p.ExtendedScatterCorrection(reference=PATTERN, order=1, scale=False),
    p.ExternalParameterOrthogonalisation(components=2),
    p.GapDerivative(segment=3, gap=5),
    p.GapDerivative(derivative=2),
    p.GeneralisedLeastSquaresWeighting(),
    p.MaskSaturated(limit=50.0, margin=2),
    p.MeanCentre(),
    p.MultiplicativeScatterCorrection(),
    p.MultiplicativeScatterCorrection(reference=PATTERN),
    p.Normalise("area"),
    p.Normalise("maximum"),
    p.Normalise("length", to=3.0),
    p.Normalise("band", region=(50.0, 75.0)),
    p.Normalise("standard", region=(50.0, 75.0)),
    p.ParetoScale(),
    p.PolynomialBaseline(order=2),
    p.PolynomialBaseline(order=1, regions=[(0.0, 10.0), (140.0, 159.0)]),
    p.Regions(keep=[(10.0, 150.0)], drop=[(40.0, 45.5)]),
    p.Resample(spacing=1.7),
    p.Resample(axis=np.linspace(5, 150, 80), resolution=4.0, from_resolution=1.5),
    p.Resample(resolution=3.0, line_shape="triangle", through="transmittance"),
    p.RobustNormalVariate(),
    p.RubberBand(),
    p.SavitzkyGolay(),
    p.SavitzkyGolay(window=9, order=3, derivative=2),
    p.SpikeRemoval(),
    p.SpikeRemoval(fill="interpolate"),
    p.StandardNormalVariate(),
    p.Standardisation(np.arange(20, 140), np.tile([0.25, 0.5, 0.25], (120, 1)), np.linspace(0, 0.1, 120),
                      np.arange(20.5, 140)),
    p.VapourRemoval(VAPOUR, regions=[(10.0, 125.0)]),
    p.WhittakerSmoother(),
    p.WhittakerSmoother(penalty=30.0, difference=3),
]


def described(step):
    changed = ",".join(f"{k}={v}" for k, v in step.get_params().items() if isinstance(v, str | int | float))
    return f"{type(step).__name__}-{changed}"


@pytest.fixture(params=EXAMPLES, ids=described)
def step(request):
    return request.param


def some_rows(count=12, seed=0, channels=CHANNELS):
    """Spectra with bands of different heights, an offset, a slope and noise; all above zero."""
    rng = np.random.default_rng(seed)
    x = np.arange(float(channels))
    shapes = np.stack([band(x, at, width) for at, width in ((35, 14), (60, 25), (110, 30), (125, 9))])
    rows = rng.uniform(0.2, 1.5, (count, 4)) @ shapes + rng.uniform(0.1, 0.5, (count, 1))
    return rows + 0.001 * rng.uniform(size=(count, 1)) * x + 0.002 * rng.normal(size=rows.shape)


@pytest.fixture(scope="session")
def examples():
    return EXAMPLES


@pytest.fixture(scope="session")
def make_rows():
    return some_rows


@pytest.fixture
def rows():
    return some_rows()


@pytest.fixture
def labelled(rows):
    """The same spectra along a wavelength axis whose positions are the channel numbers."""
    return make_spectra(
        rows, PLAIN_AXIS, dim="wavelength", quantity="absorbance", labels=[f"s{i}" for i in range(len(rows))],
        coords={"batch": [i % 3 for i in range(len(rows))]}, attrs={"note": "kept"},
    )  # fmt: skip


@pytest.fixture(scope="session")
def vapour():
    return VAPOUR


@pytest.fixture(scope="session")
def pattern():
    return PATTERN
