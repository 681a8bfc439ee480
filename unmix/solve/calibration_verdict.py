"""Whether a calibration may be used: what the loops found, and the rules that make a verdict of it."""

from dataclasses import dataclass, field

import numpy as np

from unmix.diagnose.calibration import Figures, samples_wanted, thin_range
from unmix.kernels import FloatArray, IntArray
from unmix.solve.folds import Plan
from unmix.solve.latent_model import LatentModel, LeftOut
from unmix.solve.validation import Choice

#: p value below which a bias or a slope counts as proven
_PROVEN = 0.01

#: p value of the permutation test above which nothing was shown
_CHANCE = 0.05


@dataclass
class Evidence:
    """What the loops found.

    ``outer`` holds the predictions of the nested loop and ``outer_components`` what it chose; ``test`` one
    :class:`Figures` a property, when there was a test set; ``remarks`` what a person should be told.
    """

    plan: Plan
    choice: Choice
    outer: FloatArray
    outer_components: IntArray
    permutation_p: float
    permutations: int
    model: LatentModel
    left: LeftOut
    test: list[Figures] | None = None
    remarks: list[str] = field(default_factory=list)


def judge(
    values: FloatArray, rows: FloatArray, sets: dict[str, list[Figures]], evidence: Evidence, names: list[str]
) -> tuple[str, str]:
    """Verdict and reason of a calibration.

    Parameters
    ----------
    values : ndarray, shape (samples, properties)
    rows : ndarray, shape (samples, channels)
        Prepared spectra.
    sets : dict of list of Figures
        One a property, of the sets of samples.
    evidence : Evidence
        What should be known but changes no verdict is added to its ``remarks``.
    names : list of str
        Properties.

    Returns
    -------
    verdict, reason : str
    """
    bad = _nothing_shown(evidence)
    doubt = _doubts(len(rows), sets, evidence.choice.components, names)
    evidence.remarks += _remarks(values, sets, evidence, names)
    if bad:
        return "unsupported", " ".join(bad + doubt)
    if doubt:
        return "doubtful", " ".join(doubt)
    k = evidence.choice.components
    errors = ", ".join(f"{name} {one.error:.3g}" for name, one in zip(names, sets["nested"], strict=True))
    return "supported", (f"{k} latent variable{'s' * (k != 1)} predict samples that played no part in any choice "
                         f"with these errors: {errors}.")  # fmt: skip


def _nothing_shown(evidence: Evidence) -> list[str]:
    found = []
    if evidence.choice.nothing_better:
        found.append("Cross-validation finds no number of latent variables that predicts better than the mean.")
    if evidence.permutation_p > _CHANCE:
        found.append(f"Shuffled reference values are predicted as well (p = {evidence.permutation_p:.2g}).")
    return found


def _doubts(n: int, sets: dict[str, list[Figures]], k: int, names: list[str]) -> list[str]:
    found = []
    wanted, _ = samples_wanted(k)
    if n < wanted:
        found.append(f"{n} samples are fewer than the {wanted} that ASTM E1655 asks for with {k} latent "
                     f"variable{'s' * (k != 1)}.")  # fmt: skip
    for which in ("nested", "test"):
        for name, one in zip(names, sets.get(which, []), strict=False):
            if one.bias_p < _PROVEN:
                found.append(f"The {which} predictions of {name} have a bias of {one.bias:.3g} (p = {one.bias_p:.2g}).")
            elif one.line_p < _PROVEN:
                found.append(f"The {which} predictions of {name} do not lie on a line of slope 1 through the origin "
                             f"(slope {one.slope:.3g}, p = {one.line_p:.2g}).")  # fmt: skip
    return found


def _remarks(values: FloatArray, sets: dict[str, list[Figures]], evidence: Evidence, names: list[str]) -> list[str]:
    found = []
    k, suggested = evidence.choice.components, evidence.choice.suggested
    if k != max(suggested, 1):
        found.append(f"{k} latent variables were asked for; the one-standard-error rule would take {suggested}.")
    if evidence.permutations and np.isnan(evidence.permutation_p):
        found.append("The permutation test was left out: groups of unequal size, or fewer than four, cannot be "
                     "exchanged.")  # fmt: skip
    least = samples_wanted(k)[1]
    for name, one in zip(names, sets.get("test", []), strict=False):
        if one.count < least:
            found.append(f"The test set of {name} has {one.count} samples; ASTM E1655 asks for {least}.")
    for j, name in enumerate(names):
        thin = thin_range(values[:, j])
        if thin is not None:
            found.append(f"Few samples have values of {name} between {thin[0]:.4g} and {thin[1]:.4g}.")
    return found
