"""What every kernel shares: the block length, compiler options and bit-level casts."""

from __future__ import annotations

from contextlib import suppress
from typing import Any

import numpy as np
from numba import types
from numba.extending import intrinsic
from numpy.typing import NDArray

#: Paths worked on together. A power of two; rows of one block stay in the first-level caches.
BLOCK = 256
BLOCK_BITS = 8

#: Flags that let the compiler fuse and vectorise but never reorder sums: rounding by a magic
#: number (see ``elementary``) is wrong as soon as additions may be reassociated.
_EXACT_ORDER = {"nnan", "nsz", "arcp", "contract", "afn"}

#: Numba's default division raises on zero, which blocks vectorisation.
OPTIONS: dict[str, Any] = {"nogil": True, "error_model": "numpy", "fastmath": _EXACT_ORDER}

#: For sums over the paths of a block, whose order the compiler may choose once and for all.
SUM_OPTIONS: dict[str, Any] = {**OPTIONS, "fastmath": _EXACT_ORDER | {"reassoc"}}


def aligned(shape: tuple[int, ...], dtype: Any) -> NDArray[Any]:
    """Uninitialised memory that starts on a cache line: full-width loads cross none."""
    size = int(np.prod(shape)) * np.dtype(dtype).itemsize
    raw = np.empty(size + 64, dtype=np.uint8)
    start = -raw.ctypes.data % 64
    out: NDArray[Any] = raw[start : start + size].view(dtype).reshape(shape)
    return out


def _cast(source: Any, target: Any) -> Any:
    def cast(typing_context: Any, value: Any) -> Any:
        def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
            return builder.bitcast(arguments[0], context.get_value_type(target))

        return target(source), generate

    return intrinsic(cast)


#: Reinterpretations of 32 and 64 bits, no conversion.
single_bits = _cast(types.float32, types.int32)
single_from_bits = _cast(types.int32, types.float32)
double_bits = _cast(types.float64, types.int64)
double_from_bits = _cast(types.int64, types.float64)


def _wide(typing_context: Any) -> Any:
    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        # llvmlite's own add() admits only attributes without a value; a version that keeps them
        # otherwise goes without the hint
        with suppress(TypeError, AttributeError):
            set.add(builder.function.attributes, '"prefer-vector-width"="512"')
        return context.get_dummy_value()

    return types.none(), generate


#: Called inside a kernel: ask for 512-bit vectors where the processor has them (compilers
#: default to 256). Doubles the speed of these kernels; other processors ignore it.
use_wide_vectors: Any = intrinsic(_wide)
