import numpy as np
import pytest

from unmix.diagnose.jackknife import jackknife_plus, samples_for


def plain(predictions, errors, model_of, level):
    """The definition of Barber et al. (2021), equation 1.2, one sample at a time."""
    n = errors.size
    ends = []
    for row in predictions:
        low = np.sort(row[model_of] - errors)
        high = np.sort(row[model_of] + errors)
        k = int(np.floor((1 - level) * (n + 1) + 1e-9))
        ends.append((low[k - 1], high[n - k]) if k else (-np.inf, np.inf))
    return np.array(ends).T


@pytest.mark.parametrize("level", [0.5, 0.8, 0.9, 0.95])
@pytest.mark.parametrize("parts", [40, 5])
def test_ends_are_those_of_the_definition(rng, level, parts):
    model_of = rng.permutation(np.arange(40) % parts)
    predictions, errors = rng.normal(size=(300, parts)), np.abs(rng.normal(size=40))
    found = jackknife_plus(predictions, errors, model_of, level)
    np.testing.assert_array_equal(found, plain(predictions, errors, model_of, level))


def test_ends_do_not_depend_on_blocks(rng):
    model_of = np.arange(25)
    predictions, errors = rng.normal(size=(9000, 25)), np.abs(rng.normal(size=25))
    all_at_once = jackknife_plus(predictions, errors, model_of, 0.9)
    one = jackknife_plus(predictions[7000:7001], errors, model_of, 0.9)
    assert (all_at_once[0][7000], all_at_once[1][7000]) == (one[0][0], one[1][0])


def test_too_few_samples_have_no_end():
    low, high = jackknife_plus(np.zeros((1, 18)), np.ones(18), np.arange(18), 0.95)
    assert (low[0], high[0]) == (-np.inf, np.inf)


@pytest.mark.parametrize(("level", "least"), [(0.95, 19), (0.9, 9), (0.99, 99), (0.5, 1)])
def test_samples_that_a_level_takes(level, least):
    assert samples_for(level) == least
    for n, ends in ((least, True), (least - 1, False)):
        if n:
            low, _ = jackknife_plus(np.zeros((1, n)), np.ones(n), np.arange(n), level)
            assert np.isfinite(low[0]) == ends
