"""Least squares for one raw SVI slice under soft no-arbitrage bounds: compiled, a fraction of a millisecond.

All in units of the standard deviation at the forward, s: x = k / s, W(x) = w(s x) / s^2. Five free
numbers make every admissible slice: ``exp(p0)`` is the least W, ``bound / (1 + exp(-p1))`` and
``bound / (1 + exp(-p2))`` the slopes of the left and right wing, ``p3`` the centre m, and ``p4`` places the
logarithm of the width sigma between those of NARROWEST and WIDEST in the same manner.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: Bounds of a slice's width in standard deviations: no kinks between quotes, no parabolas for wings.
NARROWEST, WIDEST = 0.15, 40.0
_LOG_RANGE = math.log(WIDEST / NARROWEST)
#: The density of X may not sink below this share of what it is in a flat smile.
LEAST_BUTTERFLY = 0.01
#: Levenberg-Marquardt stops after this many steps, or when a step changes the sum of squares by less than a millionth.
STEPS = 60


@njit(cache=True, nogil=True, error_model="numpy")
def scaled_slice(p: Array, bound: float) -> tuple[float, float, float, float, float]:
    """(a, b, rho, m, sigma) in scaled units from the five free numbers."""
    left, right = bound / (1.0 + math.exp(-p[1])), bound / (1.0 + math.exp(-p[2]))
    sigma = NARROWEST * math.exp(_LOG_RANGE / (1.0 + math.exp(-p[4])))
    b = 0.5 * (left + right)
    return math.exp(p[0]) - sigma * math.sqrt(left * right), b, (right - left) / (right + left), p[3], sigma


@njit(cache=True, nogil=True, error_model="numpy")
def residuals(
    p: Array,
    x: Array,
    roots: Array,
    weights: Array,
    grid: Array,
    floor: Array,
    later_x: Array,
    later_roots: Array,
    variance: float,
    bound: float,
    least_wings: Array,
    prior: Array,
    ridge: float,
    stiffness: float,
    out: Array,
) -> float:
    """Fill ``out`` (n + 2 g + l + 7,) and return its sum of squares.

    Quotes: weighted differences of sqrt(W) from ``roots`` at ``x`` (n,). Bounds, active only where
    broken and times ``stiffness``: g at least LEAST_BUTTERFLY and sqrt(W) at least ``floor`` on ``grid`` (g,),
    sqrt(W) at most ``later_roots`` at ``later_x`` (l,), wings at least as steep as ``least_wings`` (2,). Ridge:
    ``ridge`` times the distance from ``prior`` (5,). ``variance`` is s^2.
    """
    a, b, rho, m, sigma = scaled_slice(p, bound)
    n, g, later = x.size, grid.size, later_x.size
    for i in range(n):
        z = x[i] - m
        w = a + b * (rho * z + math.sqrt(z * z + sigma * sigma))
        out[i] = weights[i] * (math.sqrt(max(w, 0.0)) - roots[i])
    for i in range(g):
        z = grid[i] - m
        root = math.sqrt(z * z + sigma * sigma)
        w = max(a + b * (rho * z + root), 1e-12)
        first, second = b * (rho + z / root), b * sigma * sigma / (root * root * root)
        tilt = 1.0 - 0.5 * grid[i] * first / w
        density = tilt * tilt - 0.25 * first * first * (1.0 / w + 0.25 * variance) + 0.5 * second
        out[n + i] = stiffness * max(LEAST_BUTTERFLY - density, 0.0)
        out[n + g + i] = stiffness * max(floor[i] - math.sqrt(w), 0.0)
    for i in range(later):
        z = later_x[i] - m
        w = a + b * (rho * z + math.sqrt(z * z + sigma * sigma))
        out[n + 2 * g + i] = stiffness * max(math.sqrt(max(w, 0.0)) - later_roots[i], 0.0)
    out[n + 2 * g + later] = stiffness * max(least_wings[0] - b * (1.0 - rho), 0.0)
    out[n + 2 * g + later + 1] = stiffness * max(least_wings[1] - b * (1.0 + rho), 0.0)
    for i in range(5):
        out[n + 2 * g + later + 2 + i] = ridge * (p[i] - prior[i])
    total = 0.0
    for i in range(out.size):
        total += out[i] * out[i]
    return total


@njit(cache=True, nogil=True, error_model="numpy")
def solve_damped(normal: Array, damping: float, gradient: Array) -> Array:
    """Solve ``(N + damping diag(N)) s = -gradient`` (5, 5) by Cholesky."""
    n = gradient.size
    factor, step = normal.copy(), -gradient
    for i in range(n):
        factor[i, i] += damping * normal[i, i] + 1e-15
    for j in range(n):
        for i in range(j):
            factor[j, j] -= factor[j, i] * factor[j, i]
        factor[j, j] = math.sqrt(max(factor[j, j], 1e-30))
        for k in range(j + 1, n):
            for i in range(j):
                factor[k, j] -= factor[k, i] * factor[j, i]
            factor[k, j] /= factor[j, j]
    for j in range(n):
        for i in range(j):
            step[j] -= factor[j, i] * step[i]
        step[j] /= factor[j, j]
    for j in range(n - 1, -1, -1):
        for i in range(j + 1, n):
            step[j] -= factor[i, j] * step[i]
        step[j] /= factor[j, j]
    return step


@njit(cache=True, nogil=True, error_model="numpy")
def fit(
    start: Array,
    x: Array,
    roots: Array,
    weights: Array,
    grid: Array,
    floor: Array,
    later_x: Array,
    later_roots: Array,
    variance: float,
    bound: float,
    least_wings: Array,
    prior: Array,
    ridge: float,
    stiffness: float,
) -> tuple[Array, float]:
    """The free numbers (5,) that minimise :func:`residuals`' sum of squares from ``start``, and that sum.

    Levenberg (1944) and Marquardt (1963), damping scaled by the diagonal; derivatives by forward differences.
    """
    n = x.size + 2 * grid.size + later_x.size + 7
    here, there = np.empty(n), np.empty(n)
    jacobian = np.empty((5, n))
    p = start.copy()
    args = (x, roots, weights, grid, floor, later_x, later_roots, variance, bound, least_wings, prior, ridge, stiffness)
    cost = residuals(p, *args, here)
    damping = 1e-3
    for _ in range(STEPS):
        for j in range(5):
            kept, shift = p[j], 1e-7 * max(1.0, abs(p[j]))
            p[j] = kept + shift
            residuals(p, *args, there)
            p[j] = kept
            for i in range(n):
                jacobian[j, i] = (there[i] - here[i]) / shift
        normal, gradient = np.zeros((5, 5)), np.zeros(5)
        for j in range(5):
            for i in range(n):
                gradient[j] += jacobian[j, i] * here[i]
            for k in range(j + 1):
                dot = 0.0
                for i in range(n):
                    dot += jacobian[j, i] * jacobian[k, i]
                normal[j, k] = dot
                normal[k, j] = dot
        improved = False
        while damping < 1e12:
            step = solve_damped(normal, damping, gradient)
            largest = 0.0
            for j in range(5):
                largest = max(largest, abs(step[j]))
            if largest > 2.0:  # exponentials: longer steps only overflow
                step *= 2.0 / largest
            trial = residuals(p + step, *args, there)
            if trial < cost:
                improved = trial < cost * (1.0 - 1e-6)
                p += step
                here, there = there, here
                cost = trial
                damping = max(damping * 0.2, 1e-12)
                break
            damping *= 4.0
        if not improved:
            break
    return p, cost
