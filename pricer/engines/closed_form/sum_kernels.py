"""Compiled kernel: options on sums of lognormals that are monotone in one normal variable."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from pricer.engines.closed_form.compiled import compiled, normal_cdf

_END = 40.0  # a boundary beyond this many deviations is never, or always, reached
_STEPS = 100


@compiled("float64[::1](float64[:, ::1], float64[::1], float64[::1], float64, float64, boolean)")
def conditional(
    log_terms: NDArray[np.float64],
    signs: NDArray[np.float64],
    loadings: NDArray[np.float64],
    strike: float,
    side: float,
    probability: bool,
) -> NDArray[np.float64]:
    """``E[(side (A - strike))+]`` over ``w``, or ``P(side (A - strike) > 0)``, one for each row.

    ``A = sum_i signs[i] exp(log_terms[m, i] + loadings[i] w)`` with ``w`` standard normal;
    log_terms (m, n), signs (n,) of +-1, loadings (n,) with ``signs * loadings >= 0``, so
    that A rises in w. The boundary solves ``log(positive part) = log(negative part)`` of
    ``A - strike``, which is nearly straight in w, by Newton steps kept inside a bracket;
    from there the expectation is Black's formula term by term.
    """
    rows, n = log_terms.shape
    out = np.empty(rows)
    plus0, minus0 = max(-strike, 0.0), max(strike, 0.0)
    boundary = 0.0
    for m in range(rows):
        low, high = -_END, _END
        w = boundary
        for _ in range(_STEPS):
            plus, minus, plus_slope, minus_slope = plus0, minus0, 0.0, 0.0
            for i in range(n):
                term = math.exp(log_terms[m, i] + loadings[i] * w)
                if signs[i] > 0.0:
                    plus += term
                    plus_slope += term * loadings[i]
                else:
                    minus += term
                    minus_slope += term * loadings[i]
            if minus <= 0.0:
                w = -_END
                break
            if plus <= 0.0:
                w = _END
                break
            gap = math.log(plus / minus)
            slope = plus_slope / plus - minus_slope / minus
            if slope <= 0.0:
                w = -_END if gap > 0.0 else _END
                break
            step = gap / slope
            if abs(step) < 1e-6:  # convergence is quadratic: what is left is this step's square
                w -= step
                break
            if gap > 0.0:
                high = w
            else:
                low = w
            w -= step
            if not low <= w <= high:
                w = 0.5 * (low + high)
        boundary = w
        if probability:
            out[m] = normal_cdf(-side * w)
        else:
            value = -strike * normal_cdf(-side * w)
            for i in range(n):
                b = loadings[i]
                value += signs[i] * math.exp(log_terms[m, i] + 0.5 * b * b) * normal_cdf(side * (b - w))
            out[m] = max(side * value, 0.0)
        if abs(boundary) >= _END:
            boundary = 0.0
    return out
