"""Smiles of five known models, none of them SVI: exact call prices turned into volatilities.

Each function gives the volatilities of strikes ``exp(k)`` (n,) on a martingale of forward 1 at ``t`` years.
"""

from __future__ import annotations

import math

import numpy as np
from scipy.stats import ncx2

from pricer.market.black import call, implied_deviation
from pricer.market.smile_quotes import SmileQuotes
from tests.unit.smiles import day

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(400)


def cev(k, t, level=0.25, beta=0.4):
    """``dX = level X^beta dW`` with beta < 1, absorbed at 0 (Schroder 1989)."""
    strikes = np.exp(k)
    v = 1.0 / (2.0 * (1.0 - beta))
    scale = 1.0 / (level**2 * (1.0 - beta) ** 2 * t)
    x, y = scale, scale * strikes ** (2.0 * (1.0 - beta))
    puts = strikes * ncx2.sf(x, 2.0 * v, y) - ncx2.cdf(y, 2.0 * v + 2.0, x)
    return _volatilities(k, np.where(k < 0.0, puts + 1.0 - strikes, _cev_calls(strikes, x, y, v)), t)


def _cev_calls(strikes, x, y, v):
    return ncx2.sf(y, 2.0 * v + 2.0, x) - strikes * ncx2.cdf(x, 2.0 * v, y)


def merton(k, t, volatility=0.16, rate=0.6, mean=-0.12, spread=0.10):
    """Lognormal jumps at Poisson times (Merton 1976): a mixture of Black's formula."""
    drift = rate * math.expm1(mean + 0.5 * spread**2)
    total = np.zeros(np.shape(k))
    for n in range(40):
        weight = math.exp(-rate * t + n * math.log(rate * t) - math.lgamma(n + 1))
        forward = math.exp(-drift * t + n * (mean + 0.5 * spread**2))
        deviation = math.sqrt(volatility**2 * t + n * spread**2)
        total = total + weight * forward * call(k - math.log(forward), deviation)
    return _volatilities(k, total, t)


def mixture(k, t, low=0.13, high=0.34, weight=0.7, shift=0.05):
    """Two lognormals of different level and volatility; arbitrage-free in strike by construction."""
    up = 1.0 + shift * math.sqrt(t) * (1.0 - weight)
    down = (1.0 - weight * up) / (1.0 - weight)
    root = math.sqrt(t)
    total = weight * up * call(k - math.log(up), low * root)
    total = total + (1.0 - weight) * down * call(k - math.log(down), high * root)
    return _volatilities(k, total, t)


def heston(k, t, start=0.04, mean=0.05, reversion=1.5, vol_of_vol=0.6, rho=-0.7):
    """Heston (1993) by one integral along the line where its integrand decays evenly (Lewis 2000)."""
    u = 0.5 * (_NODES + 1.0) * (60.0 / math.sqrt(t) + 100.0)
    weights = 0.5 * _WEIGHTS * (60.0 / math.sqrt(t) + 100.0)
    z = u - 0.5j
    c = reversion - 1j * rho * vol_of_vol * z
    d = np.sqrt(c * c + vol_of_vol**2 * (z * z + 1j * z))
    g = (c - d) / (c + d)
    decay = np.exp(-d * t)
    a = reversion * mean / vol_of_vol**2 * ((c - d) * t - 2.0 * np.log((1.0 - g * decay) / (1.0 - g)))
    b = (c - d) / vol_of_vol**2 * (1.0 - decay) / (1.0 - g * decay)
    phi = np.exp(a + b * start)
    integrand = np.real(np.exp(-1j * np.outer(k, u)) * phi) / (u * u + 0.25)
    return _volatilities(k, 1.0 - np.exp(0.5 * np.asarray(k)) / np.pi * (integrand @ weights), t)


def sabr(k, t, level=0.22, rho=-0.45, vol_of_vol=0.9):
    """The asymptotic volatility for beta 1 (Hagan et al. 2002, equation 2.17a)."""
    vol_of_vol = vol_of_vol / math.sqrt(max(t, 0.2))
    z = -vol_of_vol / level * np.asarray(k)
    root = np.sqrt(1.0 - 2.0 * rho * z + z * z)
    ratio = np.where(np.abs(z) < 1e-9, 1.0, z / np.where(np.abs(z) < 1e-9, 1.0, np.log((root + z - rho) / (1.0 - rho))))
    return level * ratio * (1.0 + (rho * vol_of_vol * level / 4.0 + (2.0 - 3.0 * rho**2) / 24.0 * vol_of_vol**2) * t)


MODELS = {"cev": cev, "merton": merton, "mixture": mixture, "heston": heston, "sabr": sabr}


def model_quotes(model, days, n=9, reach=(-2.0, 1.8), rounding=0.0):
    """Quotes of ``model`` at ``n`` strikes within ``reach`` standard deviations of each expiry."""
    out = []
    for count in days:
        t = count / 365
        level = float(MODELS[model](np.array([0.0]), t)[0])
        k = np.linspace(*reach, n) * level * math.sqrt(t)
        volatilities = MODELS[model](k, t)
        if rounding:
            volatilities = np.round(volatilities / rounding) * rounding
        out.append(SmileQuotes.of(day(count), k, volatilities))
    return out


def _volatilities(k, calls, t):
    return implied_deviation(k, calls) / math.sqrt(t)
