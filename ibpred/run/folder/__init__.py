"""The folder of results: written, exported, shown, verified."""
