"""Kernels stored on disk are renewed when a source changes that they only import from."""

from __future__ import annotations

import subprocess
import sys

from pricer.core.stored_code import digest_of, stored_under

HELPER = """
from numba import njit

@njit("float64(float64)", cache=True)
def helper(x):
    return {factor} * x
"""
KERNEL = """
from pathlib import Path
from numba import njit
from helper import helper
from pricer.core.stored_code import digest_of, stored_under

def kernel(x, depth):
    return helper(x) if depth == 0 else kernel(x, depth - 1)

sources = digest_of(Path(__file__).parent.glob("*.py"))
kernel = njit("float64(float64, int64)", cache=True)(stored_under(sources, kernel))
"""


def test_a_stored_kernel_follows_a_change_in_a_file_it_imports_from(tmp_path):
    (tmp_path / "kernel.py").write_text(KERNEL)

    def run(code):
        return subprocess.run(
            [sys.executable, "-c", code], cwd=tmp_path, capture_output=True, text=True, check=True
        ).stdout.split()

    shown = "from kernel import kernel; print(kernel(1.0, 1), sum(kernel.stats.cache_hits.values()))"
    (tmp_path / "helper.py").write_text(HELPER.format(factor="1.0"))
    assert run(shown) == ["1.0", "0"]
    assert run(shown) == ["1.0", "1"]
    (tmp_path / "helper.py").write_text(HELPER.format(factor="22.0"))
    assert run(shown) == ["22.0", "0"]


def test_the_digest_follows_contents_and_names_but_not_order(tmp_path):
    one, two = tmp_path / "one.py", tmp_path / "two.py"
    one.write_text("a")
    two.write_text("b")
    first = digest_of([one, two])
    assert digest_of([two, one]) == first
    one.write_text("b")
    two.write_text("a")
    assert digest_of([one, two]) != first


def test_a_function_still_ends_in_its_own_name():
    def kernel():
        return 1

    assert stored_under("0123", kernel).__qualname__.split(".")[0] == "sources_0123"
    assert kernel.__qualname__.endswith(".kernel")


def test_all_kernels_of_the_closed_forms_are_stored_under_their_sources():
    from pricer.engines.closed_form import compiled, normal_kernels, sum_kernels

    for kernel in (
        compiled.normal_cdf,
        normal_kernels.bivariate,
        normal_kernels.multivariate,
        sum_kernels.conditional,
    ):
        assert kernel.py_func.__qualname__.startswith("sources_")
