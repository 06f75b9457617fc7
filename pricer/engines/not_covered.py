"""Contracts that no engine values."""

from __future__ import annotations


class NotCovered(ValueError):  # noqa: N818 - it is a statement about the contract, not a fault in it
    """Why a contract is not priced, in words that follow "this contract is not priced:"."""
