"""Plain-array kernels: everything heavy happens here, and nothing labelled.

A kernel takes and returns ndarrays and a status; it knows nothing of labels, files, logging or policy.
Spectra come first, channels last. Kernels import numpy, scipy and numba alone.
"""

from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray

FloatArray: TypeAlias = NDArray[np.floating[Any]]
IntArray: TypeAlias = NDArray[np.integer[Any]]
BoolArray: TypeAlias = NDArray[np.bool_]
