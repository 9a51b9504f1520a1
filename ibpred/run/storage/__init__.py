"""Disk: the store, the tapes and samples in it, tables row by row, files that are written whole."""
