"""Supported, doubtful, unsupported: the rules, and the sentences that give the reason.

Sentences speak to a chemist, name the component and the place, and hold the numbers they rest on.
"""

from dataclasses import dataclass, field

import numpy as np

from unmix.diagnose.constraints import Check, broken
from unmix.kernels import FloatArray

#: the three verdicts, from good to bad
VERDICTS = ("supported", "doubtful", "unsupported")

#: half-width of an interval, as a share of the signal of the components confused with each other
_DOUBTFUL_SHARE = 0.10
_UNSUPPORTED_SHARE = 0.25

#: condition index at which an error of one part in a hundred in a pure spectrum, which nobody can exclude, is enough
#: to exchange the components (100 also is where Belsley, Kuh and Welsch see numbers in trouble)
_EXCHANGEABLE = 100.0

#: growth of the residual from low to high absorbance that noise alone does not reach
GROWING = 2.5

#: a group of components is there when its common signal is this many times its noise
_PRESENT = 5.0

#: standard uncertainties below zero at which a negative amount says that the model is wrong
NEGATIVE_LIMIT = 4.0

#: lack of fit, as a share of the spectrum, from which an unexplained band makes every amount doubtful beyond use
_UNEXPLAINED = 0.25

#: noise is correlated over at most this part of the channels, or over this many
_SLOW = 15.0
_SLOWEST = 14.0

#: where the air absorbs, cm-1, up to which width that looks like it, and how many such bands it takes (from memory,
#: after HITRAN: CO2 at 2349 and 667 as unresolved bands, water vapour as groups of narrow lines)
_AIR = (
    (2280.0, 2390.0, 120.0, 1, "Carbon dioxide"),
    (660.0, 675.0, 20.0, 1, "Carbon dioxide"),
    (1300.0, 2000.0, 14.0, 3, "Water vapour"),
    (3500.0, 3950.0, 14.0, 3, "Water vapour"),
)

#: so many times its limit, the test of a constraint says that the answer misleads
_BROKEN = 3.0

#: bands named in a reason; the rest are counted
_NAMED_BANDS = 3


@dataclass(frozen=True)
class Words:
    """The names and units that sentences need."""

    components: list[str]
    amount_unit: str
    axis_unit: str

    def amount(self, value: float) -> str:
        """An amount with its unit, three significant digits."""
        number = plain_number(value, 3)
        return f"{number} {self.amount_unit}".strip() if self.amount_unit != "1" else number


@dataclass(frozen=True)
class Band:
    """One band that the model does not explain, in units of the axis; ``height`` is signed."""

    position: float
    width: float
    height: float
    score: float
    shift: FloatArray


@dataclass
class Evidence:
    """What is known about one sample's answer, in units of amount.

    ``groups`` holds the dependences of its design: condition index, components, whether a baseline term takes
    part. Shares compare signals: an amount times the length of its pure spectrum.
    """

    concentration: FloatArray
    lower: FloatArray
    upper: FloatArray
    detected: FloatArray
    signal_length: FloatArray
    n_terms: int
    channels_used: int
    channels_missing: int = 0
    channels_saturated: int = 0
    plateau: float = float("nan")
    stray: float = 0.0
    growth: float = 1.0
    excess: float = float("nan")
    unbounded: FloatArray = field(default_factory=lambda: np.zeros(0))
    correlation_length: float = 1.0
    blank: bool = False
    suggestion: str = ""
    lack_of_fit: float = 0.0
    spikes: int = 0
    negative_share: float = 0.0
    freedom: float = float("inf")
    noise_level: float = float("nan")
    noise_given: float | None = None
    misfit_z: float = 0.0
    misfit_limit: float = float("nan")
    bands: list[Band] = field(default_factory=list)
    harm: FloatArray = field(default_factory=lambda: np.zeros(0))
    negative: FloatArray = field(default_factory=lambda: np.zeros(0))
    groups: list[tuple[float, list[int]]] = field(default_factory=list)
    checks: list[Check] = field(default_factory=list)
    axis: dict[str, tuple[FloatArray, FloatArray, bool]] | None = None
    like_shift: float = float("nan")


