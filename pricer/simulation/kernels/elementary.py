"""Elementary functions without branches, so that loops over paths vectorise.

Polynomials are our own minimax fits (iteratively reweighted least squares on Chebyshev
nodes); their measured errors stand beside them and are tested against SciPy. Powers of
two are split off by adding a magic number that rounds to an integer in the low bits.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from pricer.simulation.kernels.vectors import (
    OPTIONS,
    double_bits,
    double_from_bits,
    single_bits,
    single_from_bits,
)

_F = np.float32
_I = np.int32
_U = np.uint32

#: ``(x + MILLS_SHIFT)`` times Mills' ratio is a polynomial of ``(x - shift) / (x + shift)``.
_MILLS_SHIFT = 5.0

#: The variance of ``normal_from_bits`` over all its arguments, less 1: loadings are divided
#: by the root of one plus this.
NORMAL_VARIANCE_EXCESS = -3.316e-7


@njit(**OPTIONS)
def normal_from_bits(k: Any) -> Any:
    """Inverse normal of ``u = (k + 1/2) 2^-32`` in single precision; error below 2e-6.

    Odd in ``x = 2u - 1``: ``x`` times a polynomial in ``log2(4 u (1 - u))``, one formula for
    centre and tails (the variable is that of Giles 2010, the fit is ours). Both ``x`` and
    ``4u(1 - u)`` come from integers, so neither centre nor tails lose digits.
    """
    signed = _I(_U(k ^ _U(0x80000000)))
    x = (_F(signed) + _F(0.5)) * _F(2.0**-31)
    folded = _I(signed ^ _I(signed >> 31))
    tail = _F(_I(0x7FFFFFFF - folded)) + _F(0.5)  # min(u, 1 - u) 2^32
    v = tail * (_F(2.0**-30) - tail * _F(2.0**-62))
    bits = single_bits(v)
    exponent = _I(_I(bits - 0x3F3504F3) >> 23)
    r = single_from_bits(_I(bits - _I(exponent << 23))) - _F(1.0)
    p = _F(-0.1457442194223404)
    p = p * r + _F(0.2368902862071991)
    p = p * r + _F(-0.2500690817832947)
    p = p * r + _F(0.28670746088027954)
    p = p * r + _F(-0.36008721590042114)
    p = p * r + _F(0.48093944787979126)
    p = p * r + _F(-0.7213571667671204)
    p = p * r + _F(1.4426947832107544)
    s = _F(-1.0) - (_F(exponent) + p * r) * _F(2.0 / 31.0001)
    q = _F(0.04594557732343674)
    q = q * s + _F(-0.05685684457421303)
    q = q * s + _F(-0.14866876602172852)
    q = q * s + _F(0.2210719734430313)
    q = q * s + _F(0.11397915333509445)
    q = q * s + _F(-0.24995552003383636)
    q = q * s + _F(0.015755150467157364)
    q = q * s + _F(0.039542306214571)
    q = q * s + _F(0.07630551606416702)
    q = q * s + _F(-0.0689559280872345)
    q = q * s + _F(-0.008636826649308205)
    q = q * s + _F(0.06723209470510483)
    q = q * s + _F(-0.13640077412128448)
    q = q * s + _F(0.2596432864665985)
    q = q * s + _F(-0.5634045600891113)
    q = q * s + _F(2.3306055068969727)
    q = q * s + _F(4.400766372680664)
    return x * q


@njit(**OPTIONS)
def exp2_single(y: Any) -> Any:
    """``2^y`` for ``|y| < 126`` in single precision; relative error below 2e-7."""
    shifted = y + _F(12582912.0)
    r = y - (shifted - _F(12582912.0))
    p = _F(0.00015345810970757157)
    p = p * r + _F(0.0013399930903688073)
    p = p * r + _F(0.009618489071726799)
    p = p * r + _F(0.05550328642129898)
    p = p * r + _F(0.24022646248340607)
    p = p * r + _F(0.6931471824645996)
    p = p * r + _F(1.0)
    return single_from_bits(_I(single_bits(p) + _I(single_bits(shifted) << 23)))


@njit(**OPTIONS)
def exp2_double(y: Any) -> Any:
    """``2^y`` for ``|y| < 1021``; relative error below 1e-13."""
    shifted = y + 6755399441055744.0
    r = y - (shifted - 6755399441055744.0)
    p = 1.0149409068686397e-07
    p = p * r + 1.3259298168635457e-06
    p = p * r + 1.5252988055827176e-05
    p = p * r + 0.00015403435474823488
    p = p * r + 0.0013333557618012525
    p = p * r + 0.009618129191288483
    p = p * r + 0.05550410866860327
    p = p * r + 0.24022650695652795
    p = p * r + 0.6931471805598747
    p = p * r + 1.000000000000013
    return double_from_bits(double_bits(p) + (double_bits(shifted) << 52))


@njit(**OPTIONS)
def log_double(x: Any) -> Any:
    """Natural logarithm of a positive normal number; absolute error below 2e-12."""
    bits = double_bits(x)
    exponent = (bits - 0x3FE6A09E667F3BCD) >> 52
    r = double_from_bits(bits - (exponent << 52)) - 1.0
    p = -0.048216948285094804
    p = p * r + 0.09292901718111568
    p = p * r - 0.09426425576170361
    p = p * r + 0.09019427290443709
    p = p * r - 0.0985332282867591
    p = p * r + 0.11103894456760263
    p = p * r - 0.12509243130230563
    p = p * r + 0.1428650184802701
    p = p * r - 0.16666371670066363
    p = p * r + 0.19999973949170186
    p = p * r - 0.2500000443482471
    p = p * r + 0.33333333646813457
    p = p * r - 0.49999999976880805
    p = p * r + 0.9999999999909495
    return 0.6931471805599453 * exponent + p * r


@njit(**OPTIONS)
def normal_density(x: Any) -> Any:
    """Standard normal density for ``|x| <= 37``."""
    return 0.3989422804014327 * exp2_double(-0.7213475204444817 * x * x)


@njit(**OPTIONS)
def normal_distribution(x: Any, density: Any) -> Any:
    """Standard normal distribution function, given the density at ``x``; error below 1e-11.

    Mills' ratio ``(1 - Phi(x)) / phi(x)`` for ``x >= 0``, reflected below 0.
    """
    a = abs(x)
    inverse = 1.0 / (a + _MILLS_SHIFT)
    t = (a - _MILLS_SHIFT) * inverse
    p = -3.977538827430553e-06
    p = p * t + 7.509794362112711e-06
    p = p * t + 3.782000962594169e-05
    p = p * t - 0.00012138995587520104
    p = p * t - 0.0001459030090878092
    p = p * t + 0.001363469980770585
    p = p * t - 0.002001157799652657
    p = p * t - 0.007502361409999937
    p = p * t + 0.052125763018802736
    p = p * t - 0.17325491629874132
    p = p * t + 0.4136446888675057
    p = p * t - 0.7859110597727191
    p = p * t + 1.2415470625577816
    p = p * t - 1.667866595578838
    p = p * t + 1.9280810471480248
    beyond = density * p * inverse
    return 1.0 - beyond if x > 0.0 else beyond
