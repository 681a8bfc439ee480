"""The rules from supported to unsupported, one finding at a time, and that each reason holds its numbers."""

import numpy as np
import pytest

from unmix.diagnose.verdict import VERDICTS, Band, Evidence, Words, judge, judge_design

WORDS = Words(["alcohol", "ketone"], "g/L", "cm-1")


def evidence(**changes):
    """A sample with nothing against it, with changes."""
    amount = np.array(changes.pop("concentration", [10.0, 5.0]))
    base = {
        "concentration": amount, "lower": amount - 0.1, "upper": amount + 0.1, "detected": amount > 0.05,
        "signal_length": np.array([2.0, 3.0]), "n_terms": 4, "channels_used": 500, "freedom": 496.0,
        "noise_level": 1e-3, "misfit_z": 2.1, "misfit_limit": 4.4, "harm": np.zeros(2),
        "negative": np.array([40.0, 30.0]),
    }  # fmt: skip
    return Evidence(**{**base, **changes})


def band(height=0.02, z=41.0, shift=(0.1, -3.2)):
    return Band(1733.0, 18.0, height, z, np.array(shift))


def test_supported_says_what_speaks_for_it():
    verdict, reason = judge(evidence(), WORDS)
    assert verdict == "supported"
    assert "0.001 absorbance" in reason
    assert "2.1" in reason
    assert "4.4" in reason


def test_too_few_channels_give_no_amount():
    verdict, reason = judge(evidence(channels_used=3, channels_missing=497), WORDS)
    assert verdict == "unsupported"
    assert "Only 3 channels" in reason
    assert "4 unknowns" in reason
    assert "497 have no value" in reason


def test_an_unexplained_band_is_named_with_place_width_score_and_harm():
    verdict, reason = judge(evidence(bands=[band()], harm=np.array([0.1, 3.2])), WORDS)
    assert verdict == "doubtful"
    for part in ("1733 cm-1", "18 cm-1", "z = 41", "ketone", "3.2 g/L"):
        assert part in reason


def test_a_missing_band_is_told_from_an_unexplained_one():
    _, reason = judge(evidence(bands=[band(height=-0.02, z=-41.0)], harm=np.array([0.1, 3.2])), WORDS)
    assert "puts in a band" in reason
    assert "z = -41" in reason


def test_harm_as_large_as_the_amount_is_unsupported():
    verdict, reason = judge(evidence(bands=[band(shift=(0.1, 7.0))], harm=np.array([0.1, 7.0])), WORDS)
    assert verdict == "unsupported"
    assert "as large as the amount of ketone" in reason


def test_harm_to_a_component_that_is_not_there_is_no_more_than_doubtful():
    found = evidence(concentration=[10.0, 0.0], bands=[band(shift=(0.1, 7.0))], harm=np.array([0.1, 7.0]))
    assert judge(found, WORDS)[0] == "doubtful"


def test_three_bands_are_named_and_the_rest_counted():
    _, reason = judge(evidence(bands=[band()] * 8, harm=np.array([0.1, 3.2])), WORDS)
    assert reason.count("1733 cm-1") == 3
    assert "5 further bands" in reason


@pytest.mark.parametrize(("half", "verdict"), [(0.5, "supported"), (2.0, "doubtful"), (9.0, "unsupported")])
def test_confused_components_are_judged_by_their_intervals(half, verdict):
    amount = np.array([10.0, 5.0])
    found = evidence(groups=[(60.0, [0, 1])], lower=amount - half, upper=amount + half)
    given, reason = judge(found, WORDS)
    assert given == verdict
    if verdict != "supported":
        assert "alcohol and ketone" in reason
        assert "condition index 60" in reason


def test_exchangeable_components_are_unsupported_however_small_the_noise():
    verdict, reason = judge(evidence(groups=[(450.0, [0, 1])]), WORDS)
    assert verdict == "unsupported"
    assert "cannot be told apart" in reason
    assert "0.2%" in reason


@pytest.mark.parametrize("width", [np.nan, np.inf])
def test_undetermined_components_are_unsupported(width):
    amount = np.array([10.0, 5.0])
    found = evidence(groups=[(1e15, [0, 1])], upper=amount + width)
    verdict, reason = judge(found, WORDS)
    assert verdict == "unsupported"
    assert "the same up to a factor" in reason


def test_confusion_of_components_that_are_not_there_does_not_matter():
    found = evidence(concentration=[0.0, 0.0], lower=np.zeros(2), upper=np.full(2, 1e-4), groups=[(450.0, [0, 1])])
    assert judge(found, WORDS)[0] == "supported"


def test_confusion_with_the_baseline_is_named():
    _, reason = judge(evidence(groups=[(450.0, [1])]), WORDS)
    assert "ketone and the baseline" in reason


