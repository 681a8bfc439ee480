"""Preparing spectra: baselines, smoothing, scatter, scale and axis, as scikit-learn transformers.

Each step takes and returns labelled arrays (or plain ones) and says whether it keeps Beer-Lambert additivity.
What finds amounts belongs in ``solve``. Names load on first use, so that scikit-learn does not load with the rest.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from unmix.prepare.additivity import require_additive
    from unmix.prepare.align import Align
    from unmix.prepare.axis import common_axis, select_regions
    from unmix.prepare.baseline import PolynomialBaseline, RubberBand
    from unmix.prepare.channels import MaskSaturated, Regions, SpikeRemoval
    from unmix.prepare.explore import try_values
    from unmix.prepare.interference import (
        ExternalParameterOrthogonalisation,
        GeneralisedLeastSquaresWeighting,
        VapourRemoval,
    )
    from unmix.prepare.penalised import (
        AdaptiveReweighted,
        AsymmetricallyReweighted,
        AsymmetricLeastSquares,
        penalty_for,
    )
    from unmix.prepare.resolution import Resample
    from unmix.prepare.scale import AutoScale, MeanCentre, Normalise, ParetoScale
    from unmix.prepare.scatter import (
        ExtendedScatterCorrection,
        MultiplicativeScatterCorrection,
        RobustNormalVariate,
        StandardNormalVariate,
    )
    from unmix.prepare.smooth import GapDerivative, SavitzkyGolay, WhittakerSmoother

#: the steps that a method may name -> the module that holds each
STEPS = {
    "AdaptiveReweighted": "penalised",
    "Align": "align",
    "AsymmetricLeastSquares": "penalised",
    "AsymmetricallyReweighted": "penalised",
    "AutoScale": "scale",
    "ExtendedScatterCorrection": "scatter",
    "ExternalParameterOrthogonalisation": "interference",
    "GapDerivative": "smooth",
    "GeneralisedLeastSquaresWeighting": "interference",
    "MaskSaturated": "channels",
    "MeanCentre": "scale",
    "MultiplicativeScatterCorrection": "scatter",
    "Normalise": "scale",
    "ParetoScale": "scale",
    "PolynomialBaseline": "baseline",
    "Regions": "channels",
    "Resample": "resolution",
    "RobustNormalVariate": "scatter",
    "RubberBand": "baseline",
    "SavitzkyGolay": "smooth",
    "SpikeRemoval": "channels",
    "StandardNormalVariate": "scatter",
    "Standardisation": "transfer",
    "VapourRemoval": "interference",
    "WhittakerSmoother": "smooth",
}

_HOMES = {
    **STEPS,
    "common_axis": "axis",
    "penalty_for": "penalised",
    "require_additive": "additivity",
    "select_regions": "axis",
    "try_values": "explore",
}

__all__ = [
    "STEPS",
    "AdaptiveReweighted",
    "Align",
    "AsymmetricLeastSquares",
    "AsymmetricallyReweighted",
    "AutoScale",
    "ExtendedScatterCorrection",
    "ExternalParameterOrthogonalisation",
    "GapDerivative",
    "GeneralisedLeastSquaresWeighting",
    "MaskSaturated",
    "MeanCentre",
    "MultiplicativeScatterCorrection",
    "Normalise",
    "ParetoScale",
    "PolynomialBaseline",
    "Regions",
    "Resample",
    "RobustNormalVariate",
    "RubberBand",
    "SavitzkyGolay",
    "SpikeRemoval",
    "StandardNormalVariate",
    "Standardisation",
    "VapourRemoval",
    "WhittakerSmoother",
    "common_axis",
    "penalty_for",
    "require_additive",
    "select_regions",
    "try_values",
]


def __getattr__(name: str) -> Any:
    home = _HOMES.get(name)
    if home is None:
        raise AttributeError(f"module 'unmix.prepare' has no attribute '{name}'; it has {', '.join(__all__)}")
    return getattr(import_module(f"unmix.prepare.{home}"), name)


def __dir__() -> list[str]:
    return list(__all__)
