"""Compiled evaluation of polynomials in whitened inputs, strip by strip."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from numba import njit, types

from pricer.core.stored_code import digest_of, stored_under
from pricer.simulation.kernels import vectors
from pricer.simulation.kernels.vectors import OPTIONS, use_wide_vectors

_F = np.float32

#: Lanes worked on together: the monomials of a strip stay in the first-level cache.
STRIP = 128

_SOURCES = digest_of([Path(__file__), Path(vectors.__file__)])

_F32_1, _F32_2, _I64_1 = types.float32[::1], types.float32[:, ::1], types.int64[::1]
_LAYOUT = (_F32_1, _F32_2, _F32_2, _F32_2, _F32_1, types.int64, _I64_1, _I64_1)


def _stored(signature: Any) -> Callable[[Callable[..., Any]], Any]:
    """Compile for exactly this signature and keep the result on disk."""

    def compile_stored(function: Callable[..., Any]) -> Any:
        return njit(signature, cache=True, **OPTIONS)(stored_under(_SOURCES, function))

    return compile_stored


@njit(**OPTIONS)
def _fill(
    inputs: Any,
    start: int,
    centred: Any,
    centre: Any,
    reach: Any,
    whitening: Any,
    bounds: Any,
    scale: Any,
    first_free: int,
    parents: Any,
    factors: Any,
    out: Any,
) -> None:
    """Basis functions of one strip, ``out`` (n_basis, STRIP): 1, whitened inputs, free inputs, products.

    The strip is copied first: indices into it are seen by the compiler not to be negative, so loops vectorise.
    """
    use_wide_vectors()
    q, raw = whitening.shape
    for i in range(raw):
        c = centre[i]
        row = inputs[i, start : start + STRIP]
        for p in range(STRIP):
            centred[i, p] = row[p] - c
    for p in range(STRIP):
        out[0, p] = _F(1.0)
    at = 1 + q
    for i in range(first_free, raw):
        a = scale[i]
        for p in range(STRIP):
            out[at, p] = a * centred[i, p]
        at += 1
    for i in range(raw):
        low, high = reach[0, i], reach[1, i]
        for p in range(STRIP):
            centred[i, p] = min(max(centred[i, p], low), high)
    for j in range(q):
        for p in range(STRIP):
            out[1 + j, p] = _F(0.0)
        for i in range(raw):
            a = whitening[j, i]
            for p in range(STRIP):
                out[1 + j, p] += a * centred[i, p]
        low, high = bounds[0, j], bounds[1, j]
        for p in range(STRIP):
            out[1 + j, p] = min(max(out[1 + j, p], low), high)
    for m in range(at, out.shape[0]):
        a, b = parents[m], factors[m]
        for p in range(STRIP):
            out[m, p] = out[a, p] * out[b, p]


@_stored(types.void(_F32_2, *_LAYOUT, _F32_2))
def basis_functions(
    inputs: Any,
    centre: Any,
    reach: Any,
    whitening: Any,
    bounds: Any,
    scale: Any,
    first_free: int,
    parents: Any,
    factors: Any,
    out: Any,
) -> None:
    """``out`` (n_basis, lanes) from ``inputs`` (n_inputs, lanes); lanes a multiple of ``STRIP``.

    ``centre`` and ``scale`` : (n_inputs,); ``reach`` : (2, n_inputs) that centred inputs are held within;
    ``whitening`` : (q, n_inputs), ``bounds`` : (2, q) the same for whitened ones. Inputs from ``first_free`` on also
    enter as they are, centred and scaled. Function m above those of
    degree 1 is function ``parents[m]`` times function ``factors[m]``.
    """
    strip = np.empty((out.shape[0], STRIP), dtype=np.float32)
    centred = np.empty((len(centre), STRIP), dtype=np.float32)
    for start in range(0, inputs.shape[1], STRIP):
        _fill(inputs, start, centred, centre, reach, whitening, bounds, scale, first_free, parents, factors, strip)
        for m in range(out.shape[0]):
            row = out[m, start : start + STRIP]
            for p in range(STRIP):
                row[p] = strip[m, p]


@_stored(types.void(_F32_2, *_LAYOUT, _F32_1, _F32_1))
def combination(
    inputs: Any,
    centre: Any,
    reach: Any,
    whitening: Any,
    bounds: Any,
    scale: Any,
    first_free: int,
    parents: Any,
    factors: Any,
    coefficients: Any,
    out: Any,
) -> None:
    """The sum of ``coefficients`` (n_basis,) times the basis: ``out`` (lanes,); the rest as in ``basis_functions``."""
    use_wide_vectors()
    strip = np.empty((len(coefficients), STRIP), dtype=np.float32)
    centred = np.empty((len(centre), STRIP), dtype=np.float32)
    total = np.empty(STRIP, dtype=np.float32)
    for start in range(0, inputs.shape[1], STRIP):
        _fill(inputs, start, centred, centre, reach, whitening, bounds, scale, first_free, parents, factors, strip)
        for p in range(STRIP):
            total[p] = _F(0.0)
        for m in range(len(coefficients)):
            c = coefficients[m]
            for p in range(STRIP):
                total[p] += c * strip[m, p]
        row = out[start : start + STRIP]
        for p in range(STRIP):
            row[p] = total[p]
