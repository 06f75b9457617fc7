"""Compiled code that is kept on disk and still never older than its sources.

A stored kernel is renewed by the compiler when its own file changes, but not when a file
changes that it only imports from: a newer version of the package would silently run older
kernels. The name under which a kernel is stored follows its function's qualified name, so
a digest of all sources it depends on becomes part of that.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterable
from pathlib import Path
from typing import Any, TypeVar

_Function = TypeVar("_Function", bound=Callable[..., Any])


def digest_of(sources: Iterable[Path]) -> str:
    """A short digest of the contents of ``sources``, whatever their order."""
    digest = hashlib.sha256()
    for path in sorted(sources):
        content = path.read_bytes()
        digest.update(f"{path.name} {len(content)} ".encode())
        digest.update(content)
    return digest.hexdigest()[:16]


def stored_under(digest: str, function: _Function) -> _Function:
    """``function``, about to be compiled, with ``digest`` in the name of what is stored.

    It goes in front: by the last part of its name a function recognises itself in a recursion.
    """
    function.__qualname__ = f"sources_{digest}.{function.__qualname__}"
    return function