def judge(evidence: Evidence, words: Words) -> tuple[str, str]:
    """Verdict and reason for one sample.

    Parameters
    ----------
    evidence : Evidence
    words : Words

    Returns
    -------
    verdict : {'supported', 'doubtful', 'unsupported'}
    reason : str
        One sentence a finding, the gravest first; for a supported sample what speaks for it.
    """
    if evidence.channels_used < evidence.n_terms:
        return VERDICTS[2], (
            f"Only {evidence.channels_used} channels can be used for {evidence.n_terms} unknowns "
            f"({_left_out(evidence)}); no amount can be given."
        )
    findings = [
        *_confusion(evidence, words),
        *_saturation(evidence),
        *_misfit(evidence, words),
        *_negative(evidence, words),
        *[(2 if abs(check.score) > _BROKEN * check.limit else 1, text)
          for check, text in broken(evidence.checks, words.amount)],
        *_noise(evidence),
    ]
    findings += _axis(evidence, words)
    if all(grade == 0 for grade, _ in findings):
        return VERDICTS[0], " ".join([_good(evidence), *(text for _, text in findings)])
    findings.sort(key=lambda finding: -finding[0])
    return VERDICTS[findings[0][0]], " ".join(text for _, text in findings)


def _left_out(evidence: Evidence) -> str:
    parts = []
    if evidence.channels_saturated:
        parts.append(f"{evidence.channels_saturated} are saturated")
    if evidence.channels_missing:
        parts.append(f"{evidence.channels_missing} have no value")
    return ", ".join(parts) or "the others were left out"


def _confusion(evidence: Evidence, words: Words) -> list[tuple[int, str]]:
    found = []
    for index, members in evidence.groups:
        size = evidence.concentration[members] * evidence.signal_length[members]
        half = 0.5 * (evidence.upper - evidence.lower)[members] * evidence.signal_length[members]
        who, tail = _who([words.components[j] for j in members]), _tail(index)
        if np.isnan(half).any():
            found.append((2, f"{who} cannot be told apart in these channels ({tail})."))
            continue
        total = float(size.sum())
        noise = evidence.noise_level if np.isfinite(evidence.noise_level) else evidence.noise_given or 0.0
        if np.isfinite(half).all() and total < _PRESENT * noise:
            continue
        share = float(np.max(half)) / total if total > 0 else float("inf")
        worst = words.components[members[int(np.argmax(half))]]
        # what was given about the amounts may tell apart what the spectra do not; the intervals know
        if index >= _EXCHANGEABLE and not evidence.checks:
            found.append((2, f"{who} cannot be told apart in these channels ({tail}){_exchange(index)}."))
        elif share > _DOUBTFUL_SHARE:
            hardly, grade = ("can hardly", 1) if share <= _UNSUPPORTED_SHARE else ("cannot", 2)
            detail = f"the interval of {worst} reaches {share:.0%} of their common signal up and down"
            found.append((grade, f"{who} {hardly} be told apart in these channels ({tail}): {detail}."))
    return found


def _saturation(evidence: Evidence) -> list[tuple[int, str]]:
    n = evidence.channels_saturated
    if n == 0:
        if evidence.stray > 0:
            return [(1, f"Stray light, {100 * evidence.stray:.2g}% of the light, bends the strong bands; it was fitted "
                        "and taken off.")]  # fmt: skip
        if evidence.growth > GROWING and not evidence.blank:
            return [(1, f"The residual is {evidence.growth:.2g} times larger where the sample absorbs strongly: the "
                        "straight line between amount and absorbance has an end there.")]  # fmt: skip
        return []
    total = n + evidence.channels_used
    where = f"flat near {evidence.plateau:.2g} absorbance" if np.isfinite(evidence.plateau) else "no light gets through"
    if n > evidence.channels_used:
        return [(2, f"Most channels, {n} of {total}, are saturated ({where}); measure with a shorter path.")]
    return [(1, f"{n} of {total} channels are saturated ({where}) and were left out; the rest carries the answer.")]


