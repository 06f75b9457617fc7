"""Compiled kernels for normal probabilities in two to six dimensions.

Kept apart so that numba is imported, and the kernels are compiled, only when three or
more correlated levels have to be ranked.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from pricer.engines.closed_form.compiled import compiled, normal_cdf

_GAUSS = np.polynomial.legendre.leggauss(20)
_NODES, _WEIGHTS = 0.5 * (1.0 + _GAUSS[0]), 0.5 * _GAUSS[1]  # on (0, 1)

# Gauss-Kronrod rule of 15 nodes on (-1, 1) with its 7-node Gauss rule, right half (Kronrod 1965).
_K_NODES = np.array(
    [
        0.991455371120812639206854697526329,
        0.949107912342758524526189684047851,
        0.864864423359769072789712788640926,
        0.741531185599394439863864773280788,
        0.586087235467691130294144691693013,
        0.405845151377397166906606412076961,
        0.207784955007898467600689403773245,
        0.0,
    ]
)
_K_WEIGHTS = np.array(
    [
        0.022935322010529224963732008058970,
        0.063092092629978553290700663189204,
        0.104790010322250183839876322541518,
        0.140653259715525918745189590510238,
        0.169004726639267902826583426598550,
        0.190350578064785409913256402421014,
        0.204432940075298892414161999234649,
        0.209482141084727828012999174891714,
    ]
)
_G_WEIGHTS = np.array(
    [
        0.0,
        0.129484966168869693270611432679082,
        0.0,
        0.279705391489276667901467771423780,
        0.0,
        0.381830050505118944950369775488975,
        0.0,
        0.417959183673469387755102040816327,
    ]
)
_TWO_PI = 2.0 * math.pi
_DEPTH = 60  # panels kept on the stack of one adaptive integral
_DEGENERATE = 1e-14  # a conditional variance below this is rounding


@compiled("float64(float64, float64, float64)")
def bivariate(h: float, k: float, rho: float) -> float:
    """``P(X <= h, Y <= k)`` for finite limits and ``|rho| <= 1``, to about 1e-15.

    Plackett's (1954) integral over the correlation, from 0 for moderate correlation and
    from the nearer of -1 and 1 otherwise; there the boundary layer is integrated in
    closed form after a Taylor expansion of the rest (Drezner & Wesolowsky 1990, Genz 2004).
    """
    if abs(rho) < 0.925:
        total = 0.0
        angle = math.asin(rho)
        squares = 0.5 * (h * h + k * k)
        for i in range(20):
            s = math.sin(angle * _NODES[i])
            total += _WEIGHTS[i] * math.exp((h * k * s - squares) / (1.0 - s * s))
        return normal_cdf(h) * normal_cdf(k) + total * angle / _TWO_PI
    if rho > 0.0:
        start, direction = normal_cdf(min(h, k)), -1.0
    else:
        start, direction = max(0.0, normal_cdf(h) - normal_cdf(-k)), 1.0
        k = -k
    a2 = (1.0 - rho) * (1.0 + rho)
    if a2 <= 0.0:
        return start
    # Integral over x = sqrt(1 - r^2) in (0, a) of exp(-(b/x)^2/2 - c/(1+sqrt(1-x^2))) / sqrt(1-x^2).
    a, b, c = math.sqrt(a2), abs(h - k), h * k
    if b > 40.0 * a:
        return start
    edge = math.exp(-0.5 * b * b / a2 - 0.5 * c)
    first = 0.125 * (4.0 - c)
    second = (c - 4.0) * (c - 12.0) / 128.0
    moment0 = a * edge - b * math.sqrt(_TWO_PI) * normal_cdf(-b / a) * math.exp(-0.5 * c)
    moment2 = (a * a2 * edge - b * b * moment0) / 3.0
    moment4 = (a * a2 * a2 * edge - b * b * moment2) / 5.0
    total = moment0 + first * moment2 + second * moment4
    for i in range(20):
        x = a * _NODES[i]
        x2 = x * x
        layer = -0.5 * b * b / x2
        if layer < -700.0:
            continue
        q = math.sqrt(1.0 - x2)
        exact = math.exp(layer - c / (1.0 + q)) / q
        taylor = math.exp(layer - 0.5 * c) * (1.0 + x2 * (first + x2 * second))
        total += a * _WEIGHTS[i] * (exact - taylor)
    return min(1.0, max(0.0, start + direction * total / _TWO_PI))


@compiled(
    "Tuple((float64, float64[::1], float64[:, ::1]))"
    "(float64, float64[::1], float64[:, ::1], float64[::1], int64, float64)"
)
def _conditional(
    h1: float, h: NDArray[np.float64], r: NDArray[np.float64], loading: NDArray[np.float64], j: int, angle: float
) -> tuple[float, NDArray[np.float64], NDArray[np.float64]]:
    """Density of (pivot, j) at their limits; limits and correlation of the others given both.

    A density of 0 says that nothing is left to integrate.
    """
    s = math.sin(angle)
    c2 = math.cos(angle) ** 2
    n = h.shape[0]
    limits = np.empty(n - 1)
    correlation = np.empty((n - 1, n - 1))
    weight = math.exp((h1 * h[j] * s - 0.5 * (h1 * h1 + h[j] * h[j])) / c2) / _TWO_PI
    if weight < 1e-18:
        return 0.0, limits, correlation
    t = s / loading[j]
    alpha = np.empty(n - 1)
    beta = np.empty(n - 1)
    deviation = np.empty(n - 1)
    kept = np.empty(n - 1, dtype=np.int64)
    m = 0
    for i in range(n):
        if i == j:
            continue
        alpha[m] = (t * loading[i] - s * r[i, j]) / c2
        beta[m] = (r[i, j] - s * t * loading[i]) / c2
        variance = 1.0 - alpha[m] * t * loading[i] - beta[m] * r[i, j]
        distance = h[i] - alpha[m] * h1 - beta[m] * h[j]
        if variance <= _DEGENERATE:
            if distance < 0.0:
                return 0.0, limits, correlation
            continue
        deviation[m] = math.sqrt(variance)
        limits[m] = distance / deviation[m]
        if limits[m] > 9.0:
            continue
        kept[m] = i
        m += 1
    for p in range(m):
        correlation[p, p] = 1.0
        for q in range(p):
            k = kept[q]
            covariance = r[kept[p], k] - alpha[p] * t * loading[k] - beta[p] * r[k, j]
            rho = min(1.0, max(-1.0, covariance / (deviation[p] * deviation[q])))
            correlation[p, q] = rho
            correlation[q, p] = rho
    return weight, limits[:m].copy(), correlation[:m, :m].copy()


@compiled("UniTuple(float64, 2)(float64[::1], float64[:, ::1], float64, int64)")
def multivariate(h: NDArray[np.float64], r: NDArray[np.float64], tolerance: float, panels: int) -> tuple[float, float]:
    """``P(X <= h)`` and a bound on its error, for correlation ``r`` (n, n) and finite ``h`` (n,).

    The correlations of one variable with the others are turned on along ``t r_1j``;
    the derivative with respect to each of them is a bivariate density times a conditional
    probability in two dimensions less (Plackett 1954; Genz 2004 for n = 3), integrated
    adaptively over ``arcsin(t r_1j)``. ``panels`` limits the panels of one integral.
    """
    n = h.shape[0]
    if n == 0:
        return 1.0, 0.0
    if n == 1:
        return normal_cdf(h[0]), 1e-16
    if n == 2:
        return bivariate(h[0], h[1], r[0, 1]), 1e-15
    pivot, weakest = 0, 2.0
    for i in range(n):
        strength = 0.0
        for j in range(n):
            if j != i:
                strength = max(strength, abs(r[i, j]))
        if strength < weakest:
            pivot, weakest = i, strength
    rest_h = np.empty(n - 1)
    rest_r = np.empty((n - 1, n - 1))
    loading = np.empty(n - 1)
    for row in range(n - 1):
        i = row if row < pivot else row + 1
        rest_h[row] = h[i]
        loading[row] = r[pivot, i]
        for column in range(n - 1):
            rest_r[row, column] = r[i, column if column < pivot else column + 1]
    value, error = multivariate(rest_h, rest_r, tolerance, panels)
    weight = normal_cdf(h[pivot])
    value, error = value * weight, error * weight
    starts = np.empty(_DEPTH)
    widths = np.empty(_DEPTH)
    for j in range(n - 1):
        end = math.asin(min(1.0, max(-1.0, loading[j])))
        if end == 0.0:
            continue
        starts[0], widths[0] = 0.0, end
        depth, used = 1, 0
        while depth > 0:
            depth -= 1
            start, half = starts[depth], 0.5 * widths[depth]
            kronrod, gauss, inner = 0.0, 0.0, 0.0
            for i in range(15):
                node = min(i, 14 - i)
                x = -_K_NODES[node] if i < 8 else _K_NODES[node]
                density, limits, rest = _conditional(h[pivot], rest_h, rest_r, loading, j, start + half * (1.0 + x))
                if density == 0.0:
                    continue
                f, f_error = multivariate(limits, rest, 0.1 * tolerance, panels)
                kronrod += _K_WEIGHTS[node] * density * f
                gauss += _G_WEIGHTS[node] * density * f
                inner += _K_WEIGHTS[node] * density * f_error
            kronrod *= half
            gap = abs(kronrod - half * gauss)
            used += 1
            size = abs(kronrod) + 1e-300
            # The 15-node rule is far better than its difference to the 7-node rule.
            estimate = min(gap, size * (200.0 * gap / size) ** 1.5)
            if estimate <= tolerance * abs(2.0 * half / end) or used + depth >= panels or depth + 2 > _DEPTH:
                value += kronrod
                error += estimate + inner * abs(half)
            else:
                starts[depth], widths[depth] = start, half
                starts[depth + 1], widths[depth + 1] = start + half, half
                depth += 2
    return min(1.0, max(0.0, value)), error + 1e-15
