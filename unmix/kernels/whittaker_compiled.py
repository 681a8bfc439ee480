"""Penalised smoothing of many spectra side by side, compiled; loaded only by ``whittaker``.

Spectra lie in the fastest axis of every work array, so that one instruction serves several of them. Instead of
eliminating in W + penalty D'D the kernel carries, from channel to channel, what the channels so far say about the
curve and its first d - 1 divided differences there: an information matrix and vector (Kalman's recursion, in the
information form). It costs as much as the pentadiagonal LDL' and keeps 13 or more digits at every penalty, where
LDL' loses one for every tenfold penalty (2e-8 at 1e8).

    y, w, z (m, L) spectra, weights, curves   gaps (d, m - 1)   weight (m - 1,) penalty of each step
    state (9, L)   information: upper triangle by rows, then the vector
    gain (d + 1, m, L)   what the way back needs: z_last = gain0 z_last' + gain_d - sum gain_k z_k
    L spectra side by side   d order of the difference   m channels
"""

# mypy: disable-error-code="no-untyped-def, no-untyped-call, untyped-decorator"
# numba has no types, and compiles from the values that arrive

import numba
import numpy as np

#: spectra side by side; 32 was the fastest of 8, 16, 32 and 64 on machines with 256 and 512 bit registers
LANES = 32

_MATH = {"contract"}


@numba.njit(cache=True, fastmath=_MATH, error_model="numpy")
def _forward1(y, w, weight, state, gain):
    for i in range(y.shape[0] - 1):
        lam = weight[i]
        for j in range(LANES):
            c = state[0, j] + w[i, j]
            r = state[1, j] + w[i, j] * y[i, j]
            g = 1.0 / (lam + c)
            gain[0, i, j] = lam * g
            gain[1, i, j] = r * g
            state[0, j] = lam * c * g
            state[1, j] = lam * r * g


@numba.njit(cache=True, fastmath=_MATH, error_model="numpy")
def _forward2(y, w, gaps, weight, state, gain):
    for i in range(y.shape[0] - 1):
        lam, h = weight[i], gaps[0, i]
        for j in range(LANES):
            a = state[0, j] + w[i, j]
            r = state[3, j] + w[i, j] * y[i, j]
            b = state[1, j] - h * a
            c = state[2, j] - h * (state[1, j] + b)
            s = state[4, j] - h * r
            g = 1.0 / (lam + c)
            lg, bg, sg = lam * g, b * g, s * g
            gain[0, i, j] = lg
            gain[1, i, j] = bg
            gain[2, i, j] = sg
            state[0, j] = a - b * bg
            state[1, j] = b * lg
            state[2, j] = c * lg
            state[3, j] = r - b * sg
            state[4, j] = s * lg


@numba.njit(cache=True, fastmath=_MATH, error_model="numpy")
def _forward3(y, w, gaps, weight, state, gain):
    for i in range(y.shape[0] - 1):
        lam, h, k = weight[i], gaps[0, i], gaps[1, i]
        for j in range(LANES):
            p11 = state[0, j] + w[i, j]
            q1 = state[6, j] + w[i, j] * y[i, j]
            p12 = state[1, j] - h * p11
            p22 = state[3, j] - h * (state[1, j] + p12)
            p23 = state[4, j] - h * state[2, j]
            q2 = state[7, j] - h * q1
            p13 = state[2, j] - k * p12
            old = p23
            p23 = old - k * p22
            p33 = state[5, j] - k * (old + p23)
            q3 = state[8, j] - k * q2
            g = 1.0 / (lam + p33)
            lg, g1, g2, gq = lam * g, p13 * g, p23 * g, q3 * g
            gain[0, i, j] = lg
            gain[1, i, j] = g1
            gain[2, i, j] = g2
            gain[3, i, j] = gq
            state[0, j] = p11 - p13 * g1
            state[1, j] = p12 - p13 * g2
            state[2, j] = p13 * lg
            state[3, j] = p22 - p23 * g2
            state[4, j] = p23 * lg
            state[5, j] = p33 * lg
            state[6, j] = q1 - p13 * gq
            state[7, j] = q2 - p23 * gq
            state[8, j] = q3 * lg


