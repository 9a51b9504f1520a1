"""From a black box over finite fields to exact rational functions, confirmed afresh."""

from ibpred.reconstruct.functions import Evidence, Reconstruction, reconstruct
from ibpred.reconstruct.sampling import Progress, Sampler

__all__ = ["Evidence", "Progress", "Reconstruction", "Sampler", "reconstruct"]
