"""From an integral family to certified digits.

>>> import ibpred
>>> box = ibpred.load("families/massless-box.toml")      # doctest: +SKIP
>>> box.evaluate({"s": -1, "t": "-1/3"}, digits=30)      # doctest: +SKIP
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from ibpred.run.python.families import Families, load_all
    from ibpred.run.python.family import Family, load

__version__ = "0.1.0"

__all__ = ["Families", "Family", "__version__", "load", "load_all"]


def __getattr__(name: str) -> Any:
    # the stages are imported when first used, so that `import ibpred` stays light
    if name in ("Family", "load"):
        from ibpred.run.python import family

        return getattr(family, name)
    if name in ("Families", "load_all"):
        from ibpred.run.python import families

        return getattr(families, name)
    raise AttributeError(f"module 'ibpred' has no attribute {name!r}")
