"""The silent error rate of ``quantify`` over everything instruments do, a thousand mixtures a situation.

A silent error is a reported value whose 95% interval misses the truth while the sample's verdict is ``supported``. The
table is printed; its last state stands in DEVELOPERS.md.
"""

import warnings
from dataclasses import dataclass

import mixtures as make
import numpy as np
import pytest

import unmix

pytestmark = pytest.mark.study

#: mixtures a situation: 20 sets of pure spectra, 2 to 6 components, 50 mixtures each
SETS, EACH = 20, 50


@dataclass(frozen=True)
class Situation:
    maker: object
    options: dict
    baseline: int | None = 1
    right_model: bool = True


def situation(maker, baseline=1, right_model=True, **options):
    return Situation(maker, options, baseline, right_model)


SITUATIONS = {
    "white noise": situation(make.mixtures),
    "3-point smoothed": situation(make.mixtures, noise="smoothed"),
    "Savitzky-Golay smoothed": situation(make.mixtures, noise="savitzky-golay"),
    "AR(1), 0.8": situation(make.mixtures, noise="ar"),
    "zero filled by 2": situation(make.mixtures, noise="zero filled 2"),
    "zero filled by 4": situation(make.mixtures, noise="zero filled 4"),
    "constant in transmittance": situation(make.in_transmittance),
    "no baseline": situation(make.mixtures, baseline=None),
    "baseline order 0": situation(make.mixtures, baseline=0),
    "baseline order 2": situation(make.mixtures, baseline=2),
    "baseline order 3": situation(make.mixtures, baseline=3),
    "cosine 0.99": situation(make.alike),
    "most components absent": situation(make.mixtures, present=0.2),
    "pure spectra known to 2%": situation(make.roughly_known),
    "unlisted compound": situation(make.with_unlisted, right_model=False),
    "shift up to one channel": situation(make.with_shift, right_model=False),
    "bands 10% wider": situation(make.with_broadening, right_model=False),
    "saturation": situation(make.with_saturation, baseline=None, right_model=False),
}


@dataclass
class Outcome:
    """Shares over all values or samples of a situation."""

    missed: float
    silent: float
    flagged: float
    unflagged_harm: float


@pytest.fixture(scope="module")
def outcomes():
    found = {}
    for name, case in SITUATIONS.items():
        missed, silent, flagged, harmed, harmed_flagged = [], [], [], 0, 0
        for number in range(SETS):
            rng = np.random.default_rng([20260101, number])
            options = dict(case.options)
            if case.maker is make.mixtures:
                options["baseline"] = case.baseline
            one = case.maker(rng, EACH, 2 + number % 5, **options)
            with warnings.catch_warnings():
                warnings.simplefilter("ignore", unmix.errors.UnmixWarning)
                result = unmix.quantify(one.spectra, one.pure, path_length=1, baseline=case.baseline)
            wrong = ~((result.lower.values <= one.truth) & (one.truth <= result.upper.values))
            doubt = result.verdict.values != "supported"
            missed.append(wrong.ravel())
            silent.append((wrong & ~doubt[:, None]).ravel())
            flagged.append(doubt)
            if one.harm is not None:
                # the uncertainty that the sample would have without the compound
                clean = unmix.quantify(one.clean, one.pure, path_length=1, baseline=case.baseline)
                moved = (np.abs(one.harm) > 3 * clean.standard_uncertainty.values).any(axis=1)
                harmed += moved.sum()
                harmed_flagged += (moved & doubt).sum()
        found[name] = Outcome(
            np.concatenate(missed).mean(),
            np.concatenate(silent).mean(),
            np.concatenate(flagged).mean(),
            1.0 - harmed_flagged / harmed if harmed else 0.0,
        )
    print("\n| situation | intervals miss | silent errors | flagged |\n|---|---|---|---|")
    for name, o in found.items():
        print(f"| {name} | {o.missed:.1%} | {o.silent:.1%} | {o.flagged:.1%} |")
    everything = np.mean([o.silent for o in found.values()])
    print(f"| all | | {everything:.1%} | |")
    print(f"harmful unlisted compounds not flagged: {found['unlisted compound'].unflagged_harm:.1%}")
    return found


RIGHT = [name for name, case in SITUATIONS.items() if case.right_model]


@pytest.mark.parametrize("name", RIGHT)
def test_intervals_cover_when_the_model_is_right(outcomes, name):
    assert 0.935 <= 1.0 - outcomes[name].missed <= 0.965, outcomes[name]


@pytest.mark.parametrize("name", RIGHT)
def test_right_models_are_seldom_flagged(outcomes, name):
    assert outcomes[name].flagged <= 0.02


def test_silent_errors_over_the_whole_suite(outcomes):
    assert np.mean([o.silent for o in outcomes.values()]) <= 0.04


def test_silent_errors_beside_an_unlisted_compound(outcomes):
    assert outcomes["unlisted compound"].silent <= 0.03


def test_an_unlisted_compound_that_does_harm_is_flagged(outcomes):
    assert outcomes["unlisted compound"].unflagged_harm <= 0.02
