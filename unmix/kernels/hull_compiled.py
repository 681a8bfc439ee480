"""Lower convex hulls of many spectra, compiled; loaded only by ``hull``, whose code it compiles."""

# mypy: disable-error-code="no-untyped-def, no-untyped-call, untyped-decorator"
# numba has no types, and compiles from the values that arrive

import numba
import numpy as np

from unmix.kernels import hull

_band_below = numba.njit(cache=True, error_model="numpy")(hull.band_below)


@numba.njit(cache=True, parallel=True)
def bands_below(x, y):
    """Hulls of all rows; see ``hull.bands_below``."""
    below = np.empty_like(y)
    chunks = min(y.shape[0], 64)
    for chunk in numba.prange(chunks):
        corner = np.empty(x.size, dtype=np.int64)
        for row in range(chunk * y.shape[0] // chunks, (chunk + 1) * y.shape[0] // chunks):
            _band_below(x, y[row], corner, below[row])
    return below
