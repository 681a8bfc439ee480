import pytest

from unmix.cli.options import baseline_from, regions_from
from unmix.errors import InputError


@pytest.mark.parametrize(
    ("text", "regions"),
    [
        (None, None),
        ("900-1300", [(900.0, 1300.0)]),
        ("1800-1650, 900-1300", [(1650.0, 1800.0), (900.0, 1300.0)]),
        ("1650:1800", [(1650.0, 1800.0)]),
        ("1650..1800", [(1650.0, 1800.0)]),
        ("1.5e3-1.6e3", [(1500.0, 1600.0)]),
        ("-200--100", [(-200.0, -100.0)]),
        ("650.5 to 700.25", [(650.5, 700.25)]),
    ],
)
def test_regions(text, regions):
    assert regions_from(text) == regions


@pytest.mark.parametrize("text", ["", "900", "a-b", "900-", "900-1300;1650-1800", "900-1300,", "1.2.3-4"])
def test_what_is_no_region_is_quoted(text):
    with pytest.raises(InputError, match=r"--regions: .* is not a region; give low-high"):
        regions_from(text)


@pytest.mark.parametrize(("text", "order"), [("none", None), ("None", None), ("0", 0), (" 2 ", 2)])
def test_baseline(text, order):
    assert baseline_from(text) == order


@pytest.mark.parametrize("text", ["-1", "1.5", "line", ""])
def test_what_is_no_baseline_is_quoted(text):
    with pytest.raises(InputError, match=r"give 0, 1, 2, \.\.\. or none"):
        baseline_from(text)