@numba.njit(cache=True, fastmath=_MATH, error_model="numpy")
def _backward(z, gaps, state, gain):
    """From the last value back; rows 0 and 1 of ``state`` carry the first and second divided difference."""
    order = gaps.shape[0]
    for i in range(z.shape[0] - 2, -1, -1):
        if order == 1:
            for j in range(LANES):
                z[i, j] = gain[0, i, j] * z[i + 1, j] + gain[1, i, j]
        elif order == 2:
            h = gaps[0, i]
            for j in range(LANES):
                slope = gain[0, i, j] * state[0, j] + gain[2, i, j] - gain[1, i, j] * z[i + 1, j]
                state[0, j] = slope
                z[i, j] = z[i + 1, j] - h * slope
        else:
            h, k = gaps[0, i], gaps[1, i]
            for j in range(LANES):
                bend = (
                    gain[0, i, j] * state[1, j]
                    + gain[3, i, j]
                    - gain[1, i, j] * z[i + 1, j]
                    - gain[2, i, j] * state[0, j]
                )
                slope = state[0, j] - k * bend
                state[0, j] = slope
                state[1, j] = bend
                z[i, j] = z[i + 1, j] - h * slope


@numba.njit(cache=True, fastmath=_MATH, error_model="numpy")
def _solve(y, w, z, gaps, weight, state, gain):
    order, last = gaps.shape[0], y.shape[0] - 1
    state[:] = 0.0
    if order == 1:
        _forward1(y, w, weight, state, gain)
    elif order == 2:
        _forward2(y, w, gaps, weight, state, gain)
    else:
        _forward3(y, w, gaps, weight, state, gain)
    first = order * (order + 1) // 2
    for j in range(LANES):
        z[last, j] = (state[first, j] + w[last, j] * y[last, j]) / (state[0, j] + w[last, j])
        state[0, j] = 0.0
        state[1, j] = 0.0
    _backward(z, gaps, state, gain)


@numba.njit(cache=True, fastmath=_MATH, error_model="numpy")
def _asymmetric(y, z, v, w, setting, tolerance, done, sums):
    sums[0] = 0.0
    for i in range(y.shape[0]):
        for j in range(LANES):
            new = v[i, j] * (setting if y[i, j] > z[i, j] else 1.0 - setting)
            sums[0, j] += 1.0 if new != w[i, j] else 0.0
            w[i, j] = new
    for j in range(LANES):
        done[j] = sums[0, j] <= tolerance * y.shape[0]


@numba.njit(cache=True, fastmath=_MATH, error_model="numpy")
def _adaptive(y, z, v, w, step, tolerance, order, done, sums):
    sums[:3] = 0.0
    for i in range(y.shape[0]):
        for j in range(LANES):
            seen = 1.0 if v[i, j] > 0.0 else 0.0
            depth = seen * max(z[i, j] - y[i, j], 0.0)
            sums[0, j] += depth
            sums[1, j] += seen * abs(y[i, j])
            sums[2, j] += 1.0 if depth > 0.0 else 0.0
    for j in range(LANES):
        done[j] = sums[0, j] <= tolerance * sums[1, j] or sums[2, j] <= order
    for i in range(y.shape[0]):
        for j in range(LANES):
            depth = z[i, j] - y[i, j]
            w[i, j] = v[i, j] * np.exp(step * depth / sums[0, j]) if depth > 0.0 else 0.0


@numba.njit(cache=True, fastmath=_MATH, error_model="numpy")
def _logistic(y, z, v, w, tolerance, done, sums):
    sums[:] = 0.0
    for i in range(y.shape[0]):
        for j in range(LANES):
            r = y[i, j] - z[i, j]
            below = 1.0 if r < 0.0 and v[i, j] > 0.0 else 0.0
            sums[0, j] += below
            sums[1, j] += below * r
    for j in range(LANES):
        sums[1, j] /= max(sums[0, j], 1.0)
    for i in range(y.shape[0]):
        for j in range(LANES):
            r = y[i, j] - z[i, j]
            below = 1.0 if r < 0.0 and v[i, j] > 0.0 else 0.0
            sums[2, j] += below * (r - sums[1, j]) ** 2
    for j in range(LANES):
        sums[2, j] = np.sqrt(sums[2, j] / max(sums[0, j] - 1.0, 1.0))
    for i in range(y.shape[0]):
        for j in range(LANES):
            spread = sums[2, j]
            r = y[i, j] - z[i, j]
            new = v[i, j] / (1.0 + np.exp(2.0 * (r - (2.0 * spread - sums[1, j])) / spread))
            if v[i, j] > 0.0:
                sums[3, j] += ((new - w[i, j]) / v[i, j]) ** 2
                sums[4, j] += (w[i, j] / v[i, j]) ** 2
            w[i, j] = new
    for j in range(LANES):
        settled = sums[3, j] <= tolerance**2 * sums[4, j]
        done[j] = settled or sums[0, j] < 2.0 or sums[2, j] <= 0.0


