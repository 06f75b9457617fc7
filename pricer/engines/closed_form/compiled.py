"""How the kernels of this folder are compiled."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar, cast

from numba import njit

from pricer.core.stored_code import digest_of, stored_under

_Kernel = TypeVar("_Kernel", bound=Callable[..., Any])

#: Kernels import from each other: a change in any of their files renews all of them.
_SOURCES = digest_of((Path(__file__), *Path(__file__).parent.glob("*_kernels.py")))

_SQRT_HALF = math.sqrt(0.5)


def compiled(signature: str) -> Callable[[_Kernel], _Kernel]:
    """Compile for exactly this signature, keep the result on disk, and free other threads while running."""
    compiler = njit(signature, cache=True, nogil=True, error_model="numpy")

    def compile_stored(function: _Kernel) -> _Kernel:
        return cast(_Kernel, compiler(stored_under(_SOURCES, function)))

    return compile_stored


@compiled("float64(float64)")
def normal_cdf(x: float) -> float:
    """Standard normal distribution function, accurate in both tails."""
    return 0.5 * math.erfc(-x * _SQRT_HALF)
