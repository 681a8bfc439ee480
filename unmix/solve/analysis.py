"""Known pure spectra on plain arrays: the answer's arrays, and the loop over patterns of channel weights.

The work on one pattern stands in ``pattern``, the estimator and the labelled function in ``known``.
"""

from collections.abc import Callable, Iterator

import numpy as np

from unmix.diagnose.conditioning import dependent_groups, design_figures
from unmix.kernels import FloatArray, IntArray
from unmix.kernels.gls import CHUNK
from unmix.solve.answer import Answer, Settings
from unmix.solve.pattern import Pattern

#: called with the number of spectra finished so far
Progress = Callable[[int], None]


def analyse(
    y: FloatArray,
    weight: FloatArray,
    signal: FloatArray,
    free: FloatArray,
    settings: Settings,
    progress: Progress | None = None,
    n_baseline: int | None = None,
) -> Answer:
    """Solve every spectrum and judge its fit.

    Parameters
    ----------
    y : ndarray, shape (spectra, channels)
    weight : ndarray, shape (spectra, channels)
        One over the standard deviation of each channel, known or relative (see ``settings``); zero for channels that
        do not count, where y may hold anything.
    signal : ndarray, shape (channels, components)
        Pure spectra per unit amount.
    free : ndarray, shape (channels, baseline terms)
    settings : Settings
    progress : callable, optional
    n_baseline : int, optional
        How many of the free terms, from the first, are baseline; all by default.

    Returns
    -------
    Answer
        Each row depends on its own spectrum alone, never on the others of the batch.
    """
    n, p = y.shape
    k = signal.shape[1]
    answer = Answer.empty(n, k, p)
    signal = np.where(np.isfinite(signal), signal, 0.0)
    done = 0
    for rows, shared in patterns(weight):
        used = shared != 0
        answer.used[rows] = used
        if int(used.sum()) < k + free.shape[1]:
            done += rows.size
            continue
        scale = shared[used][:, None]
        groups = dependent_groups(design_figures(signal[used] * scale, free[used] * scale), k)
        for row in rows:
            answer.groups[row] = groups
        solver = Pattern(signal, free, shared, settings, n_baseline)
        for start in range(0, rows.size, CHUNK):
            part = rows[start : start + CHUNK]
            solver.solve(np.where(used, y[part], 0.0), part, answer)
            done += part.size
            if progress:
                progress(done)
    return answer


def patterns(weight: FloatArray) -> Iterator[tuple[IntArray, FloatArray]]:
    """Rows that share their weights, and the weights."""
    if weight.shape[0] and (weight == weight[0]).all():
        yield np.arange(weight.shape[0]), weight[0]
        return
    found: dict[bytes, list[int]] = {}
    for i, row in enumerate(weight):
        found.setdefault(row.tobytes(), []).append(i)
    for rows in found.values():
        yield np.array(rows), weight[rows[0]]
