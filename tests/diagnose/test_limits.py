"""Intervals and limits: closed forms, the bound at zero, and coverage with a counter-test."""

import numpy as np
import pytest
from scipy import stats

from unmix.diagnose.limits import interval, limits, quantile

INFINITE = np.asarray(np.inf)


def test_quantile_is_student_s_and_normal_at_the_end():
    found = quantile(0.975, np.array([1.0, 10.0, np.inf, 0.0, -2.0, np.nan]))
    # printed tables of Student's t: 12.706, 2.228, 1.960
    assert found[:3] == pytest.approx([12.706, 2.228, 1.960], abs=5e-4)
    assert np.isnan(found[3:]).all()


def test_limits_are_multiples_of_the_uncertainty_at_zero():
    found = limits(np.array([1.0, 0.5]), INFINITE)
    assert found.critical == pytest.approx([1.645, 0.8224], abs=1e-3)
    assert found.detection == pytest.approx([3.290, 1.645], abs=1e-3)
    assert found.quantification == pytest.approx([10.0, 5.0])
    assert limits(np.array([1.0]), np.asarray(4.0)).critical == pytest.approx([stats.t.ppf(0.95, 4)])


def test_limits_without_freedom_are_not_known():
    assert np.isnan(limits(np.array([1.0]), np.asarray(0.0)).detection).all()


def bounded(estimate, uncertainty=1.0, freedom=INFINITE, level=0.95, **options):
    estimate = np.atleast_2d(np.asarray(estimate, dtype=float))
    reported = np.maximum(estimate, 0.0) if options.get("nonnegative", True) else estimate
    found = interval(estimate, np.full_like(estimate, uncertainty), freedom, level=level, reported=reported,
                     nonnegative=options.get("nonnegative", True))  # fmt: skip
    return found.lower[0], found.upper[0]


def test_interval_far_from_zero_is_symmetric():
    lower, upper = bounded([10.0])
    assert (lower[0], upper[0]) == pytest.approx((10 - 1.95996, 10 + 1.95996), abs=1e-4)


def test_interval_is_cut_at_zero_and_no_narrower_above():
    lower, upper = bounded([1.0])
    assert lower[0] == 0.0
    assert upper[0] == pytest.approx(2.95996, abs=1e-4)


@pytest.mark.parametrize("estimate", [0.0, -0.5, -1.9, -3.0, -10.0])
def test_an_absent_component_has_an_upper_limit_and_never_nought_plus_minus_nought(estimate):
    lower, upper = bounded([estimate])
    assert lower[0] == 0.0
    assert upper[0] >= 1.6448


def test_signed_amounts_are_not_cut():
    lower, upper = bounded([-5.0], nonnegative=False)
    assert (lower[0], upper[0]) == pytest.approx((-6.95996, -3.04004), abs=1e-4)


def test_interval_holds_the_reported_value():
    # the bounded optimum of a correlated pair can lie beside the interval of the free one
    found = interval(np.array([[1.0]]), np.array([[0.1]]), INFINITE, level=0.95, reported=np.array([[1.5]]),
                     nonnegative=True)  # fmt: skip
    assert found.lower[0, 0] < 1.0
    assert found.upper[0, 0] == 1.5


@pytest.mark.parametrize(("truth", "level"), [(0.0, 0.95), (0.5, 0.95), (2.0, 0.95), (20.0, 0.95), (2.0, 0.8)])
def test_cutting_at_zero_keeps_the_coverage(rng, truth, level):
    # 20,000 draws: standard error 0.15% at 95%, 0.28% at 80%; at the bound itself coverage is above nominal
    lower, upper = bounded(truth + rng.normal(size=20_000), level=level)
    inside = np.mean((lower <= truth) & (truth <= upper))
    assert inside > level - 0.012
    if truth > 4:
        assert inside < level + 0.012


def test_student_covers_when_the_uncertainty_is_estimated_from_few(rng):
    e = rng.normal(size=(20_000, 4))
    spread = e.std(axis=1, ddof=1)
    estimate = 20.0 + rng.normal(size=20_000)
    found = interval(estimate, spread, np.asarray(3.0), level=0.95, reported=estimate, nonnegative=True)
    assert np.mean((found.lower <= 20) & (found.upper >= 20)) == pytest.approx(0.95, abs=0.008)
    # counter-test: normal quantiles would be too narrow, and this would be seen
    narrow = interval(estimate, spread, INFINITE, level=0.95, reported=estimate, nonnegative=True)
    assert np.mean((narrow.lower <= 20) & (narrow.upper >= 20)) < 0.90
