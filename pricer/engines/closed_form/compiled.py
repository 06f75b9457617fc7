"""How the kernels of this folder are compiled."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any, TypeVar, cast

from numba import njit

_Kernel = TypeVar("_Kernel", bound=Callable[..., Any])

_SQRT_HALF = math.sqrt(0.5)


def compiled(signature: str) -> Callable[[_Kernel], _Kernel]:
    """Compile for exactly this signature, keep the result on disk, and free other threads while running."""
    return cast(Callable[[_Kernel], _Kernel], njit(signature, cache=True, nogil=True, error_model="numpy"))


@compiled("float64(float64)")
def normal_cdf(x: float) -> float:
    """Standard normal distribution function, accurate in both tails."""
    return 0.5 * math.erfc(-x * _SQRT_HALF)
