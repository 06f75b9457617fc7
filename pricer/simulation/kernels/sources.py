"""A digest of the kernels' sources, for compiled functions to close over.

Numba's disk cache notices edits in the file of the function it stores, but not in what that
function calls: a newer version of this package would silently run older kernels. It does
look at the values a function closes over, so a digest of the kernels' sources is one.
"""

from __future__ import annotations

import hashlib
from functools import lru_cache
from pathlib import Path


@lru_cache(maxsize=1)
def digest() -> int:
    """A number that changes with any kernel source; never 0."""
    sources = hashlib.sha256()
    for path in sorted(Path(__file__).parent.glob("*.py")):
        sources.update(path.read_bytes())
    return int.from_bytes(sources.digest()[:7], "big") + 1
