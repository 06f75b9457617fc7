"""What legs cannot say."""

from __future__ import annotations


class UnsayableError(Exception):
    """Raised with the reason, in words for the desk, while a contract is taken apart."""
