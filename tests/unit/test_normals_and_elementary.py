"""The kernels' elementary functions against SciPy's."""

import numpy as np
import pytest
from numba import njit
from scipy.special import ndtr, ndtri

from pricer.simulation.kernels import elementary
from pricer.simulation.kernels.vectors import OPTIONS

normal_from_bits = elementary.normal_from_bits
exp2_single, exp2_double, log_double = elementary.exp2_single, elementary.exp2_double, elementary.log_double
normal_density, normal_distribution = elementary.normal_density, elementary.normal_distribution


@njit(**OPTIONS)
def all_normals(bits, out):
    for p in range(bits.shape[0]):
        out[p] = normal_from_bits(bits[p])


@njit(**OPTIONS)
def all_exp2(y, out):
    for p in range(y.shape[0]):
        out[p] = exp2_single(y[p])


@njit(**OPTIONS)
def all_doubles(x, out):
    for p in range(x.shape[0]):
        out[0, p] = exp2_double(x[p])
        out[1, p] = log_double(abs(x[p]))
        out[2, p] = normal_density(x[p])
        out[3, p] = normal_distribution(x[p], out[2, p])


def normals(bits: np.ndarray) -> np.ndarray:
    out = np.empty(len(bits), dtype=np.float32)
    all_normals(bits, out)
    return out.astype(float)


@pytest.fixture(scope="module")
def bits() -> np.ndarray:
    """Both ends point by point, tails by powers, and the whole range evenly."""
    ends = np.arange(4000)
    tails = (2.0 ** np.linspace(0, 31, 100_000)).astype(np.uint64)
    even = np.linspace(0, 2**32 - 1, 1_000_000).astype(np.uint64)
    parts = (ends, 2**32 - 1 - ends, tails, 2**32 - 1 - tails, even, 2**31 - 2000 + ends)
    return np.unique(np.concatenate([p.astype(np.uint64) for p in parts])).astype(np.uint32)


def test_the_inverse_normal_is_single_precision_over_its_whole_range(bits):
    want = ndtri((bits + 0.5) / 2.0**32)
    error = np.abs(normals(bits) - want)
    worst = error.argmax()
    assert error[worst] < 2e-6, (bits[worst], want[worst])
    assert np.max(error / np.abs(want)) < 1e-6


def test_the_inverse_normal_is_odd_up_to_rounding(bits):
    there, back = normals(bits), -normals(np.uint32(0xFFFFFFFF) - bits)
    assert np.max(np.abs(there - back) / np.maximum(np.abs(there), 1e-9)) < 1e-6


def test_moments_of_the_inverse_normal_carry_the_stated_excess():
    # the whole range in 2^20 equal cells, cell middles; errors of single rounding average out
    middles = (np.arange(2**20, dtype=np.uint64) * 2**12 + 2**11).astype(np.uint32)
    got, want = normals(middles), ndtri((middles + 0.5) / 2.0**32)
    assert abs(np.mean(got)) < 1e-8
    assert np.mean(got**2) - np.mean(want**2) == pytest.approx(elementary.NORMAL_VARIANCE_EXCESS, abs=3e-8)


def test_the_single_power_of_two_keeps_single_precision():
    y = np.linspace(-120, 120, 500_001).astype(np.float32)
    out = np.empty_like(y)
    all_exp2(y, out)
    assert np.max(np.abs(out / np.exp2(y.astype(float)) - 1.0)) < 2e-7
    assert abs(np.mean(out / np.exp2(y.astype(float)) - 1.0)) < 1e-8


def test_double_functions_reach_their_stated_errors():
    x = np.linspace(-37, 37, 400_001)
    x = x[x != 0.0]
    out = np.empty((4, len(x)))
    all_doubles(x, out)
    assert np.max(np.abs(out[0] / np.exp2(x) - 1.0)) < 1e-13
    assert np.max(np.abs(out[1] - np.log(np.abs(x)))) < 2e-12
    assert np.max(np.abs(out[2] - np.exp(-0.5 * x * x) / np.sqrt(2 * np.pi))) < 1e-13
    assert np.max(np.abs(out[3] - ndtr(x))) < 1e-11
    assert np.max(np.abs(out[3] / ndtr(x) - 1.0)[x > -30]) < 1e-9  # relatively too, deep in the tail


def test_the_logarithm_holds_far_from_one():
    x = 10.0 ** np.linspace(-250, 250, 10_001)
    out = np.empty((4, len(x)))
    all_doubles(np.where(x > 100, 1.0, x), out)
    near = x <= 100
    assert np.max(np.abs(out[1][near] - np.log(x[near])) / np.maximum(1.0, np.abs(np.log(x[near])))) < 2e-12
