"""Vectors of `LANES` doubles, one sample point in each lane, as values inside compiled kernels.

A block of a float64 array (`LANES` consecutive numbers, aligned to 64 bytes) is loaded into a value of
the compiler's vector type; sums, products and fused operations act on all lanes. The type lives only
inside kernels.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from llvmlite import ir
from numba import njit, types
from numba.core import cgutils
from numba.extending import intrinsic, models, register_model

from ibpred.kernels.arithmetic import ROUND

LANES = 32
"""Sample points replayed at once."""

ALIGNMENT = 64

BIAS = 1.5 * 2.0**101
"""Adding to this rounds a number of size below 2**100 to a multiple of 2**49."""

LONGEST_SUM = 11
"""Terms (products or single residues) that one sum may hold.

With residues of size at most 0.55 p and p < 2**49 a product is below 1.21 * 2**96, so eleven stay below
2**100. What is left of each after rounding to a multiple of 2**49 is at most 2**48, a single residue is
at most 1.1 * 2**48, and the reduced high part at most 1.5 p: together below 2**52.
"""


class LanesType(types.Type):  # type: ignore[misc]
    """Numba type of a vector of `LANES` doubles."""

    def __init__(self) -> None:
        super().__init__(name=f"Lanes{LANES}")


LANES_TYPE = LanesType()
_VECTOR = ir.VectorType(ir.DoubleType(), LANES)


@register_model(LanesType)
class _LanesModel(models.PrimitiveModel):  # type: ignore[misc]
    def __init__(self, manager: Any, fe_type: Any) -> None:
        super().__init__(manager, fe_type, _VECTOR)


def _block(context: Any, builder: Any, array_type: Any, array: Any, index: Any) -> Any:
    data = context.make_array(array_type)(context, builder, array).data
    offset = builder.mul(index, ir.IntType(64)(LANES))
    element = builder.gep(data, [offset])
    return builder.bitcast(element, _VECTOR.as_pointer())


@intrinsic
def load(typingctx: Any, array: Any, index: Any) -> Any:
    """Block number `index` of an aligned float64 array."""

    def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        pointer = _block(context, builder, signature.args[0], args[0], args[1])
        return builder.load(pointer, align=ALIGNMENT)

    return LANES_TYPE(array, types.int64), codegen


@intrinsic
def store(typingctx: Any, array: Any, index: Any, value: Any) -> Any:
    """Write a vector to block number `index`."""

    def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        pointer = _block(context, builder, signature.args[0], args[0], args[1])
        builder.store(args[2], pointer, align=ALIGNMENT)
        return context.get_dummy_value()

    return types.void(array, types.int64, LANES_TYPE), codegen


@intrinsic
def spread(typingctx: Any, value: Any) -> Any:
    """The same number in all lanes."""

    def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        one = builder.insert_element(ir.Constant(_VECTOR, ir.Undefined), args[0], ir.IntType(32)(0))
        mask = ir.Constant(ir.VectorType(ir.IntType(32), LANES), [0] * LANES)
        return builder.shuffle_vector(one, ir.Constant(_VECTOR, ir.Undefined), mask)

    return LANES_TYPE(types.float64), codegen


@intrinsic
def fma(typingctx: Any, x: Any, y: Any, z: Any) -> Any:
    """``x*y + z`` in each lane with one rounding."""

    def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        function = cgutils.get_or_insert_function(
            builder.module, ir.FunctionType(_VECTOR, [_VECTOR] * 3), f"llvm.fma.v{LANES}f64"
        )
        return builder.call(function, args)

    return LANES_TYPE(LANES_TYPE, LANES_TYPE, LANES_TYPE), codegen


def _binary(instruction: str) -> Callable[..., Any]:
    def operation(typingctx: Any, x: Any, y: Any) -> Any:
        def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
            return getattr(builder, instruction)(args[0], args[1])

        return LANES_TYPE(LANES_TYPE, LANES_TYPE), codegen

    return operation


add = intrinsic(_binary("fadd"))
sub = intrinsic(_binary("fsub"))
mul = intrinsic(_binary("fmul"))


@njit(cache=True, inline="always")
def lanes_multiply(x: Any, y: Any, minus_p: Any, inverse_p: Any) -> Any:
    """``x*y`` modulo p in each lane, of size at most 0.55 p."""
    rounding = spread(ROUND)
    h = mul(x, y)
    low = fma(x, y, sub(spread(-0.0), h))
    q = sub(fma(h, inverse_p, rounding), rounding)
    return add(fma(q, minus_p, h), low)


@njit(cache=True, inline="always")
def lanes_settle(high: Any, low: Any, minus_p: Any, inverse_p: Any) -> Any:
    """Reduce a sum held as ``(high - BIAS) + low``."""
    rounding = spread(ROUND)
    top = sub(high, spread(BIAS))
    q = sub(fma(top, inverse_p, rounding), rounding)
    rest = add(fma(q, minus_p, top), low)
    q = sub(fma(rest, inverse_p, rounding), rounding)
    return fma(q, minus_p, rest)
