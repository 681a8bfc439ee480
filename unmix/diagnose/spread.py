"""How large an error is at an amount, as standards that were left out have shown it."""

from typing import NamedTuple

import numpy as np

from unmix.kernels import FloatArray


class ErrorModel(NamedTuple):
    """Standard deviation of an error as a function of the amount: sqrt(absolute^2 + (relative * amount)^2).

    Attributes
    ----------
    absolute, relative : ndarray, shape (components,)
    freedom : ndarray, shape (components,)
        Degrees of freedom: standards that hold the component, less the two parameters.
    """

    absolute: FloatArray
    relative: FloatArray
    freedom: FloatArray

    def at(self, amount: FloatArray) -> FloatArray:
        """Standard uncertainty at amounts, (..., components)."""
        size: FloatArray = np.sqrt(self.absolute**2 + (self.relative * amount) ** 2)
        return size
