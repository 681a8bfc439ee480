"""The public names, pinned: adding or dropping one is a decision and changes this file."""

import inspect
import subprocess
import sys
from importlib.metadata import version

import pytest

import unmix

NAMES = [
    "adjust", "calibrate", "check_calibration", "compare_calibrations", "conditioning", "drift", "identify",
    "interpret",
    "joint_region", "learn_pure", "load", "predict", "quantify", "read",
    "report", "save", "select_samples", "standard_addition", "transfer", "write",
]  # fmt: skip


def test_names_of_the_package():
    assert sorted(dir(unmix)) == sorted([*NAMES, "__version__"])
    assert sorted(unmix.__all__) == NAMES


@pytest.mark.parametrize("name", NAMES)
def test_every_name_is_a_function_with_a_docstring(name):
    thing = getattr(unmix, name)
    assert callable(thing)
    assert not inspect.ismodule(thing)
    assert thing.__doc__


def test_a_wrong_name_is_refused_with_those_there_are():
    with pytest.raises(AttributeError, match="has no attribute 'quantfy'; it has adjust, calibrate"):
        unmix.quantfy  # noqa: B018 - the access is what is tested


def test_first_arguments_are_fixed():
    first = {name: list(inspect.signature(getattr(unmix, name)).parameters) for name in NAMES}
    assert first["read"][0] == "source"
    assert first["write"][:2] == ["spectra", "path"]
    assert first["quantify"][:6] == ["spectra", "pure", "nonnegative", "baseline", "regions", "level"]
    assert first["conditioning"][:3] == ["pure", "noise", "regions"]
    assert first["learn_pure"][:2] == ["spectra", "amounts"]
    assert first["report"][:2] == ["result", "path"]
    assert first["calibrate"][:2] == ["spectra", "reference"]
    assert first["predict"][:3] == ["calibration", "spectra", "level"]
    assert first["save"][:2] == ["obj", "path"]
    assert first["load"] == ["path"]


def test_functions_stay_functions_when_their_packages_are_imported():
    # `unmix.read` is a function and a package; importing the package must not hide the function
    code = "import unmix.read, unmix.report, unmix; assert callable(unmix.read); assert callable(unmix.report)"
    subprocess.run([sys.executable, "-c", code], check=True)


def test_version_is_that_of_the_installed_package():
    assert unmix.__version__ == version("unmix")
