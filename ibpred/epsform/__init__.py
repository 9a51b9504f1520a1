"""The epsilon-factorised form of a differential system, or what stands in its way."""
