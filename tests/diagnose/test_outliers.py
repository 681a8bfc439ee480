import numpy as np
import pytest

from unmix.diagnose.outliers import estimated_traces, nearest, region_at_fault, residual_limit, traces


def test_traces_from_few_samples_are_those_of_the_covariance_they_came_from(rng):
    eigenvalues = np.array([5.0, 3, 2, *[0.5] * 40])
    each = [estimated_traces(rng.normal(size=(20, 43)) * np.sqrt(eigenvalues)) for _ in range(1500)]
    error = np.std(each, axis=0) / np.sqrt(1500)
    assert (np.abs(np.mean(each, axis=0) - traces(eigenvalues)) < 4 * error).all()


def test_plain_traces_of_few_samples_would_be_too_large(rng):
    x = rng.normal(size=(20, 43))
    plain = traces(np.linalg.svd(x, compute_uv=False) ** 2 / 20)
    assert plain[1] > 2 * estimated_traces(x)[1]


@pytest.mark.parametrize("samples", [1, 3, 4, 5])
def test_traces_stay_possible_for_few_samples_and_for_none(rng, samples):
    one, two, three = estimated_traces(rng.normal(size=(samples, 6)))
    assert one**2 / 6 <= two <= one**2 * (1 + 1e-12)
    assert two**2 / one <= three * (1 + 1e-12)
    assert estimated_traces(np.zeros((4, 6))) == (0.0, 0.0, 0.0)


def test_the_limit_holds_for_normal_residuals(rng):
    eigenvalues = np.array([4.0, 2, 1, 0.5, 0.25])
    q = np.sum(rng.normal(size=(20_000, 5)) ** 2 * eigenvalues, axis=1)
    for level in (0.95, 0.99):
        beyond = np.mean(q > residual_limit(traces(eigenvalues), level))
        # the formula itself is an approximation: half a point at 5%
        assert abs(beyond - (1 - level)) < 4 * np.sqrt(level * (1 - level) / 20_000) + 0.1 * (1 - level)


def test_nearest_neighbours_by_hand():
    known = np.array([[0.0, 0], [3, 4], [10, 0]])
    np.testing.assert_allclose(nearest(np.array([[0.0, 1], [3, 4]]), known), [1.0, 0.0])
    np.testing.assert_allclose(nearest(known, known, itself=True), [25.0, 25.0, 65.0])
    assert nearest(np.zeros((1, 2)), np.zeros((1, 2)), itself=True)[0] == np.inf


def test_nearest_in_many_blocks(rng):
    scores, known = rng.normal(size=(9000, 2)), rng.normal(size=(30, 2))
    brute = ((scores[:, None] - known) ** 2).sum(axis=2).min(axis=1)
    np.testing.assert_allclose(nearest(scores, known), brute, atol=1e-12)


def test_the_region_at_fault_is_around_the_peak():
    share = np.exp(-(((np.arange(100) - 40) / 5.0) ** 2))
    first, last, part = region_at_fault(share)
    assert 33 <= first < 40 < last <= 47
    assert part == pytest.approx(share[first : last + 1].sum() / share.sum())


@pytest.mark.parametrize(("peak", "ends"), [(0, (0, 0)), (9, (9, 9))])
def test_a_region_at_an_end_of_the_axis(peak, ends):
    share = np.full(10, -1.0)
    share[peak] = 2.0
    assert region_at_fault(share) == (*ends, 1.0)


def test_no_positive_share_is_the_whole_axis():
    assert region_at_fault(np.full(5, -1.0)) == (0, 4, 1.0)