def test_saturated_channels_are_counted_and_most_of_them_are_too_many():
    verdict, reason = judge(evidence(channels_saturated=37, channels_used=463, plateau=2.7), WORDS)
    assert verdict == "doubtful"
    assert "37 of 500" in reason
    assert "2.7" in reason
    assert judge(evidence(channels_saturated=300, channels_used=200, plateau=2.7), WORDS)[0] == "unsupported"


def test_stray_light_and_a_growing_residual_are_doubtful():
    assert "0.3%" in judge(evidence(stray=0.003), WORDS)[1]
    verdict, reason = judge(evidence(growth=5.0), WORDS)
    assert verdict == "doubtful"
    assert "5 times" in reason


def test_far_below_zero_means_that_the_model_is_wrong():
    # a small negative signal beside a large amount is doubtful, one as large as what was found is unsupported
    small = evidence(negative=np.array([100.0, -6.0]), concentration=[10.0, 0.0], unbounded=np.array([10.0, -0.5]))
    verdict, reason = judge(small, WORDS)
    assert verdict == "doubtful"
    assert "less than none of ketone" in reason
    assert "6.0" in reason
    large = evidence(negative=np.array([100.0, -600.0]), concentration=[10.0, 0.0], unbounded=np.array([10.0, -50.0]))
    assert judge(large, WORDS)[0] == "unsupported"
    assert judge(evidence(negative=np.array([9.0, -3.0])), WORDS)[0] == "supported"


def test_a_spectrum_below_zero_is_no_sample():
    assert "below zero" in judge(evidence(negative_share=0.9), WORDS)[1]


def test_a_blank_spectrum_tells_nothing():
    found = evidence(concentration=[0.0, 0.0], detected=np.zeros(2, dtype=bool), blank=True)
    verdict, reason = judge(found, WORDS)
    assert verdict == "doubtful"
    assert "nothing was measured" in reason


def test_no_freedom_and_no_noise_is_no_interval():
    verdict, reason = judge(evidence(channels_used=4, freedom=0.0, noise_level=np.nan, misfit_limit=np.nan), WORDS)
    assert verdict == "doubtful"
    assert "give the noise level" in reason


def test_given_noise_without_freedom_is_supported_and_says_what_it_rests_on():
    found = evidence(channels_used=4, freedom=0.0, noise_level=np.nan, noise_given=1e-3, misfit_limit=np.nan)
    verdict, reason = judge(found, WORDS)
    assert verdict == "supported"
    assert "noise that was given" in reason


@pytest.mark.parametrize(("given", "verdict"), [(1e-3, "supported"), (0.95e-3, "supported"), (0.5e-3, "doubtful")])
def test_a_residual_larger_than_the_noise_given_is_doubtful(given, verdict):
    found, reason = judge(evidence(noise_given=given), WORDS)
    assert found == verdict
    assert ("2.0 times the noise" in reason) == (verdict == "doubtful")


def test_a_residual_that_changes_slowly_is_no_noise():
    verdict, reason = judge(evidence(correlation_length=200.0), WORDS)
    assert verdict == "doubtful"
    assert "200 of 500 channels" in reason


def test_the_gravest_finding_decides_and_comes_first():
    found = evidence(channels_saturated=10, bands=[band()], harm=np.array([0.1, 3.2]), groups=[(450.0, [0, 1])])
    verdict, reason = judge(found, WORDS)
    assert verdict == "unsupported"
    assert reason.startswith("alcohol and ketone cannot be told apart")
    assert "saturated" in reason
    assert "1733" in reason


def test_designs_before_any_sample():
    names = ["alcohol", "ketone", "ester"]
    assert judge_design([], 12.3, names, 30.0)[0] == "supported"
    assert "12.3" in judge_design([], 12.3, names, 30.0)[1]
    verdict, reason = judge_design([(45.0, [0, 1])], 45.0, names, 30.0)
    assert verdict == "doubtful"
    assert "alcohol and ketone can hardly" in reason
    verdict, reason = judge_design([(45.0, [0, 1]), (500.0, [2])], 500.0, names, 30.0)
    assert verdict == "unsupported"
    assert "ester and the baseline cannot" in reason


def test_every_verdict_is_one_of_three():
    assert VERDICTS == ("supported", "doubtful", "unsupported")


@pytest.mark.parametrize("unit", ["g/L", "1", "%"])
def test_amounts_carry_their_unit(unit):
    text = Words(["a"], unit, "nm").amount(0.012345)
    assert text == ("0.0123" if unit == "1" else f"0.0123 {unit}")


def test_reasons_are_sentences():
    cases = [evidence(), evidence(stray=0.003), evidence(bands=[band()], harm=np.ones(2)), evidence(growth=9.0)]
    for one in cases:
        reason = judge(one, WORDS)[1]
        assert reason.endswith(".")
        assert "nan" not in reason
        assert "  " not in reason