def _misfit(evidence: Evidence, words: Words) -> list[tuple[int, str]]:
    found = []
    for band in evidence.bands[:_NAMED_BANDS]:
        harmed = int(np.argmax(np.abs(band.shift))) if band.shift.size else -1
        harm = (f"; it could move {words.components[harmed]} by up to {words.amount(abs(float(band.shift[harmed])))}"
                if harmed >= 0 else "")  # fmt: skip
        unit = words.axis_unit
        place = (f"{plain_number(band.position, 5)} {unit}, about {plain_number(band.width, 2)} {unit} "
                 "wide,")
        if band.height > 0:
            text = f"A band at {place} is not explained (z = {band.score:.0f}){harm}.{_air(band, evidence.bands, unit)}"
        else:
            text = f"The fit puts in a band at {place} that the sample does not have (z = {band.score:.0f}){harm}."
        found.append((1, text))
    rest = len(evidence.bands) - _NAMED_BANDS
    if rest > 0:
        found.append((1, f"{rest} further bands are not explained."))
    if found and evidence.suggestion:
        found.append((0, f"Of the library, {evidence.suggestion} would explain most of it: a lead, not a proof."))
    if found and evidence.lack_of_fit > _UNEXPLAINED:
        found.append((2, f"The fit leaves {100 * evidence.lack_of_fit:.0f}% of the spectrum unexplained."))
    if found and evidence.harm.size:
        bad = [j for j in np.flatnonzero(evidence.detected) if evidence.harm[j] >= evidence.concentration[j]]
        if bad:
            names = ", ".join(words.components[j] for j in bad)
            found.append((2, f"What is not explained is as large as the amount of {names}."))
    return found


def _axis(evidence: Evidence, words: Words) -> list[tuple[int, str]]:
    """What was found of the axis, what could not be, and a hint where nobody asked."""
    if evidence.axis is None:
        if np.isfinite(evidence.like_shift):
            size = plain_number(abs(evidence.like_shift), 2)
            return [(0, f"The residual looks like a shift of the axis by {size} {words.axis_unit}: fit the axis.")]
        return []
    found = []
    for name, (values, spread, at_bound) in evidence.axis.items():
        unit = "" if name == "stretch" else f" {words.axis_unit}"
        known = np.isfinite(values)
        if not known.any():
            grade = int(bool(evidence.detected.any()))
            found.append((grade, f"The {name} of the axis cannot be told from this spectrum and was left at zero."))
        elif at_bound:
            found.append((1, f"The {name} of the axis is at its bound ({_each(values)}{unit}): allow more of it, or "
                             "doubt that it is one."))  # fmt: skip
        else:
            found.append((0, f"The {name} of the axis was found as {_each(values)}{unit} (standard uncertainty "
                             f"{_each(spread)}{unit})."))  # fmt: skip
    return found


def _each(values: FloatArray) -> str:
    """One number for all, or the range of several."""
    known = values[np.isfinite(values)]
    low, high = plain_number(float(known.min()), 2), plain_number(float(known.max()), 2)
    return low if low == high else f"{low} to {high}"


def _air(band: Band, bands: list[Band], unit: str) -> str:
    """A remark when an unexplained band lies where the air absorbs; a lone narrow band is not taken for vapour."""
    if unit != "cm-1":
        return ""
    for low, high, widest, fewest, what in _AIR:
        alike = [one for one in bands if low <= one.position <= high and one.width <= widest]
        if any(one is band for one in alike) and len(alike) >= fewest:
            return f" {what} of the air absorbs there too."
    return ""


def _negative(evidence: Evidence, words: Words) -> list[tuple[int, str]]:
    found = []
    if evidence.negative_share > 0.5:
        found.append((1, "Most of the spectrum is below zero, which no sample can be: look at the reference "
                         "measurement and at the unit."))  # fmt: skip
    strongest = float(np.max(evidence.concentration * evidence.signal_length, initial=0.0))
    for j in np.flatnonzero(evidence.negative < -NEGATIVE_LIMIT):
        below = -float(evidence.unbounded[j] * evidence.signal_length[j]) if evidence.unbounded.size else 0.0
        found.append((
            2 if below > 0.5 * strongest else 1,
            f"The best fit would need less than none of {words.components[j]} ({-evidence.negative[j]:.1f} standard "
            "uncertainties below zero): a pure spectrum or the list is wrong.",
        ))  # fmt: skip
    return found


