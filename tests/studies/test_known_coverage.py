"""Intervals and false alarms of ``quantify`` on clean mixtures in white noise."""

import mixtures as make
import numpy as np
import pytest

import unmix

pytestmark = pytest.mark.study


def test_intervals_of_two_thousand_clean_mixtures():
    # 40 sets of pure spectra, 50 mixtures each; nominal 5% of misses, the standard error of which is 0.25%
    missed, absent, flagged = [], [], []
    for seed in range(40):
        rng = np.random.default_rng(1000 + seed)
        case = make.mixtures(rng, 50, 2 + seed % 5)
        found = unmix.quantify(case.spectra, case.pure)
        wrong = (found.lower.values > case.truth) | (found.upper.values < case.truth)
        missed.append(wrong.ravel())
        absent.append(wrong[case.truth == 0])
        flagged.append(found.verdict.values != "supported")
    all_, zero, alarms = (np.mean(np.concatenate(part)) for part in (missed, absent, flagged))
    print(f"\n2,000 clean mixtures: intervals miss {all_:.1%}, of absent components {zero:.1%}; flagged {alarms:.1%}")
    assert 0.035 <= all_ <= 0.065
    assert zero <= 0.065
    assert alarms <= 0.02
