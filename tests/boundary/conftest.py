"""The plain numerics of words are shared with the tests of iterated integrals."""

from __future__ import annotations

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1] / "iterated"))