def _noise(evidence: Evidence) -> list[tuple[int, str]]:
    if evidence.blank and not evidence.detected.any():
        return [(1, "The spectrum is a straight line to the last digit, so nothing was measured and the noise is not "
                    "known.")]  # fmt: skip
    slow = evidence.channels_used / _SLOW
    if evidence.correlation_length > max(slow, _SLOWEST) and not evidence.blank:
        return [(1, f"The residual changes so slowly (over {evidence.correlation_length:.0f} of "
                    f"{evidence.channels_used} channels) that it can hardly be noise.")]  # fmt: skip
    if evidence.excess > 1.0:
        return [(1, f"The residual is {evidence.excess:.1f} times as large as that of a standard is expected to be.")]
    if evidence.freedom <= 0 and evidence.noise_given is None:
        return [(1, f"{evidence.channels_used} channels for {evidence.n_terms} unknowns leave nothing to judge the "
                    "noise by, so there is no interval; give the noise level.")]  # fmt: skip
    if evidence.noise_given is not None and np.isfinite(evidence.noise_level):
        ratio = evidence.noise_level / evidence.noise_given
        effective = evidence.freedom / max(evidence.correlation_length, 1.0)
        if ratio > 1.0 + 4.0 / np.sqrt(2.0 * max(effective, 1.0)):
            return [(1, f"The residual is {ratio:.1f} times the noise that was given.")]
    return []


def _good(evidence: Evidence) -> str:
    spikes = "" if not evidence.spikes else f" {evidence.spikes} isolated spikes were left out."
    return _fits(evidence) + spikes


def _fits(evidence: Evidence) -> str:
    if np.isfinite(evidence.excess):
        return (f"The residual is like that of a standard ({evidence.excess:.2g} of its limit), and no band is "
                f"unexplained (|z| {abs(evidence.misfit_z):.1f}, limit {evidence.misfit_limit:.1f}).")  # fmt: skip
    noise = f"The fit leaves {evidence.noise_level:.2g} absorbance" if np.isfinite(evidence.noise_level) else ""
    if not noise:
        return "The amounts follow from the noise that was given; no channel is left to test the fit."
    if np.isnan(evidence.misfit_limit):
        return f"{noise}; too few channels are left to test for a missing component."
    return (f"{noise}, which is noise: no band is unexplained (largest |z| {abs(evidence.misfit_z):.1f}, "
            f"limit {evidence.misfit_limit:.1f}).")  # fmt: skip


def judge_design(
    groups: list[tuple[float, list[int]]], largest: float, names: list[str], limit: float
) -> tuple[str, str]:
    """Verdict and reason for pure spectra before any sample is measured.

    Parameters
    ----------
    groups : list of (condition index, members)
        Strong dependences.
    largest : float
        Largest condition index.
    names : list of str
        Of the components.
    limit : float
        Condition index from which a dependence is strong.
    """
    if not groups:
        return VERDICTS[0], f"The components can be told apart (condition index {largest:.3g}, limit {limit:g})."
    found = []
    for index, members in groups:
        who = _who([names[j] for j in members])
        if index >= _EXCHANGEABLE:
            found.append((2, f"{who} cannot be told apart in these channels ({_tail(index)}){_exchange(index)}."))
        else:
            found.append((1, f"{who} can hardly be told apart in these channels ({_tail(index)})."))
    return VERDICTS[max(grade for grade, _ in found)], " ".join(text for _, text in found)


def _who(names: list[str]) -> str:
    if len(names) == 1:
        return f"{names[0]} and the baseline"
    return f"{', '.join(names[:-1])} and {names[-1]}"


def _tail(index: float) -> str:
    return f"condition index {index:.3g}" if index < 1e10 else "their spectra are the same up to a factor"


def _exchange(index: float) -> str:
    if index >= 1e10:
        return ""
    return f": an error of {plain_number(100 / index, 1)}% in a pure spectrum would be enough to exchange them"


def plain_number(value: float, digits: int) -> str:
    """A number with so many significant digits, without an exponent unless it is far from one."""
    if value != 0 and np.isfinite(value) and 1e-5 <= abs(value) < 1e7:
        return np.format_float_positional(value, precision=digits, fractional=False, trim="-")
    return f"{value:.{digits}g}"
