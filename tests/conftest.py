"""What all tests share: property tests have no deadline (machines differ) and repeat themselves in CI."""

from __future__ import annotations

import os

from hypothesis import settings

settings.register_profile("ibpred", deadline=None, derandomize="CI" in os.environ)
settings.load_profile("ibpred")