@numba.njit(cache=True, fastmath=_MATH, error_model="numpy")
def _renew(rule, y, z, v, w, step, setting, tolerance, order, done, sums):
    if rule == 0:
        done[:] = True
    elif rule == 1:
        _asymmetric(y, z, v, w, setting, tolerance, done, sums)
    elif rule == 2:
        _adaptive(y, z, v, w, step, tolerance, order, done, sums)
    else:
        _logistic(y, z, v, w, tolerance, done, sums)


@numba.njit(cache=True, error_model="numpy")
def _load(part, weights, y, v, w, sums):
    """Turn a block of spectra into lanes; the first row of ``sums`` counts the weighted channels of each."""
    used, m = part.shape
    sums[0] = 0.0
    for i in range(m):
        for j in range(LANES):
            value = part[j, i] if j < used else 0.0
            known = value == value  # noqa: PLR0124  not so for NaN
            y[i, j] = value if known else 0.0
            v[i, j] = weights[i] if known else 0.0
            w[i, j] = v[i, j]
            sums[0, j] += 1.0 if v[i, j] > 0.0 else 0.0


@numba.njit(cache=True, parallel=True, fastmath=_MATH, error_model="numpy")
def reweighted(spectra, weights, gaps, weight, rule, setting, iterations, tolerance):
    """Penalised baselines of many spectra.

    Parameters
    ----------
    spectra : ndarray of float64, shape (n, m)
        NaN marks a missing channel.
    weights : ndarray of float64, shape (m,)
        At or above zero.
    gaps : ndarray, shape (d, m - 1)
        Distances t_(i+k) - t_i, k = 1 .. d.
    weight : ndarray, shape (m - 1,)
        Penalty of the change of the (d-1)-th divided difference at each step, zero for the last d - 1.
    rule : int
        Position in ``reweight.RULES``.
    setting, tolerance : float
        As ``reweight`` describes.
    iterations : int
        Solutions at most.

    Returns
    -------
    curves : ndarray, shape (n, m)
        NaN for a spectrum with d weighted channels or fewer.
    count : ndarray of int, shape (n,)
    settled : ndarray of bool, shape (n,)
    """
    n, m = spectra.shape
    order = gaps.shape[0]
    curves = np.empty_like(spectra)
    count = np.zeros(n, dtype=np.int64)
    settled = np.zeros(n, dtype=np.bool_)
    blocks = (n + LANES - 1) // LANES
    # work arrays are allocated once a chunk, not once a block
    chunks = min(blocks, 64)
    for chunk in numba.prange(chunks):
        y, v, w = np.zeros((m, LANES)), np.ones((m, LANES)), np.empty((m, LANES))
        z, gain = np.empty((m, LANES)), np.empty((order + 1, m, LANES))
        state, sums = np.empty((9, LANES)), np.empty((5, LANES))
        done = np.empty(LANES, dtype=np.bool_)
        for block in range(chunk * blocks // chunks, (chunk + 1) * blocks // chunks):
            low = block * LANES
            used = min(LANES, n - low)
            _load(spectra[low : low + used], weights, y, v, w, sums)
            open_lanes = 0
            for j in range(used):
                if sums[0, j] > order:
                    open_lanes += 1
                    count[low + j] = -1
                else:
                    curves[low + j] = np.nan
            for step in range(1, iterations + 1):
                if open_lanes == 0:
                    break
                _solve(y, w, z, gaps, weight, state, gain)
                _renew(rule, y, z, v, w, step, setting, tolerance, order, done, sums)
                for j in range(used):
                    if count[low + j] < 0 and (done[j] or step == iterations):
                        settled[low + j] = done[j]
                        count[low + j] = step
                        for i in range(m):
                            curves[low + j, i] = z[i, j]
                        open_lanes -= 1
    return curves, count, settled
