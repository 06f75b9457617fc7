"""Prices and hedges books of multi-asset options, and says how wrong each number may be."""
