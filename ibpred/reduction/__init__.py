"""The user's reduction: choice of masters, and wanted integrals as combinations of them."""
