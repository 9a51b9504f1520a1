"""Storage of kernels: plain pointers to array data, arrays that grow.

Indexing a pointer counts no references and wraps no negative index; functions that get pointers are
inlined by the compiler. The arrays must outlive the kernel's call: take pointers of arguments only.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import types
from numba.extending import intrinsic


@intrinsic
def pointer(typingctx: Any, array: Any) -> Any:
    """Pointer to the first item of a contiguous array."""

    def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return context.make_array(signature.args[0])(context, builder, args[0]).data

    return types.CPointer(array.dtype)(array), codegen


def grown(array: Any, wanted: int) -> Any:
    """The array itself if it has room for `wanted` items, else a copy with at least twice the room."""
    if wanted <= len(array):
        return array
    larger = np.empty(max(wanted, 2 * len(array)), array.dtype)
    larger[: len(array)] = array
    return larger
