"""Compiled kernels: arithmetic modulo a prime, sparse elimination, recording, replay; and slow twins."""
