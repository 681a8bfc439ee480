"""unmix: what is in a mixture, how much of each, and how sure, from its optical spectra.

The door: every public name is loaded from its module on first use, so that ``import unmix`` stays light.
"""

import sys
from importlib import import_module
from importlib.metadata import PackageNotFoundError, version
from types import ModuleType
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from unmix.archive import load, save
    from unmix.read import read, write
    from unmix.report.page import report
    from unmix.solve.addition import standard_addition
    from unmix.solve.calibration import calibrate
    from unmix.solve.design import conditioning
    from unmix.solve.identify import identify
    from unmix.solve.interpretation import interpret, select_samples
    from unmix.solve.joint import joint_region
    from unmix.solve.known import quantify
    from unmix.solve.prediction import predict
    from unmix.solve.standards import learn_pure
    from unmix.solve.transfer import transfer
    from unmix.solve.upkeep import adjust, check_calibration, compare_calibrations, drift

#: public name -> the module that holds it
_HOMES = {
    "read": "unmix.read",
    "write": "unmix.read",
    "quantify": "unmix.solve.known",
    "conditioning": "unmix.solve.design",
    "learn_pure": "unmix.solve.standards",
    "joint_region": "unmix.solve.joint",
    "standard_addition": "unmix.solve.addition",
    "identify": "unmix.solve.identify",
    "interpret": "unmix.solve.interpretation",
    "select_samples": "unmix.solve.interpretation",
    "transfer": "unmix.solve.transfer",
    "adjust": "unmix.solve.upkeep",
    "check_calibration": "unmix.solve.upkeep",
    "compare_calibrations": "unmix.solve.upkeep",
    "drift": "unmix.solve.upkeep",
    "calibrate": "unmix.solve.calibration",
    "predict": "unmix.solve.prediction",
    "save": "unmix.archive",
    "load": "unmix.archive",
    "report": "unmix.report.page",
}

try:
    __version__ = version("unmix")
except PackageNotFoundError:  # a source tree that was never installed
    __version__ = "0+unknown"

__all__ = [
    "adjust",
    "calibrate",
    "check_calibration",
    "compare_calibrations",
    "conditioning",
    "drift",
    "identify",
    "interpret",
    "joint_region",
    "learn_pure",
    "load",
    "predict",
    "quantify",
    "read",
    "report",
    "save",
    "select_samples",
    "standard_addition",
    "transfer",
    "write",
]


def __getattr__(name: str) -> Any:
    home = _HOMES.get(name)
    if home is None:
        raise AttributeError(f"module 'unmix' has no attribute '{name}'; it has {', '.join(__all__)}")
    return getattr(import_module(home), name)


def __dir__() -> list[str]:
    return [*__all__, "__version__"]


class _Door(ModuleType):
    """Keeps ``unmix.read`` and ``unmix.report`` the functions when the packages of the same name are imported."""

    def __setattr__(self, name: str, value: Any) -> None:
        # Python binds an imported package to its parent; the public function of that name would be lost
        if not (name in _HOMES and isinstance(value, ModuleType)):
            super().__setattr__(name, value)


sys.modules[__name__].__class__ = _Door
