"""How often ``identify`` names the right mixture, and says that a member is not in the library."""

import libraries as make
import numpy as np
import pytest

import unmix
from unmix.spectra import make_spectra

pytestmark = pytest.mark.study

#: libraries, mixtures out of each
LIBRARIES, EACH = 4, 60


def white(rng, p):
    return rng.normal(size=p)


def smoothed(rng, p):
    return np.convolve(rng.normal(size=p + 2), np.full(3, 1 / np.sqrt(3)), "valid")


def labelled(y):
    return make_spectra(y, make.AXIS, dim="wavenumber", quantity="absorbance")


@pytest.mark.parametrize("noise", [white, smoothed], ids=["white", "smoothed"])
def test_the_right_mixture_is_named(noise):
    first, listed, silent, wrong = [], [], [], []
    for seed in range(LIBRARIES):
        rng = np.random.default_rng([11, seed])
        spectra, names = make.library(rng, 250)
        library = make_spectra(spectra, make.AXIS, dim="wavenumber", quantity="absorptivity", leading="component",
                               labels=names)  # fmt: skip
        for i in range(EACH):
            mixture = make.mixture(rng, spectra, 1 + i % 4, noise)
            found = unmix.identify(labelled(mixture.y), library, baseline=2, path_length=1)
            want = {names[j] for j in mixture.members}
            got = [{name for name in row if name} for row in found.components.values[0]]
            first.append(got[0] == want)
            listed.append(want in got)
            wrong.append(not got[0] <= want)
            silent.append(got[0] != want and found.verdict.values[0] == "supported")
    rates = [np.mean(one) for one in (first, listed, wrong, silent)]
    print("\n{} noise: first {:.1%}, listed {:.1%}, a wrong name first {:.1%}, wrong and supported {:.1%}".format(
        noise.__name__, *rates))  # fmt: skip
    assert rates[0] >= 0.90
    assert rates[1] >= 0.98
    assert rates[3] <= 0.02


def test_a_member_that_the_library_lacks_is_flagged():
    flagged = []
    for seed in range(LIBRARIES):
        rng = np.random.default_rng([12, seed])
        spectra, names = make.library(rng, 250)
        for i in range(EACH):
            mixture = make.mixture(rng, spectra, 2 + i % 3, white)
            gone = mixture.members[int(rng.integers(len(mixture.members)))]
            rest = np.delete(np.arange(250), gone)
            library = make_spectra(spectra[rest], make.AXIS, dim="wavenumber", quantity="absorptivity",
                                   leading="component", labels=[names[j] for j in rest])  # fmt: skip
            found = unmix.identify(labelled(mixture.y), library, baseline=2, path_length=1)
            flagged.append(found.verdict.values[0] != "supported")
    print(f"\na member more than five times the noise left out of the library: flagged in {np.mean(flagged):.1%}")
    assert np.mean(flagged) >= 0.95
