"""What a result means for the person who reads it, in sentences; the facts behind them are in the result."""

from collections.abc import Sequence

import numpy as np

from unmix.report.numbers import significant
from unmix.report.view import VERDICTS, Composition, Result

#: variance inflation from which a component is said to overlap, and to be hardly told apart (Marquardt 1970
#: gives 10 as the usual bound; at 100 a tenth of the signal is left to a component alone)
OVERLAPS, HARDLY_APART = 10.0, 100.0

#: an unexplained band that spans more than this part of the axis looks like a baseline
BROAD = 0.04

#: what each verdict allows
USE = {
    "supported": "use the values with their intervals",
    "doubtful": "read the reason before using a value",
    "unsupported": "do not use the values",
}


def counts(views: Sequence[Composition]) -> dict[str, int]:
    """How many samples have each verdict, the most pressing first."""
    verdicts = [verdict for view in views for verdict in view.verdicts]
    return {verdict: verdicts.count(verdict) for verdict in VERDICTS}


def lead(views: Sequence[Composition]) -> str:
    """The answer to "can I trust it" for all samples together, in one or two sentences."""
    found = counts(views)
    total = sum(len(view) for view in views)
    good, doubtful, bad = found["supported"], found["doubtful"], found["unsupported"]
    if total == 1:
        verdict = next(view.verdicts[0] for view in views)
        return f"This answer is {verdict}: {USE.get(verdict, 'read the reason')}."
    if good == total:
        return f"All {total} answers are supported: use the values with their intervals."
    parts = [f"{good} of {total} answers {_are(good)} supported and can be used with the intervals given."]
    if doubtful:
        parts.append(f"{doubtful} {_are(doubtful)} doubtful: look at the reason first.")
    if bad:
        parts.append(f"{bad} {_are(bad)} unsupported: the numbers would mislead.")
    return " ".join(parts)


def _are(number: int) -> str:
    return "is" if number == 1 else "are"


def advice(view: Composition, sample: int) -> str:
    """What to do next about one sample."""
    if view.verdicts[sample] == "supported":
        return "Use the values with their intervals."
    if view.per_sample("channels_saturated")[sample] > 0:
        return "Measure again with a shorter path or diluted."
    limit = view.per_sample("misfit_limit")[sample]
    bands = [band for band in view.unexplained(sample) if not abs(band["score"]) < limit]
    if view.verdicts[sample] == "unsupported" and confused_pairs(view):
        return "Measure a wider range, or choose regions in which the components differ."
    if not bands:
        return "Act on the reason given, then measure or run again."
    where = f"{bands[0]['position']:.4g} {view.axis_unit}"
    if bands[0]["width"] > BROAD * np.ptp(view.axis):
        return f"The misfit near {where} is broad: try a baseline of higher order, then run again."
    if bands[0]["score"] < 0:
        return f"Check the pure spectra at {where}: the fit has a band there that the sample lacks."
    return f"Find out what absorbs at {where}, add its pure spectrum and run again."


def confused_pairs(view: Result) -> list[tuple[str, str]]:
    """Components that are hardly told apart from another one, each pair once, the worst first."""
    inflation = view.per_component("variance_inflation")
    other = view.confused_with()
    pairs: list[tuple[str, str]] = []
    for j in np.argsort(-np.nan_to_num(inflation, nan=np.inf)):
        pair = (view.components[j], other[j])
        if other[j] and not inflation[j] < HARDLY_APART and pair[::-1] not in pairs:
            pairs.append(pair)
    return pairs


def apartness(inflation: float) -> str:
    """How well a component can be told apart, in words."""
    if not np.isfinite(inflation) or inflation >= HARDLY_APART:
        return "hardly told apart"
    return "overlaps" if inflation >= OVERLAPS else "well apart"


def curve_summary(view: Composition, sample: int) -> str:
    """What the figure of one sample shows, for those who cannot see it."""
    axis = view.axis
    noise = view.per_sample("noise_level")[sample]
    bands = view.unexplained(sample)
    parts = [
        f"Measured and fitted spectrum from {axis.min():.6g} to {axis.max():.6g} "
        f"{view.axis_unit}, the residual below them, and the contribution of each of "
        f"{len(view.components)} components."
    ]
    if np.isfinite(noise):
        parts.append(f"The standard deviation of the residual is {significant(noise, 2)}.")
    if bands:
        where = ", ".join(f"{band['position']:.4g}" for band in bands[:3])
        parts.append(f"Not explained: {where} {view.axis_unit}.")
    return " ".join(parts)
