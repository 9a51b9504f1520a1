"""From a black box over finite fields to exact rational functions, confirmed afresh."""

from ibpred.reconstruct.functions import Evidence, Reconstruction, reconstruct
from ibpred.reconstruct.plan import Plan, Watch
from ibpred.reconstruct.sampling import Sampler

__all__ = ["Evidence", "Plan", "Reconstruction", "Sampler", "Watch", "reconstruct"]
