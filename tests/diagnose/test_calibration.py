import numpy as np
import pytest
from scipy import stats

from unmix.diagnose.calibration import figures, one_standard_error, samples_wanted, thin_range


def test_figures_by_hand():
    y, f = np.array([1.0, 2.0, 3.0, 4.0, 5.0]), np.array([1.2, 1.9, 3.3, 4.1, 4.9])
    found = figures(y, f, fitted=2)
    e = f - y
    assert found.error == pytest.approx(np.sqrt(np.sum(e**2) / 3))
    assert found.bias == pytest.approx(0.08)
    assert found.corrected == pytest.approx(np.std(e, ddof=1))
    assert found.r2 == pytest.approx(1 - np.sum(e**2) / 10)
    assert found.rpd == pytest.approx(np.std(y, ddof=1) / found.error)
    assert (found.lowest, found.highest, found.count) == (1.0, 5.0, 5)


def test_bias_and_line_agree_with_scipy(rng):
    y = rng.normal(size=30)
    f = 0.9 * y + 0.1 + 0.2 * rng.normal(size=30)
    found = figures(y, f)
    assert found.bias_p == pytest.approx(stats.ttest_1samp(f - y, 0).pvalue)
    line = stats.linregress(f, y)
    assert (found.slope, found.intercept) == (pytest.approx(line.slope), pytest.approx(line.intercept))


def test_the_joint_test_of_slope_and_intercept_is_uniform_when_both_hold(rng):
    # reference = predicted + error, so slope 1 and intercept 0 are true
    p = []
    for _ in range(400):
        f = rng.normal(size=15)
        p.append(figures(f + 0.3 * rng.normal(size=15), f).line_p)
    assert stats.kstest(p, "uniform").pvalue > 1e-3


def test_the_joint_test_finds_a_slope_that_leaves_no_bias(rng):
    f = rng.normal(size=40)
    f -= f.mean()
    found = figures(1.3 * f + 0.1 * rng.normal(size=40), f)
    assert found.line_p < 1e-6


def test_exact_predictions():
    y = np.array([1.0, 2.0, 3.0, 5.0])
    found = figures(y, y)
    assert (found.error, found.bias_p, found.line_p, found.r2) == (0.0, 1.0, 1.0, 1.0)
    assert np.isnan(found.rpd)


def test_missing_pairs_and_too_few_samples():
    found = figures(np.array([1.0, np.nan, 2.0]), np.array([1.5, 2.0, np.nan]))
    assert found.count == 1
    assert found.error == 0.5
    assert np.isnan([found.bias_p, found.corrected, found.slope, found.r2]).all()
    assert figures(np.array([np.nan]), np.array([1.0])).count == 0
    assert np.isnan(figures(np.ones(3), np.ones(3), fitted=3).error)


def test_the_rule_takes_the_smallest_number_within_one_standard_error():
    # four samples, mean squared errors 4, 1.5, 1, 1.2; at the best the standard error is 0.58
    e = np.array([[4.0, 4, 4, 4], [0.5, 2.5, 0.5, 2.5], [0, 2, 0, 2], [0.2, 2.2, 0.2, 2.2]])
    chosen, spread = one_standard_error(e)
    assert chosen == 1
    assert spread[2] == pytest.approx(np.std([0, 2, 0, 2], ddof=1) / 2)


def test_samples_of_one_batch_count_as_one_observation():
    e = np.repeat([[4.0, 4, 4, 4], [0.5, 2.5, 0.5, 2.5], [0, 2, 0, 2]], 5, axis=1)
    alone, one = one_standard_error(e)
    together, many = one_standard_error(e, np.repeat(np.arange(4), 5))
    assert many[2] > 2 * one[2]
    assert (alone, together) == (2, 1)


def test_untested_samples_play_no_part():
    e = np.array([[4.0, 4, np.nan], [1, 1, np.nan]])
    assert one_standard_error(e)[0] == 1


@pytest.mark.parametrize(("k", "wanted"), [(1, (24, 20)), (3, (24, 20)), (4, (30, 20)), (6, (42, 24))])
def test_samples_that_e1655_asks_for(k, wanted):
    assert samples_wanted(k) == wanted


def test_a_thin_part_of_the_range_is_named():
    even = np.linspace(0, 8, 41)
    assert thin_range(even) is None
    assert thin_range(even[(even < 4) | (even > 6)]) == (4.0, 6.0)
