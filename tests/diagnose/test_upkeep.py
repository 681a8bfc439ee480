"""Adjustments, paired tests and charts against general libraries and by simulation."""

import numpy as np
import pytest
from scipy import stats

from unmix.diagnose.upkeep import RUN_LENGTH, adjustment, chart, randomisation_p


def test_the_tests_of_an_adjustment_are_those_of_the_general_library(rng):
    f = rng.uniform(2, 8, 20)
    y = 0.3 + 1.1 * f + 0.2 * rng.normal(size=20)
    found = adjustment(y, f, 0.95)
    assert found.bias_p == pytest.approx(stats.ttest_1samp(y - f, 0.0).pvalue)
    line = stats.linregress(f, y)
    assert (found.slope, found.intercept) == pytest.approx((line.slope, line.intercept))
    # the slope against one, beside a bias: t squared is F
    t = (line.slope - 1.0) / line.stderr
    assert found.slope_p == pytest.approx(2 * stats.t.sf(abs(t), 18))
    assert found.advised == "slope and bias"
    assert found.error_after < found.error


def test_false_calls_for_an_adjustment_come_at_their_rate(rng):
    calls = []
    for _ in range(2000):
        f = rng.uniform(2, 8, 15)
        calls.append(adjustment(f + 0.2 * rng.normal(size=15), f, 0.95).advised != "none")
    # two tests at 5%: at most 10%, here nearly independent
    assert 0.07 < np.mean(calls) < 0.12


def test_the_randomisation_test_is_uniform_and_sees_a_difference(rng):
    p = [randomisation_p(rng.normal(size=12), rng.normal(size=12), shuffles=199, seed=i) for i in range(500)]
    assert stats.kstest(p, "uniform").statistic < 0.08
    assert randomisation_p(rng.normal(size=40), 3 * rng.normal(size=40), shuffles=1999, seed=0) < 0.005
    same = rng.normal(size=9)
    assert randomisation_p(same, same, shuffles=99, seed=0) == 1.0


def test_the_moving_average_is_the_recursion():
    z = np.array([1.0, -2.0, np.nan, 4.0])
    found = chart(z, 0.25)
    expected = [0.25, -0.3125, -0.3125, 0.765625]
    np.testing.assert_allclose(found.value, expected)
    # variance of the weighted mean after m readings (Roberts 1959)
    m = np.array([1, 2, 2, 3])
    variance = 0.25 / 1.75 * (1 - 0.75 ** (2 * m))
    np.testing.assert_allclose(found.limit, stats.norm.isf(0.5 / RUN_LENGTH) * np.sqrt(variance))
    assert not found.alarm.any()


def test_false_alarms_of_a_year_can_be_counted_on_one_hand(rng):
    # 365 points: 0.37 expected; 200 years
    alarms = [chart(rng.normal(size=365)).alarm.sum() for _ in range(200)]
    assert np.mean(alarms) < 0.8
    assert np.mean(np.array(alarms) > 5) < 0.02


def test_a_drift_is_found(rng):
    z = rng.normal(size=200) + np.linspace(0, 3, 200)
    assert chart(z).alarm.any()
    assert chart(z).alarm.argmax() < 150
