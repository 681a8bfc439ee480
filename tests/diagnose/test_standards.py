"""Errors of standards: their model, outliers, bending, limits."""

import numpy as np
import pytest
from scipy import stats

from unmix.diagnose.spread import ErrorModel
from unmix.diagnose.standards import bent, error_model, outlying, upper_limit


def test_the_error_model_is_a_sum_of_squares():
    model = ErrorModel(np.array([0.3]), np.array([0.04]), np.array([10.0]))
    assert model.at(np.array([10.0])) == pytest.approx([0.5])


def test_both_parts_are_found(rng):
    c = rng.uniform(0.1, 10, (400, 1))
    errors = np.sqrt(0.1**2 + (0.05 * c) ** 2) * rng.normal(size=c.shape)
    model = error_model([c + errors], c)
    assert model.absolute[0] == pytest.approx(0.1, rel=0.35)
    assert model.relative[0] == pytest.approx(0.05, rel=0.15)
    assert model.freedom[0] == 398


def test_a_mislabelled_standard_is_outlying_and_chance_is_not(rng):
    false, found = 0, 0
    for _ in range(100):
        c = rng.uniform(1, 5, (20, 2))
        errors = 0.05 * rng.normal(size=c.shape)
        worst = int(np.argmax(np.abs(errors).max(axis=1)))
        rest = np.arange(20) != worst
        model = error_model([(c + errors)[rest]], c[rest])
        false += int(outlying(errors[[worst]], model, c[[worst]], among=40).any())
        found += int(outlying(np.array([[0.0, 0.5]]), model, c[[worst]], among=40)[0])
    assert false <= 6
    assert found == 100


def test_bending_is_the_t_test_of_a_quadratic_term(rng):
    x = np.linspace(1, 6, 12)[:, None]
    errors = 0.02 * (x - 3.5) ** 2 + 0.02 * rng.normal(size=x.shape)
    p = bent(errors, x)[0]
    # the general library: F test of the quadratic against the straight line
    rest = [np.sum((errors[:, 0] - np.polyval(np.polyfit(x[:, 0], errors[:, 0], d), x[:, 0])) ** 2) for d in (1, 2)]
    assert p == pytest.approx(stats.f.sf((rest[0] - rest[1]) / (rest[1] / 9), 1, 9), rel=1e-6)
    assert np.isnan(bent(errors[:4], x[:4])).all()


def test_p_of_bending_is_uniform_for_a_straight_line(rng):
    x = np.linspace(1, 6, 12)[:, None]
    p = np.array([bent(rng.normal(size=x.shape), x)[0] for _ in range(400)])
    assert stats.kstest(p, "uniform").pvalue > 0.001


def test_the_upper_limit_holds_for_a_new_value(rng):
    beyond = [np.exp(rng.normal()) > upper_limit(np.exp(rng.normal(size=20)), 0.95) for _ in range(2000)]
    assert 0.035 < np.mean(beyond) < 0.065
