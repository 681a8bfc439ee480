"""One module a question: the estimator first, below it the public function.

Estimators are loaded on first use, so that a function that needs none of them does not wait for scikit-learn.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from unmix.solve.estimator import KnownSpectra
    from unmix.solve.latent import PLSCalibration
    from unmix.solve.library import LibrarySearch

#: estimator -> the module that holds it
_HOMES = {"KnownSpectra": "unmix.solve.estimator", "LibrarySearch": "unmix.solve.library",
          "PLSCalibration": "unmix.solve.latent"}  # fmt: skip

__all__ = ["KnownSpectra", "LibrarySearch", "PLSCalibration"]


def __getattr__(name: str) -> Any:
    home = _HOMES.get(name)
    if home is None:
        raise AttributeError(f"module 'unmix.solve' has no attribute '{name}'; it has {', '.join(__all__)}")
    return getattr(import_module(home), name)


def __dir__() -> list[str]:
    return list(__all__)
