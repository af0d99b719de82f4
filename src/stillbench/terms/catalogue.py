"""All noise terms. A new one is added here."""

from stillbench.terms.base import Fluctuation, MeanShape
from stillbench.terms.flicker import FlickerNoise
from stillbench.terms.quantization import QuantizationNoise
from stillbench.terms.ramp import Ramp
from stillbench.terms.walk import RandomWalk
from stillbench.terms.white import WhiteNoise

FLUCTUATIONS: tuple[Fluctuation, ...] = (QuantizationNoise(), WhiteNoise(), FlickerNoise(), RandomWalk())
MEAN_SHAPES: tuple[MeanShape, ...] = (Ramp(),)

BY_ROLE: dict[str, Fluctuation] = {term.role: term for term in FLUCTUATIONS}
SHAPE_BY_ROLE: dict[str, MeanShape] = {term.role: term for term in MEAN_SHAPES}
