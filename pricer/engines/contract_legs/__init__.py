"""Contracts as legs of a path, and what these are worth under lognormal levels."""
