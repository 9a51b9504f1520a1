"""Direct integration over Feynman parameters in the Euclidean region: an independent check.

Nothing here uses identities, differential equations or their solutions.
"""

from ibpred.numerics.direct.integral import direct_integral, direct_value

__all__ = ["direct_integral", "direct_value"]
