"""Arithmetic modulo a prime below 2**49 on double precision numbers.

A residue is held as a double with an integer value of absolute value at most about p/2 (balanced; at
most 0.55 p after products). The product of two residues is the unevaluated sum ``h + l`` with ``h = x*y``
rounded and ``l = fma(x, y, -h)`` exact (Dekker; Brisebarre, Defour, Kornerup, Muller and Revol, for the
reduction by ``q = rint(h/p)``); all later steps are exact.

Every function needs the fused operation to be one rounding: no fast-math flag may be set here. On a CPU
without it the compiler calls the C library, which is slow and right.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from llvmlite import ir
from numba import njit, types
from numba.core import cgutils
from numba.extending import intrinsic

LARGEST_PRIME = 2**49
"""Primes must lie below this."""

ROUND = 1.5 * 2.0**52
"""Adding and subtracting this rounds a double of size below 2**51 to an integer."""


@intrinsic
def fused(typingctx: Any, x: Any, y: Any, z: Any) -> Any:
    """``x*y + z`` with one rounding."""

    def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        double = ir.DoubleType()
        function = cgutils.get_or_insert_function(
            builder.module, ir.FunctionType(double, [double] * 3), "llvm.fma.f64"
        )
        return builder.call(function, args)

    return types.float64(types.float64, types.float64, types.float64), codegen


@intrinsic
def leading_zeros(typingctx: Any, word: Any) -> Any:
    """Number of leading zero bits of a non-zero 64-bit word."""

    def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        word64, bit = ir.IntType(64), ir.IntType(1)
        function = cgutils.get_or_insert_function(
            builder.module, ir.FunctionType(word64, [word64, bit]), "llvm.ctlz.i64"
        )
        return builder.call(function, [args[0], bit(1)])

    return types.int64(types.uint64), codegen


@njit(cache=True)
def multiply(x: Any, y: Any, p: Any, inverse_p: Any) -> Any:
    """``x*y`` modulo p, of size at most 0.55 p."""
    h = x * y
    low = fused(x, y, -h)
    q = fused(h, inverse_p, ROUND) - ROUND
    return fused(-q, p, h) + low


@njit(cache=True)
def invert(x: Any, p: Any) -> Any:
    """The inverse of a non-zero residue, by Euclid's algorithm."""
    modulus = np.int64(p)
    a, b = np.int64(x) % modulus, modulus
    u, v = np.int64(1), np.int64(0)
    while a != 0:
        quotient = b // a
        b, a = a, b - quotient * a
        v, u = u, v - quotient * u
    inverse = v % modulus
    if 2 * inverse > modulus:
        inverse -= modulus
    return np.float64(inverse)


@njit(cache=True)
def to_residues(values: np.ndarray, modulus: int) -> np.ndarray:  # type: ignore[type-arg]
    """Balanced residues of 64-bit integers of any size, as doubles."""
    result = np.empty(values.shape[0], np.float64)
    for i in range(values.shape[0]):
        residue = values[i] % modulus
        if 2 * residue > modulus:
            residue -= modulus
        result[i] = residue
    return result


@njit(cache=True)
def from_residues(values: np.ndarray, modulus: int) -> np.ndarray:  # type: ignore[type-arg]
    """Canonical residues 0 <= r < p as unsigned integers."""
    result = np.empty(values.shape[0], np.uint64)
    for i in range(values.shape[0]):
        result[i] = np.uint64(np.int64(values[i]) % modulus)
    return result
