"""Which file an input came from."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class SourceFile:
    """A file that was read, and its SHA-256 digest in hexadecimal."""

    name: str
    sha256: str
