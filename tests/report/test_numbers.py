import math

import pytest

from unmix.report.numbers import ABSENT, amount, significant


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [(0.012345, 3, "0.0123"), (1234.5, 3, "1230"), (2.5e-7, 3, "2.50e-07"), (0.0, 3, "0"), (-0.5, 2, "-0.50"),
     (math.nan, 3, ABSENT), (math.inf, 3, "unlimited"), (9.996, 3, "10.00"), (1e9, 2, "1.0e+09")],
)  # fmt: skip
def test_significant_digits(value, digits, text):
    assert significant(value, digits) == text


@pytest.mark.parametrize(
    ("value", "lower", "upper", "uncertainty", "texts"),
    [
        (12.3456, 12.1, 12.6, 0.127, ("12.35", "12.10", "12.60")),
        (8.86e-3, 8.80e-3, 8.92e-3, 3e-5, ("0.008860", "0.008800", "0.008920")),
        (3.2e-7, 3.1e-7, 3.3e-7, 5e-9, ("3.200e-07", "3.100e-07", "3.300e-07")),
        (1234.5, 1100, 1300, 60.0, ("1234", "1100", "1300")),
        (100.0, 100.0, 100.0, 0.0, ("100.0", "100.0", "100.0")),
        (5.0, 2.0, math.inf, 1.5, ("5.0", "2.0", "unlimited")),
        # unexplained bands widened the interval beyond the standard uncertainty, so digits go
        (50.0, 40.0, 60.0, 0.01, ("50.0", "40.0", "60.0")),
    ],
)  # fmt: skip
def test_an_amount_has_the_digits_that_its_uncertainty_leaves(value, lower, upper, uncertainty, texts):
    shown = amount(value, lower, upper, detected=True, uncertainty=uncertainty)
    assert (shown.value, shown.lower, shown.upper) == texts
    assert shown.found


@pytest.mark.parametrize("value", [0.0, 0.1])
def test_what_is_not_detected_is_below_its_limit_and_never_nought(value):
    shown = amount(value, 0.0, 0.3049, detected=False, uncertainty=0.16)
    assert shown.value == "< 0.31"
    assert not shown.found
    assert shown.interval == "0.00 to 0.31"


def test_a_limit_is_rounded_up():
    for upper in (0.3001, 0.0010001, 99.01, 1.0):
        shown = amount(0.0, 0.0, upper, detected=False, uncertainty=upper / 2)
        assert float(shown.value.removeprefix("< ")) >= upper * (1 - 1e-9)


def test_what_could_not_be_determined_is_absent():
    shown = amount(math.nan, math.nan, math.nan, detected=False)
    assert shown.value == ABSENT
    assert not shown.known
    assert shown.interval == ""


def test_an_interval_wholly_below_nought_is_shown_as_it_is():
    assert amount(-1.0, -3.0, -0.2, detected=False, uncertainty=0.7).value == "-1.00"
