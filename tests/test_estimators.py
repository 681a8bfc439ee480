"""scikit-learn's own checks on every estimator of the package; a known exception is "check: reason"."""

import importlib
import inspect
import pkgutil
from typing import ClassVar

import numpy as np
import pytest
from sklearn.base import BaseEstimator
from sklearn.utils.estimator_checks import parametrize_with_checks

import unmix
from unmix.prepare import STEPS
from unmix.prepare.accept import spectrum
from unmix.prepare.interference import VapourRemoval
from unmix.prepare.step import Step
from unmix.prepare.transfer import Standardisation


def every_estimator():
    """Public estimator classes that can be made, in the order of their names."""
    found = set()
    for module in pkgutil.walk_packages(unmix.__path__, "unmix."):
        if not module.name.endswith("__main__"):
            module_names = vars(importlib.import_module(module.name))
            found.update(thing for thing in module_names.values() if inspect.isclass(thing))
    return sorted((c for c in found if is_estimator(c)), key=lambda c: c.__name__)


def is_estimator(thing):
    return (
        inspect.isclass(thing)
        and issubclass(thing, BaseEstimator)
        and thing.__module__.startswith("unmix.")
        and not thing.__name__.startswith("_")
        and not inspect.isabstract(thing)
    )


class VapourOnAnyAxis(VapourRemoval):
    """The checks change the number of channels, so this one makes its vapour to measure."""

    accepts: ClassVar = {**VapourRemoval.accepts, "vapour": spectrum().or_none("lines in every second channel")}

    def __init__(self, vapour=None, regions=None):
        super().__init__(vapour, regions)

    def _learn(self, rows, y):
        self.vapour = np.arange(rows.shape[1]) % 2.0
        super()._learn(rows, y)
        self.vapour = None


class StandardisationOfAnyAxis(Standardisation):
    """The checks change the number of channels, so this one makes a map of its own: every channel as it is."""

    accepts: ClassVar = {name: rule.or_none("every channel") for name, rule in Standardisation.accepts.items()}

    def __init__(self, first=None, weights=None, offset=None, axis=None):
        super().__init__(first, weights, offset, axis)

    def _learn(self, rows, y):
        every = np.arange(float(rows.shape[1]))
        self.first, self.weights, self.offset, self.axis = every, np.ones((every.size, 1)), 0 * every, every
        super()._learn(rows, y)
        self.first = self.weights = self.offset = self.axis = None


#: steps that need numbers which fit the axis, and what stands in for them
ON_ANY_AXIS = {VapourRemoval: VapourOnAnyAxis, Standardisation: StandardisationOfAnyAxis}

#: the spectra of the checks have one to four channels; these parameters suit them
SMALL = {
    "AdaptiveReweighted": {"difference": 1},
    "AsymmetricLeastSquares": {"difference": 1},
    "AsymmetricallyReweighted": {"difference": 1},
    "ExtendedScatterCorrection": {"order": 0},
    "GapDerivative": {"segment": 1, "gap": 1},
    "MaskSaturated": {"limit": 1e6},
    "PolynomialBaseline": {"order": 0},
    "SavitzkyGolay": {"window": 1, "order": 0},
    "WhittakerSmoother": {"difference": 1},
}

_TWO_CHANNELS = [
    "check_estimators_overwrite_params",
    "check_estimators_fit_returns_self",
    "check_readonly_memmap_input",
    "check_fit_idempotent",
    "check_fit_check_is_fitted",
    "check_n_features_in",
]
_COMPLETE = {"check_estimators_pickle": "learns from complete spectra only, and the check has a missing value"}

EXCEPTIONS = {
    "ExternalParameterOrthogonalisation": _COMPLETE,
    "GapDerivative": dict.fromkeys(_TWO_CHANNELS, "the check has two channels, a gap and two segments take three"),
    "GeneralisedLeastSquaresWeighting": _COMPLETE,
    "VapourOnAnyAxis": dict.fromkeys(_TWO_CHANNELS, "the check has two channels, a second difference takes three"),
}


def instances():
    return [ON_ANY_AXIS[kind]() if kind in ON_ANY_AXIS else kind(**SMALL.get(kind.__name__, {}))
            for kind in every_estimator()]  # fmt: skip


# the spectra of the checks are no shifted copies of one another
@pytest.mark.filterwarnings("ignore:Align:unmix.errors.UnmixWarning")
@parametrize_with_checks(
    instances(), expected_failed_checks=lambda estimator: EXCEPTIONS.get(type(estimator).__name__, {})
)
def test_keeps_the_contract_of_scikit_learn(estimator, check):
    check(estimator)


def test_the_walk_finds_what_is_public():
    names = {kind.__name__ for kind in every_estimator()}
    assert {*STEPS, "KnownSpectra"} <= names
    assert {kind.__name__ for kind in every_estimator() if issubclass(kind, Step)} == set(STEPS)


@pytest.mark.parametrize("kind", [k for k in every_estimator() if issubclass(k, Step)], ids=lambda k: k.__name__)
def test_every_parameter_of_a_step_says_what_it_accepts_and_is_documented(kind):
    names = list(inspect.signature(kind).parameters)
    assert set(kind.accepts) == set(names)
    text = inspect.getdoc(kind)
    listed = [line.split(" : ")[0] for line in text.splitlines() if " : " in line]
    documented = {name.strip() for line in listed for name in line.split(",")}
    assert set(names) <= documented
